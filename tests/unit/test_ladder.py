"""The weighted ladder recursion and its bound."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from ladderband.numerics.ladder import ladder_tables, pair_coefficients, propagated
from ladderband.numerics.oscillators import OscillatorColumns, one_pair
from overlap_oracles import exact_pair, worst_error

CASES = [
    pytest.param(1.0, 0.0, 40, 40, id="identical"),
    pytest.param(1.0, 1.0, 0, 30, id="one-row"),
    pytest.param(1.0, 1.0, 60, 60, id="displaced"),
    pytest.param(0.5, 0.0, 80, 80, id="distorted"),
    pytest.param(0.75, -2.0, 50, 70, id="displaced-distorted"),
    pytest.param(50.0, 1.5, 30, 90, id="ratio-50"),
    pytest.param(1.0, 3.0, 60, 60, id="shift-3"),
    pytest.param(1.0, 5.0, 60, 60, id="shift-5"),
]


@pytest.mark.parametrize(("t", "delta", "v", "n"), CASES)
def test_the_bound_holds(t: float, delta: float, v: int, n: int) -> None:
    tables, bounds = ladder_tables(pair_coefficients(one_pair(1.0, t, delta)), v, n)
    error = worst_error(tables[0], exact_pair(Fraction(t), Fraction(delta)))
    assert error <= bounds[0]
    assert bounds[0] < 1e-6


def textbook_table(
    w_yy: float, w_yz: float, w: tuple[float, float], c: float, top: int
) -> np.ndarray:
    """The recursion as every text prints it: raise n first, then v."""
    table = np.zeros((top + 1, top + 1))
    for v in range(top + 1):
        for n in range(top + 1):
            if n:
                value = w[1] * table[v, n - 1]
                if n > 1:
                    value -= w_yy * np.sqrt(n - 1) * table[v, n - 2]
                if v:
                    value += w_yz * np.sqrt(v) * table[v - 1, n - 1]
                table[v, n] = value / np.sqrt(n)
            elif v:
                value = w[0] * table[v - 1, 0]
                if v > 1:
                    value += w_yy * np.sqrt(v - 1) * table[v - 2, 0]
                table[v, 0] = value / np.sqrt(v)
            else:
                table[0, 0] = c
    return table


def test_the_textbook_form_loses_everything_where_the_weighted_form_does_not() -> None:
    """Displacement 5, 60 x 60 quanta: an error near 0.5 against one near 1e-15."""
    k = pair_coefficients(one_pair(1.0, 1.0, 5.0))
    naive = textbook_table(k.w_yy[0], k.w_yz[0], (k.w_y[0], k.w_z[0]), k.c[0], 60)
    weighted = ladder_tables(k, 60, 60)[0][0]
    truth = exact_pair(1, 5)
    assert worst_error(naive, truth) > 1e-3
    assert worst_error(weighted, truth) < 1e-14


@pytest.mark.parametrize("delta", [30.0, 60.0], ids=str)
def test_a_large_displacement_is_refused_by_the_bound(delta: float) -> None:
    _, bounds = ladder_tables(pair_coefficients(one_pair(1.0, 1.0, delta)), 100, 100)
    assert bounds[0] > 1.0


def test_a_batch_equals_its_members() -> None:
    rng = np.random.default_rng(3)
    g, f, delta = rng.uniform(100, 3000, 7), rng.uniform(100, 3000, 7), rng.normal(size=7)
    together, bounds = ladder_tables(pair_coefficients(OscillatorColumns(g, f, delta)), 4, 6)
    for i in range(7):
        alone, bound = ladder_tables(pair_coefficients(one_pair(g[i], f[i], delta[i])), 4, 6)
        assert np.array_equal(alone[0], together[i])
        assert bound[0] == bounds[i]


def test_exact_input_is_taken_exactly() -> None:
    """1/10 as a fraction is not the double 0.1: the coefficients come from the exact ratio."""
    exact = pair_coefficients(one_pair(Fraction(1, 10), Fraction(3, 10), Fraction(7, 10)))
    assert exact.w_yy[0] == -0.5
    assert exact.w_yz[0] == pytest.approx(np.sqrt(3) / 2, rel=1e-15)


def test_coefficients_are_within_their_promise() -> None:
    """16 units of 2^-53 for each coefficient, close frequencies included."""
    rng = np.random.default_rng(5)
    for _ in range(200):
        g = rng.uniform(50, 4000)
        f = g * rng.choice([1 + 1e-9, 1 - 3e-13, rng.uniform(0.02, 50)])
        delta = rng.normal() * 3
        k = pair_coefficients(one_pair(g, f, delta))
        exact_g, exact_f = Fraction(g), Fraction(f)
        w_yy = (exact_g - exact_f) / (exact_g + exact_f)
        assert abs(Fraction(k.w_yy[0]) - w_yy) <= 16 * abs(w_yy) / 2**53
        squared = 2 * Fraction(delta) ** 2 / (1 + exact_f / exact_g) ** 2
        assert abs(Fraction(k.w_z[0]) ** 2 - squared) <= 33 * squared / 2**53
        w_yz2 = 4 * exact_g * exact_f / (exact_g + exact_f) ** 2
        assert abs(Fraction(k.w_yz[0]) ** 2 - w_yz2) <= 33 * w_yz2 / 2**53


@pytest.mark.parametrize("squared_w", [0.0, 2.0, 12.0])
def test_the_propagated_bound_limits_an_injected_error(squared_w: float) -> None:
    """Perturb one early shell by hand: the later error stays below rho times the bracket."""
    delta = np.sqrt(squared_w)
    k = pair_coefficients(one_pair(1.0, 1.0, delta))
    top = 40
    clean = ladder_tables(k, top, top)[0][0]
    kicked = perturbed_table(k.w_yz[0], (k.w_y[0], k.w_z[0]), k.c[0], top, at=(2, 1), by=1e-6)
    error = np.abs(kicked - clean)
    norms = [np.sqrt(sum(error[v, s - v] ** 2 for v in range(s + 1))) for s in range(top + 1)]
    residual = 3 * 1e-6  # |k| times the perturbation of the element
    for shell in range(4, top + 1):
        assert norms[shell] <= propagated(residual, residual / 3, squared_w, shell)


def perturbed_table(
    w_yz: float, w: tuple[float, float], c: float, top: int, at: tuple[int, int], by: float
) -> np.ndarray:
    """The weighted recursion in plain Python (equal frequencies), one element off by ``by``."""
    table = np.zeros((top + 1, top + 1))
    table[0, 0] = c
    for v in range(top + 1):
        for n in range(top + 1):
            if v + n == 0:
                continue
            value = 0.0
            if v:
                value += w[0] * np.sqrt(v) * table[v - 1, n]
            if n:
                value += w[1] * np.sqrt(n) * table[v, n - 1]
            if v and n:
                value += 2 * w_yz * np.sqrt(v * n) * table[v - 1, n - 1]
            table[v, n] = value / (v + n) + (by if (v, n) == at else 0.0)
    return table
