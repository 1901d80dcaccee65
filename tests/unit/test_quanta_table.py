"""The table of quanta: the right sets, the right amplitudes, and bounds that hold."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from ladderband.numerics import quanta_lists, quanta_table
from ladderband.numerics.certified_generator import certified_thermal_generator
from ladderband.numerics.quanta_lists import (
    COST_UNIT,
    count_sets,
    lower_neighbours,
    quanta_list,
    quanta_pairs,
)
from ladderband.numerics.quanta_table import Ladder, QuantaTable, amplitude_table
from line_oracles import dictionary_amplitudes, multiprecision_amplitudes, random_transition


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


def table_of(
    M: np.ndarray,
    w: np.ndarray,
    start: float,
    cost: np.ndarray,
    budget: float,
    error: float = 1e-16,
) -> QuantaTable:
    pairs = quanta_pairs(cost, budget, 10**7)
    assert pairs is not None
    return amplitude_table(pairs, Ladder(M, w, start, error, np.zeros(3), np.zeros((0, len(w)))))


def all_quanta(table: QuantaTable) -> list[tuple[int, ...]]:
    return list(map(tuple, table.pairs.quanta(np.arange(table.pairs.count)).tolist()))


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize(("indices", "width"), [(1, 6), (2, 6), (3, 5), (5, 3)])
def test_exactly_the_sets_below_the_budget_each_once(seed: int, indices: int, width: int) -> None:
    rng = np.random.default_rng(seed)
    cost = costs(rng, indices, width)
    for budget in (0.0, 0.7, 2.3, 5.0):
        expected = sets_below(cost, budget)
        assert count_sets(cost, budget, 10**6) == len(expected)
        pairs = quanta_pairs(cost, budget, len(expected))
        assert pairs is not None
        found = pairs.quanta(np.arange(pairs.count))
        assert sorted(map(tuple, found.tolist())) == sorted(expected)


def test_counting_stops_at_the_limit() -> None:
    assert count_sets(np.zeros((6, 9)), 1.0, 1000) == 1001


def test_more_sets_than_the_limit_are_no_pairs() -> None:
    """Each list alone is within the limit, their pairs are not; and then not even the lists."""
    cost = np.zeros((4, 9))
    assert quanta_pairs(cost, 1.0, 9**4) is not None
    assert quanta_pairs(cost, 1.0, 9**4 - 1) is None
    assert quanta_pairs(cost, 1.0, 80) is None


def test_lower_neighbours_are_one_quantum_below() -> None:
    sets = quanta_list(costs(np.random.default_rng(3), 4, 6), 4.0, 10**6)
    assert sets is not None
    at, place, index, root = lower_neighbours(sets.quanta)
    for k in range(len(sets.quanta)):
        for e in range(int(at[k]), int(at[k + 1])):
            lowered = sets.quanta[k].astype(int)
            assert root[e] == np.sqrt(lowered[int(index[e])])
            lowered[int(index[e])] -= 1
            assert (sets.quanta[int(place[e])] == lowered).all()
        assert at[k + 1] - at[k] == np.count_nonzero(sets.quanta[k])


def test_sets_with_one_key_are_told_apart(monkeypatch: pytest.MonkeyPatch) -> None:
    """The first factors give all sets of a shell one key: others are taken."""
    draws = iter([np.ones(2, np.uint64), np.array([1, 2**40 + 1], np.uint64)])

    class Drawn:
        def integers(self, *_: object, **__: object) -> np.ndarray:
            return next(draws)

    monkeypatch.setattr(quanta_lists.np.random, "default_rng", lambda seed: Drawn())
    quanta = np.array([[0, 0], [1, 0], [0, 1], [1, 1]], np.uint16)
    _, place, _, _ = lower_neighbours(quanta)
    assert place.tolist() == [0, 0, 2, 1]
    assert next(draws, None) is None


@pytest.mark.parametrize("seed", range(4))
def test_amplitudes_equal_the_dictionary_recursion(seed: int) -> None:
    rng = np.random.default_rng(seed)
    indices = 4
    M = rng.normal(size=(indices, indices)) * 0.3
    M = M + M.T
    w = rng.normal(size=indices)
    cost = costs(rng, indices, 5)
    table = table_of(M, w, 0.37, cost, 4.0)
    expected = dictionary_amplitudes(M, w, 0.37, sets_below(cost, 4.0))
    for key, value, error in zip(all_quanta(table), table.amplitude, table.error, strict=True):
        assert abs(value - expected[key]) <= 2 * error


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
    table = table_of(M, w, float(np.exp(generator.log_c)), cost, budget, 1e-13)
    quanta = all_quanta(table)
    truth = multiprecision_amplitudes(transition, quanta)
    errors = np.array(
        [float(abs(truth[k] - a)) for k, a in zip(quanta, table.amplitude, strict=True)]
    )
    assert np.all(errors <= table.error)
    assert table.error.max() < 1e-9


def test_shared_shells_give_the_same_table(monkeypatch: pytest.MonkeyPatch) -> None:
    """Two threads a shell against one, with a moment: bit for bit."""
    rng = np.random.default_rng(9)
    M, w = rng.normal(size=(6, 6)) * 0.2, rng.normal(size=6)
    pairs = quanta_pairs(costs(rng, 6, 7), 6.0, 10**6)
    assert pairs is not None
    ladder = Ladder(M + M.T, w, 1.0, 1e-16, rng.normal(size=3), rng.normal(size=(3, 6)))
    alone = amplitude_table(pairs, ladder)
    monkeypatch.setattr(quanta_table, "THREADED_FROM", 2)
    shared = amplitude_table(pairs, ladder)
    assert pairs.count > 500
    for name in ("amplitude", "error", "moment", "moment_error"):
        assert np.array_equal(getattr(alone, name), getattr(shared, name))


def test_moment_amplitudes_equal_their_sum() -> None:
    """m_0 S(k) + sum_j m_j sqrt(k_j) S(k - e_j), term by term."""
    rng = np.random.default_rng(2)
    M, w = rng.normal(size=(4, 4)) * 0.2, rng.normal(size=4)
    pairs = quanta_pairs(costs(rng, 4, 6), 4.0, 10**6)
    assert pairs is not None
    ladder = Ladder(M + M.T, w, 0.6, 1e-16, rng.normal(size=3), rng.normal(size=(3, 4)))
    table = amplitude_table(pairs, ladder)
    found = dict(zip(all_quanta(table), table.amplitude, strict=True))
    for place, key in enumerate(all_quanta(table)):
        expected = ladder.constant * found[key]
        for j in np.flatnonzero(key):
            lower = tuple(n - (i == j) for i, n in enumerate(key))
            expected = expected + ladder.linear[:, j] * np.sqrt(key[j]) * found[lower]
        assert np.all(np.abs(table.moment[:, place] - expected) <= table.moment_error[:, place])
