"""The tree of quanta: the right sets, the right amplitudes, and bounds that hold."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from ladderband.numerics import quanta_tree
from ladderband.numerics.certified_generator import certified_thermal_generator
from ladderband.numerics.quanta_tree import (
    COST_UNIT,
    QuantaTree,
    count_nodes,
    grow_tree,
    quanta_of,
)
from line_oracles import dictionary_amplitudes, multiprecision_amplitudes, random_transition

NONE = (np.zeros(3), np.zeros((0, 1)))


def costs(rng: np.random.Generator, indices: int, width: int) -> np.ndarray:
    """Random non-decreasing costs, some flat (a displaced mode), sorted by the cost of one quantum."""
    steps = rng.exponential(1.0, (indices, width)) * (rng.random((indices, width)) > 0.3)
    steps = np.rint(steps / COST_UNIT) * COST_UNIT
    steps[:, 0] = 0.0
    table = np.cumsum(steps, axis=1)
    return np.ascontiguousarray(table[np.argsort(table[:, 1], kind="stable")])


def sets_below(cost: np.ndarray, budget: float) -> list[tuple[int, ...]]:
    indices, width = cost.shape
    every = itertools.product(range(width), repeat=indices)
    return [k for k in every if sum(cost[i, n] for i, n in enumerate(k)) <= budget]


def tree_of(
    M: np.ndarray, w: np.ndarray, start: float, cost: np.ndarray, budget: float
) -> QuantaTree:
    nodes = count_nodes(cost, budget, 10**7)
    constant, linear = NONE
    return grow_tree(M, w, start, 1e-16, cost, budget, nodes, constant, linear)


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize(("indices", "width"), [(1, 6), (2, 6), (3, 5), (5, 3)])
def test_exactly_the_sets_below_the_budget_each_once(seed: int, indices: int, width: int) -> None:
    rng = np.random.default_rng(seed)
    cost = costs(rng, indices, width)
    for budget in (0.0, 0.7, 2.3, 5.0):
        expected = sets_below(cost, budget)
        assert count_nodes(cost, budget, 10**6) == len(expected)
        tree = tree_of(np.zeros((indices, indices)), np.ones(indices), 1.0, cost, budget)
        found = quanta_of(tree, np.arange(len(tree.amplitude)), indices)
        assert sorted(map(tuple, found.tolist())) == sorted(expected)


def test_counting_stops_at_the_limit() -> None:
    assert count_nodes(np.zeros((6, 9)), 1.0, 1000) == 1001


@pytest.mark.parametrize("seed", range(4))
def test_amplitudes_equal_the_dictionary_recursion(seed: int) -> None:
    rng = np.random.default_rng(seed)
    indices = 4
    M = rng.normal(size=(indices, indices)) * 0.3
    M = M + M.T
    w = rng.normal(size=indices)
    cost = costs(rng, indices, 5)
    tree = tree_of(M, w, 0.37, cost, 4.0)
    quanta = quanta_of(tree, np.arange(len(tree.amplitude)), indices)
    expected = dictionary_amplitudes(M, w, 0.37, sets_below(cost, 4.0))
    for key, value, error in zip(quanta.tolist(), tree.amplitude, tree.error, strict=True):
        assert abs(value - expected[tuple(key)]) <= 2 * error


@pytest.mark.parametrize(
    ("n", "total", "budget"), [(1, 2.0, 40.0), (2, 6.0, 20.0), (4, 3.0, 9.0), (6, 1.0, 7.0)]
)
def test_the_running_bound_covers_the_true_error(n: int, total: float, budget: float) -> None:
    """Truth: the same sets in mpmath with 40 digits, generator included."""
    transition = random_transition(n, 5, total_huang_rhys=total)
    generator, _ = certified_thermal_generator(transition)
    M, w = generator.W[n:, n:].copy(), generator.w[n:].copy()
    width = 30 if n == 1 else 14
    cost = np.tile(np.arange(width, dtype=float), (n, 1)) * (1.0 if n > 1 else 1.25)
    nodes = count_nodes(cost, budget, 10**6)
    constant, linear = NONE
    start = np.exp(generator.log_c)
    tree = grow_tree(M, w, start, 1e-13, cost, budget, nodes, constant, linear)
    quanta = list(map(tuple, quanta_of(tree, np.arange(nodes), n).tolist()))
    truth = multiprecision_amplitudes(transition, quanta)
    errors = np.array(
        [float(abs(truth[k] - a)) for k, a in zip(quanta, tree.amplitude, strict=True)]
    )
    assert np.all(errors <= tree.error)
    assert tree.error.max() < 1e-9


def test_shared_shells_give_the_same_tree(monkeypatch: pytest.MonkeyPatch) -> None:
    """Two threads a shell against one: bit for bit."""
    rng = np.random.default_rng(9)
    M = rng.normal(size=(6, 6)) * 0.2
    M = M + M.T
    cost = costs(rng, 6, 7)
    alone = tree_of(M, rng.normal(size=6), 1.0, cost, 6.0)
    rng = np.random.default_rng(9)
    rng.normal(size=(6, 6))
    costs(rng, 6, 7)
    monkeypatch.setattr(quanta_tree, "THREADED_FROM", 2)
    monkeypatch.setattr(quanta_tree, "INNER_FROM", 2)
    shared = tree_of(M, rng.normal(size=6), 1.0, cost, 6.0)
    assert len(alone.amplitude) > 500
    for one, two in zip(vars(alone).values(), vars(shared).values(), strict=True):
        assert np.array_equal(one, two)
