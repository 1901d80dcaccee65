"""What the engine costs: overhead on points of 5 ms, and what a second process gains.

Run: python tests/benchmarks/jobs_engine.py [database URL]

The same points (overlaps to many digits) are computed by bare loops in one and in two fresh
processes and by engines with one and with two, in turns, so that a busy machine slows all alike. The
time of a sweep is from its first claim to the end of its merge. On a machine with other work the
least times mean most; processor times (of the loops, and of the engine with its compute processes)
are shown beside.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import threading
import time
from pathlib import Path
from typing import Any

import psutil

sys.path.insert(0, str(Path(__file__).parents[1]))

from jobs.engine_helpers import put
from ladderband.jobs.database import Database
from ladderband.jobs.dispatcher import Engine
from ladderband.jobs.executors.local import ChildOptions, LocalExecutor
from ladderband.jobs.kinds import SWEEPS, load_kinds
from ladderband.jobs.submissions import view
from ladderband.jobs.sweeps import parse_plan
from ladderband.numerics.accuracy import Deadline
from ladderband.web.service import REFERENCE

POINTS = 800
ROUNDS = 5

Times = tuple[float, float]
"""Seconds on the wall, and of processors."""


def sweep(number: int) -> dict[str, Any]:
    """A sweep nobody sent before; a point takes some 5 ms."""
    return {
        "resource": "overlaps",
        "request": {
            "wavenumber_initial_cm1": 1000.0 + number,
            "wavenumber_final_cm1": 900.0,
            "displacement": 1.0,
            "v_initial_max": 25,
            "v_final_max": 25,
            "digits": 50,
        },
        "vary": [
            {"pointer": "/displacement", "range": {"start": 0.1, "stop": 3.0, "points": POINTS}}
        ],
        "collect": ["/overlap_integrals/7/9", "/sums/3"],
    }


def loop() -> None:
    """A process of the bare loop: says when it is ready, waits for the word, tells its times."""
    kind = load_kinds(REFERENCE)["overlaps"]
    print("ready", flush=True)
    number, first, step = map(int, sys.stdin.readline().split())
    plan = parse_plan(sweep(number))
    begun, used = time.perf_counter(), time.process_time()
    for point in range(first, POINTS, step):
        kind.document(plan.request(point), Deadline.none())
    print(time.perf_counter() - begun, time.process_time() - used, flush=True)


def by_loops(count: int, number: int) -> Times:
    command = [sys.executable, __file__, "loop"]
    started = [
        subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)
        for _ in range(count)
    ]
    for process in started:
        assert process.stdout is not None
        assert process.stdout.readline() == "ready\n"
    for first, process in enumerate(started):
        assert process.stdin is not None
        process.stdin.write(f"{number} {first} {count}\n")
        process.stdin.flush()
    told = [process.communicate()[0].split() for process in started]
    return max(float(t[0]) for t in told), sum(float(t[1]) for t in told)


def children_s() -> float:
    times = [child.cpu_times() for child in psutil.Process().children()]
    return sum(found.user + found.system for found in times)


def by_engine(database: Database, count: int, number: int) -> Times:
    executor = LocalExecutor(count, ChildOptions(REFERENCE, nice=0))
    while executor.free < count:
        executor.wait(0.1)
    job = put(database, SWEEPS, sweep(number), total=POINTS, point_s=0.005)
    engine = Engine(database, executor)
    thread = threading.Thread(target=engine.run)
    used = time.process_time() + children_s()
    thread.start()
    while not view(database, job.id).ended:
        time.sleep(0.2)
    used = time.process_time() + children_s() - used
    engine.stop()
    thread.join()
    ended = view(database, job.id)
    assert ended.state == "succeeded"
    assert ended.started is not None
    assert ended.finished is not None
    return ended.finished - ended.started, used


def measured(database: Database) -> dict[str, list[Times]]:
    times: dict[str, list[Times]] = {name: [] for name in ("loop", "engine", "loops", "engines")}
    for number in range(ROUNDS):
        times["loop"].append(by_loops(1, 2 * number))
        times["engine"].append(by_engine(database, 1, 2 * number))
        times["loops"].append(by_loops(2, 2 * number + 1))
        times["engines"].append(by_engine(database, 2, 2 * number + 1))
    return times


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        url = sys.argv[1] if len(sys.argv) > 1 else f"sqlite:///{folder}/jobs.db"
        database = Database(url)
        database.migrate()
        times = measured(database)
        database.close()
    load = " ".join(f"{x:.1f}" for x in os.getloadavg())
    print(f"{POINTS} points on {url.partition(':')[0]}, load {load}; wall (processors)")
    for name, found in times.items():
        print(f"  {name:7} " + "   ".join(f"{wall:.2f} s ({cpu:.2f} s)" for wall, cpu in found))
    show("engine against loop, one process", times["engine"], times["loop"])
    show("engine against loops, two processes", times["engines"], times["loops"])
    show("engine with one process against two", times["engine"], times["engines"])


def show(what: str, one: list[Times], other: list[Times]) -> None:
    for which, name in enumerate(("wall", "processors")):
        ratios = [a[which] / b[which] for a, b in zip(one, other, strict=True)]
        least = min(a[which] for a in one) / min(b[which] for b in other)
        each = " ".join(f"{x:.3f}" for x in sorted(ratios))
        middle = statistics.median(ratios)
        print(f"{what}, {name}: least {least:.3f}   median {middle:.3f}   each {each}")


if __name__ == "__main__":
    loop() if sys.argv[1:] == ["loop"] else main()
