"""What the engine costs: overhead on points of 5 ms, and what a second process gains.

Run: python tests/benchmarks/jobs_engine.py [database URL]

The same points are computed three ways, interleaved, so that a busy machine slows all alike: by a
plain loop in this process, by an engine with one compute process, by an engine with two. The time is
from the first claim to the end of the merge. On a machine with other work only the processor times
mean something: those of the compute processes and of the engine against those of the plain loop.
"""

from __future__ import annotations

import os
import statistics
import sys
import tempfile
import threading
import time
from pathlib import Path

import psutil

ROOT = Path(__file__).parents[1]
sys.path.insert(0, str(ROOT))
os.environ["PYTHONPATH"] = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])

from jobs.engine_helpers import KINDS, put  # noqa: E402
from jobs.sample_kinds import kinds  # noqa: E402
from ladderband.jobs.database import Database  # noqa: E402
from ladderband.jobs.dispatcher import Engine  # noqa: E402
from ladderband.jobs.executors.local import ChildOptions, LocalExecutor  # noqa: E402
from ladderband.jobs.kinds import SWEEPS  # noqa: E402
from ladderband.jobs.submissions import view  # noqa: E402
from ladderband.numerics.accuracy import Deadline  # noqa: E402

POINTS = 600
ROUNDS = 3


def steps_of_5_ms() -> int:
    """How many steps of the test kind take 5 ms here."""
    work = kinds()["work"]
    begun = time.process_time()
    work.document({"steps": 2_000_000, "x": 1.0}, Deadline.none())
    return int(2_000_000 * 0.005 / (time.process_time() - begun))


Times = tuple[float, float]
"""Seconds on the wall, and of processors."""


def plain(steps: int) -> Times:
    work = kinds()["work"]
    begun, used = time.perf_counter(), time.process_time()
    for point in range(POINTS):
        work.document({"steps": steps, "x": float(point)}, Deadline.none())
    return time.perf_counter() - begun, time.process_time() - used


def children_s() -> float:
    times = [child.cpu_times() for child in psutil.Process().children()]
    return sum(found.user + found.system for found in times)


def by_engine(database: Database, slots: int, steps: int, number: int) -> Times:
    executor = LocalExecutor(slots, ChildOptions(KINDS, nice=0))
    while executor.free < slots:
        executor.wait(0.1)
    request = {
        "resource": "work",
        "request": {"steps": steps, "x": 0.0, "number": number},
        "vary": [{"pointer": "/x", "values": [float(i) for i in range(POINTS)]}],
        "collect": ["/y"],
    }
    job = put(database, SWEEPS, request, total=POINTS, point_s=0.005)
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


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        url = sys.argv[1] if len(sys.argv) > 1 else f"sqlite:///{folder}/jobs.db"
        database = Database(url)
        database.migrate()
        steps = steps_of_5_ms()
        times: dict[str, list[Times]] = {"plain": [], "one": [], "two": []}
        for number in range(ROUNDS):
            times["plain"].append(plain(steps))
            times["one"].append(by_engine(database, 1, steps, 2 * number))
            times["two"].append(by_engine(database, 2, steps, 2 * number + 1))
        database.close()
    print(
        f"{POINTS} points, {steps} steps each, on {url.partition(':')[0]}, load {os.getloadavg()}"
    )
    for name, found in times.items():
        print(f"  {name:5} " + "   ".join(f"{wall:.2f} s ({cpu:.2f} s)" for wall, cpu in found))
    rounds = list(zip(times["plain"], times["one"], times["two"], strict=True))
    show(
        "overhead of the engine, processor time", [one[1] / base[1] - 1 for base, one, _ in rounds]
    )
    show("overhead of the engine, wall", [one[0] / base[0] - 1 for base, one, _ in rounds])
    show("two processes against one, wall", [one[0] / two[0] for _, one, two in rounds])


def show(what: str, found: list[float]) -> None:
    each = " ".join(f"{x:.3f}" for x in sorted(found))
    print(f"{what}: median {statistics.median(found):.3f}   each round: {each}")


if __name__ == "__main__":
    main()
