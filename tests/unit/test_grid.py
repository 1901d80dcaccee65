"""The trapezoidal route and its bound."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from ladderband.numerics import grid
from ladderband.numerics.hermite import forbidden_table
from ladderband.numerics.ladder import PairCoefficients, pair_coefficients
from ladderband.numerics.oscillators import OscillatorColumns, one_pair
from overlap_oracles import exact_pair, worst_error

CASES = [
    pytest.param(1.0, 0.0, 30, 30, id="identical"),
    pytest.param(1.0, 1e-9, 30, 30, id="tiny-shift"),
    pytest.param(1.0, 5.0, 60, 60, id="shift-5"),
    pytest.param(0.25, 6.0, 80, 80, id="ratio-quarter-shift-6"),
    pytest.param(0.02, 3.0, 100, 100, id="ratio-1/50"),
    pytest.param(50.0, -3.0, 100, 100, id="ratio-50"),
    pytest.param(50.0, 0.5, 120, 3, id="wide-column"),
    pytest.param(1.0, 63.0, 3, 3, id="disjoint"),
    pytest.param(1.0, 40.0, 700, 20, id="far-and-high"),
]


def tables_of(
    coefficients: PairCoefficients, v: int, n: int, tolerance: float
) -> tuple[np.ndarray, np.ndarray]:
    count = len(coefficients.c)
    tables, bounds = np.full((count, v + 1, n + 1), np.nan), np.zeros(count)
    grid.grid_tables(coefficients, np.arange(count), tables, bounds, tolerance)
    return tables, bounds


@pytest.mark.parametrize("tolerance", [1e-3, 1e-10, 1e-12])
@pytest.mark.parametrize(("t", "delta", "v", "n"), CASES)
def test_the_bound_holds(t: float, delta: float, v: int, n: int, tolerance: float) -> None:
    tables, bounds = tables_of(pair_coefficients(one_pair(1.0, t, delta)), v, n, tolerance)
    assert worst_error(tables[0], exact_pair(Fraction(t), Fraction(delta))) <= bounds[0]
    assert bounds[0] < 1e-10


@pytest.mark.parametrize("log_target", [-3.0, -8.0, -15.0])
def test_step_and_range_errors_are_inside_the_bound_when_they_dominate(log_target: float) -> None:
    """A coarse, short grid on purpose: the discretisation part of the bound is put to the test."""
    for t, delta, v, n in [(1.0, 1.0, 10, 10), (0.25, 4.0, 20, 5), (20.0, -1.0, 5, 40)]:
        table = np.zeros((v + 1, n + 1))
        k = pair_coefficients(one_pair(1.0, t, delta))
        bound = grid.grid_table(
            k.scale[0], k.displacement[0], 0.0, log_target, forbidden_table(3000), table
        )
        error = worst_error(table, exact_pair(Fraction(t), Fraction(delta)))
        assert error <= bound
        assert bound < 100 * np.exp(log_target)


def test_a_truncated_range_is_noticed() -> None:
    """Mutation check of the test above: with a step 1.6 times as wide the claimed bound must fail."""
    k = pair_coefficients(one_pair(1.0, 1.0, 1.0))
    first, count, h, _, _, claimed = grid.plan(k.scale[0], k.displacement[0], 10, 10, -20.0)
    from ladderband.numerics.hermite import hermite_functions

    x = (first + np.arange(0, count)) * h
    x = np.arange(x[0], x[-1], 1.6 * h)
    value = 1.6 * h * hermite_functions(x - 1.0, 10)[0] @ hermite_functions(x, 10)[0].T
    assert worst_error(value, exact_pair(1, 1)) > claimed


def test_a_batch_equals_its_members() -> None:
    rng = np.random.default_rng(4)
    g, f, delta = rng.uniform(100, 3000, 5), rng.uniform(100, 3000, 5), 8 * rng.normal(size=5)
    together, bounds = tables_of(pair_coefficients(OscillatorColumns(g, f, delta)), 12, 9, 1e-10)
    for i in range(5):
        alone, bound = tables_of(pair_coefficients(one_pair(g[i], f[i], delta[i])), 12, 9, 1e-10)
        assert np.array_equal(alone[0], together[i])
        assert bound[0] == bounds[i]


def test_blocks_join_to_the_same_table() -> None:
    """More points than one block holds: the blocked sum stays inside the bound."""
    v = 500
    tables, bounds = tables_of(pair_coefficients(one_pair(1.0, 1.0, 1.0)), v, v, 1e-10)
    assert grid.grid_points(pair_coefficients(one_pair(1.0, 1.0, 1.0)), 0, v, v) > grid.BLOCK
    assert worst_error(tables[0], exact_pair(1, 1)) <= bounds[0] < 2e-11
