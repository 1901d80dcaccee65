"""What the engine costs: overhead on points of 5 ms, and what a second process gains.

Run: python tests/benchmarks/jobs_engine.py [database URL]

The same points are computed three ways, interleaved, so that a busy machine slows all alike: by a
plain loop in this process, by an engine with one compute process, by an engine with two. Figures are
ratios of the median times, from the first claim to the end of the merge.
"""

from __future__ import annotations

import os
import statistics
import sys
import tempfile
import threading
import time
from pathlib import Path

ROOT = Path(__file__).parents[1]
sys.path.insert(0, str(ROOT))
os.environ["PYTHONPATH"] = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])

from jobs.engine_helpers import KINDS, put, until  # noqa: E402
from jobs.sample_kinds import kinds  # noqa: E402
from ladderband.jobs.database import Database  # noqa: E402
from ladderband.jobs.dispatcher import Engine  # noqa: E402
from ladderband.jobs.executors.local import ChildOptions, LocalExecutor  # noqa: E402
from ladderband.jobs.kinds import SWEEPS  # noqa: E402
from ladderband.jobs.submissions import view  # noqa: E402
from ladderband.numerics.accuracy import Deadline  # noqa: E402

POINTS = 1000
ROUNDS = 5


def steps_of_5_ms() -> int:
    """How many steps of the test kind take 5 ms here."""
    work = kinds()["work"]
    begun = time.process_time()
    work.document({"steps": 2_000_000, "x": 1.0}, Deadline.none())
    return int(2_000_000 * 0.005 / (time.process_time() - begun))


def plain(steps: int) -> float:
    work = kinds()["work"]
    begun = time.perf_counter()
    for point in range(POINTS):
        work.document({"steps": steps, "x": float(point)}, Deadline.none())
    return time.perf_counter() - begun


def by_engine(database: Database, slots: int, steps: int, number: int) -> float:
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
    thread.start()
    until(lambda: view(database, job.id).ended, 600)
    engine.stop()
    thread.join()
    ended = view(database, job.id)
    assert ended.state == "succeeded"
    assert ended.started is not None
    assert ended.finished is not None
    return ended.finished - ended.started


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        url = sys.argv[1] if len(sys.argv) > 1 else f"sqlite:///{folder}/jobs.db"
        database = Database(url)
        database.migrate()
        steps = steps_of_5_ms()
        times: dict[str, list[float]] = {"plain": [], "one": [], "two": []}
        for number in range(ROUNDS):
            times["plain"].append(plain(steps))
            times["one"].append(by_engine(database, 1, steps, 2 * number))
            times["two"].append(by_engine(database, 2, steps, 2 * number + 1))
        database.close()
    middle = {name: statistics.median(found) for name, found in times.items()}
    print(f"{POINTS} points, {steps} steps each, on {url.partition(':')[0]}")
    for name, found in times.items():
        print(
            f"  {name:5}  median {middle[name]:.2f} s   all " + " ".join(f"{t:.2f}" for t in found)
        )
    pairs = zip(times["plain"], times["one"], times["two"], strict=True)
    ratios = [(one / base - 1, one / two) for base, one, two in pairs]
    overheads, gains = sorted(r[0] for r in ratios), sorted(r[1] for r in ratios)
    print(f"overhead of one process over a plain loop: {statistics.median(overheads):.1%}")
    print(f"  each round: {' '.join(f'{x:.1%}' for x in overheads)}")
    print(f"two processes against one: {statistics.median(gains):.2f}x")
    print(f"  each round: {' '.join(f'{x:.2f}' for x in gains)}")


if __name__ == "__main__":
    main()
