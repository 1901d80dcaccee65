"""Enumeration of polyatomic lines: ratios measured in one run.

Run: python tests/benchmarks/lines.py

(a) amplitudes a second in one process against a plain Python dictionary recursion over the same sets,
(b) against the time to stream the same number of float64 through memory, (c) growth of time and peak
memory from 10^4 to 10^7 lines (each in a process of its own), (d) two threads against one.
"""

from __future__ import annotations

import contextlib
import os
import sys
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

import math
import multiprocessing
import time
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np

from ladderband.numerics import quanta_table
from ladderband.numerics.certified_generator import certified_thermal_generator
from ladderband.numerics.enumeration import coupled_problem
from ladderband.numerics.quanta_lists import COST_UNIT, count_sets, quanta_pairs
from ladderband.numerics.quanta_table import Ladder, QuantaTable, amplitude_table
from ladderband.numerics.transition import Transition
from line_oracles import dictionary_amplitudes, random_transition

Prepared = tuple[np.ndarray, np.ndarray, float, np.ndarray]


TWELVE = random_transition(12, 0, total_huang_rhys=4.0, low=700, high=1300)
CASES = {
    "3 modes, 600 K": replace(random_transition(3, 0, total_huang_rhys=2.0), temperature_k=600.0),
    "12 modes, random J": TWELVE,
    "60 modes, full J": random_transition(60, 0, total_huang_rhys=1.5, angle=0.1),
}


def prepared(transition: Transition = TWELVE) -> Prepared:
    """(M, w, c, cost) of a transition; default 12 modes with a random orthogonal J, S = 4, cold."""
    problem = coupled_problem(transition, 1e-3)
    generator, _ = certified_thermal_generator(transition)
    M = np.ascontiguousarray(generator.W[np.ix_(problem.modes, problem.modes)])
    return M, generator.w[problem.modes].copy(), float(np.exp(generator.log_c)), problem.cost


def grown(case: Prepared, budget: float) -> QuantaTable:
    M, w, start, cost = case
    pairs = quanta_pairs(cost, budget, 10**9)
    assert pairs is not None
    return amplitude_table(pairs, Ladder(M, w, start, 1e-16, np.zeros(3), np.zeros((0, len(w)))))


def budget_for(case: Prepared, nodes: int) -> float:
    low, high = 0.0, 60.0
    while high - low > 1e-3:
        middle = 0.5 * (low + high)
        if count_sets(case[3], middle, nodes) > nodes:
            high = middle
        else:
            low = middle
    return float(np.rint(low / COST_UNIT) * COST_UNIT)


def timed(action: object, repeats: int = 3) -> float:
    best = float("inf")
    for _ in range(repeats):
        start = time.perf_counter()
        action()  # type: ignore[operator]
        best = min(best, time.perf_counter() - start)
    return best


def against_dictionary(name: str, case: Prepared, sets: int) -> None:
    budget = budget_for(case, sets)
    pairs = grown(case, budget).pairs
    keys = list(map(tuple, pairs.quanta(np.arange(pairs.count)).tolist()))
    rows, w = case[0].tolist(), case[1].tolist()
    plain = timed(lambda: dictionary_amplitudes(rows, w, case[2], keys, math.sqrt), 1)
    ours = timed(lambda: grown(case, budget), 10)
    count = len(keys)
    print(
        f"{name}, {count} sets: dictionary {1e9 * plain / count:.0f} ns, ours with bounds "
        f"{1e9 * ours / count:.1f} ns an amplitude: {plain / ours:.0f}x (goal 150x)"
    )


def against_memory(case: Prepared) -> None:
    budget = budget_for(case, 1_000_000)
    nodes = count_sets(case[3], budget, 10**9)
    source, target = np.ones(nodes), np.empty(nodes)
    stream = timed(lambda: np.copyto(target, source), 10)
    ours = timed(lambda: grown(case, budget))
    print(f"{nodes} sets: {ours / stream:.0f}x the time to copy as many float64")


def one_size(nodes: int, queue: multiprocessing.Queue) -> None:  # type: ignore[type-arg]
    case = prepared()
    grown(case, 1.0)
    budget = budget_for(case, nodes)
    Path("/proc/self/clear_refs").write_text("5")  # forget the peak of the compiler
    before = peak_megabytes()
    start = time.perf_counter()
    table = grown(case, budget)
    seconds = time.perf_counter() - start
    megabytes = peak_megabytes() - before
    queue.put((len(table.amplitude), seconds, megabytes, float(np.sum(table.amplitude**2))))


def peak_megabytes() -> float:
    """Largest resident memory since it was last forgotten (Linux)."""
    lines = Path("/proc/self/status").read_text().splitlines()
    return float(next(line.split()[1] for line in lines if line.startswith("VmHWM"))) / 1024


def growth() -> None:
    context = multiprocessing.get_context("spawn")
    for nodes in (10**4, 10**5, 10**6, 10**7):
        queue = context.Queue()
        process = context.Process(target=one_size, args=(nodes, queue))
        process.start()
        count, seconds, megabytes, captured = queue.get()
        process.join()
        print(
            f"{count:9d} sets  {seconds:7.3f} s  {1e9 * seconds / count:6.1f} ns/set"
            f"  {megabytes:7.1f} MB  {1e6 * megabytes / count:5.0f} bytes/set  captured {captured:.5f}"
        )


def two_cores(case: Prepared, sets: int) -> None:
    """One table with its large shells shared by two threads, and two tables at once; least of rounds."""
    budget = budget_for(case, sets)

    def one(_: object = None) -> QuantaTable:
        return grown(case, budget)

    alone, shared, both = [], [], []
    for _ in range(6):
        shared.append(timed(one, 1))
        with second_thread_off(), ThreadPoolExecutor(2) as pool:
            alone.append(timed(one, 1))
            both.append(timed(lambda pool=pool: list(pool.map(one, "ab")), 1))
    print(
        f"{sets} sets: one table in two threads {min(alone) / min(shared):.2f}x (goal 1.7x), "
        f"two tables at once {2 * min(alone) / min(both):.2f}x"
    )


@contextlib.contextmanager
def second_thread_off() -> Iterator[None]:
    """Tables without a second thread."""
    quanta_table.THREADED_FROM, before = 10**12, quanta_table.THREADED_FROM
    yield
    quanta_table.THREADED_FROM = before


def main() -> None:
    case = prepared()
    grown(case, 1.0)
    for name, transition in CASES.items():
        against_dictionary(name, prepared(transition), 200_000)
    against_memory(case)
    for sets in (1_000_000, 10_000_000):
        two_cores(case, sets)
    growth()


if __name__ == "__main__":
    main()
