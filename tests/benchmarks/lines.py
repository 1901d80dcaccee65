"""Enumeration of polyatomic lines: ratios measured in one run.

Run: python tests/benchmarks/lines.py

(a) amplitudes a second in one process against a plain Python dictionary recursion over the same sets,
(b) against the time to stream the same number of float64 through memory, (c) growth of time and peak
memory from 10^4 to 10^7 lines (each in a process of its own), (d) two threads against one.
"""

from __future__ import annotations

import os
import sys
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

import multiprocessing
import resource
import threading
import time

import numpy as np

from ladderband.numerics.certified_generator import certified_thermal_generator
from ladderband.numerics.enumeration import coupled_problem
from ladderband.numerics.quanta_tree import (
    COST_UNIT,
    QuantaTree,
    count_nodes,
    grow_tree,
    quanta_of,
)
from line_oracles import dictionary_amplitudes, random_transition

Prepared = tuple[np.ndarray, np.ndarray, float, np.ndarray]


def prepared() -> Prepared:
    """12 modes with a random orthogonal J, total S = 4, cold: (M, w, c, cost)."""
    transition = random_transition(12, 0, total_huang_rhys=4.0, low=700, high=1300)
    problem = coupled_problem(transition, 1e-3)
    generator, _ = certified_thermal_generator(transition)
    M = np.ascontiguousarray(generator.W[np.ix_(problem.modes, problem.modes)])
    return M, generator.w[problem.modes].copy(), float(np.exp(generator.log_c)), problem.cost


def grown(case: Prepared, budget: float) -> QuantaTree:
    M, w, start, cost = case
    nodes = count_nodes(cost, budget, 10**9)
    none = np.zeros((0, len(w)))
    return QuantaTree(*grow_tree(M, w, start, 1e-16, cost, budget, nodes, np.zeros(3), none))


def budget_for(case: Prepared, nodes: int) -> float:
    low, high = 0.0, 60.0
    while high - low > 1e-3:
        middle = 0.5 * (low + high)
        if count_nodes(case[3], middle, nodes) > nodes:
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


def against_dictionary(case: Prepared) -> None:
    budget = budget_for(case, 20_000)
    tree = grown(case, budget)
    keys = list(map(tuple, quanta_of(tree, np.arange(len(tree.amplitude)), len(case[1])).tolist()))
    rows, w = case[0].tolist(), case[1].tolist()
    import math

    plain = timed(lambda: dictionary_amplitudes(rows, w, case[2], keys, math.sqrt), 2)
    ours = timed(lambda: grown(case, budget), 10)
    count = len(keys)
    print(
        f"{count} sets: dictionary {1e9 * plain / count:.0f} ns, ours with bounds "
        f"{1e9 * ours / count:.1f} ns an amplitude: {plain / ours:.0f}x (goal 150x)"
    )


def against_memory(case: Prepared) -> None:
    budget = budget_for(case, 1_000_000)
    nodes = count_nodes(case[3], budget, 10**9)
    source, target = np.ones(nodes), np.empty(nodes)
    stream = timed(lambda: np.copyto(target, source), 10)
    ours = timed(lambda: grown(case, budget))
    print(f"{nodes} sets: {ours / stream:.0f}x the time to copy as many float64")


def one_size(nodes: int, queue: multiprocessing.Queue) -> None:  # type: ignore[type-arg]
    case = prepared()
    grown(case, 1.0)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    budget = budget_for(case, nodes)
    start = time.perf_counter()
    tree = grown(case, budget)
    seconds = time.perf_counter() - start
    after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    captured = float(np.sum(tree.amplitude**2))
    queue.put((len(tree.amplitude), seconds, (after - before) / 1024.0, captured))


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


def two_threads(case: Prepared) -> None:
    budget = budget_for(case, 300_000)

    def both(count: int) -> None:
        threads = [threading.Thread(target=grown, args=(case, budget)) for _ in range(count)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()

    def in_turn() -> None:
        both(1)
        both(1)

    ratio = timed(in_turn, 6) / timed(lambda: both(2), 6)
    print(f"two threads against one: {ratio:.2f}x (goal 1.7x)")


def main() -> None:
    case = prepared()
    grown(case, 1.0)
    against_dictionary(case)
    against_memory(case)
    two_threads(case)
    growth()


if __name__ == "__main__":
    main()
