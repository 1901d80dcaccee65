"""Identities over random input: unitarity, transposition, parity, Poisson row, two routes, digits."""

from __future__ import annotations

import math
from fractions import Fraction

import mpmath
import numpy as np
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.balls import ExactPair
from ladderband.numerics.decimal_tables import decimal_tables
from ladderband.numerics.grid import grid_tables
from ladderband.numerics.ladder import ladder_tables, pair_coefficients
from ladderband.numerics.oscillators import one_pair
from ladderband.usecases.limits import Limits
from ladderband.usecases.overlaps import OverlapsQuestion, overlaps
from overlap_oracles import exact_pair, quadrature_rows, worst_error

EXAMPLES = settings(
    max_examples=60, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck)
)
# the exponent is uniform: ratios from 1/50 to 50 with the ends as likely as the middle
RATIOS = st.one_of(
    st.sampled_from([1.0, 0.02, 50.0]),
    st.floats(-math.log(50), math.log(50)).map(math.exp).filter(lambda r: 0.02 <= r <= 50),
)
SHIFTS = st.one_of(st.sampled_from([0.0, 1e-9, -5.0, 63.0]), st.floats(-12.0, 12.0))
QUANTA = st.integers(0, 40)


def answered(t: float, delta: float, v: int, n: int) -> tuple[np.ndarray, float]:
    pair = one_pair(1000.0, 1000.0 * t, delta)
    answer = overlaps(OverlapsQuestion(pair, v, n), Limits(), Deadline.none())
    return np.asarray(answer.overlap_integrals)[0], float(answer.accuracy.bound[0])  # type: ignore[index]


@EXAMPLES
@given(t=RATIOS, delta=SHIFTS, v=QUANTA, n=QUANTA)
def test_truth_is_within_the_bound(t: float, delta: float, v: int, n: int) -> None:
    table, bound = answered(t, delta, v, n)
    exact = exact_pair(Fraction(1000.0 * t) / 1000, Fraction(delta))
    assert bound <= 1e-10
    assert worst_error(table, exact) <= bound


@EXAMPLES
@given(t=RATIOS, delta=SHIFTS, v=st.integers(0, 6))
def test_rows_are_orthonormal_where_they_are_complete(t: float, delta: float, v: int) -> None:
    """Unitarity: rows long enough to hold their whole function have unit norm and are orthogonal."""
    radius = math.sqrt(2 * v + 1) + 7
    n = int(0.5 * ((abs(delta) + radius * math.sqrt(t)) ** 2 + radius**2 / t)) + 5
    assume(n <= 1900)
    table, bound = answered(t, delta, v, n)
    gram = table @ table.T
    slack = (2 * math.sqrt(n + 1) + (n + 1) * bound) * bound + 1e-12
    assert np.abs(gram - np.eye(v + 1)).max() <= slack


@EXAMPLES
@given(t=RATIOS, delta=SHIFTS, v=QUANTA, n=QUANTA)
def test_exchanging_the_states_transposes_the_table(t: float, delta: float, v: int, n: int) -> None:
    """Reversed, the displacement is -Delta in units of the new final (the old initial) oscillator."""
    forward, bound = answered(t, delta, v, n)
    g, f = 1000.0, 1000.0 * t
    answer = overlaps(
        OverlapsQuestion(one_pair(f, g, -delta / math.sqrt(f / g)), n, v), Limits(), Deadline.none()
    )
    back = np.asarray(answer.overlap_integrals)[0]
    back_bound = float(answer.accuracy.bound[0])  # type: ignore[index]
    # the reversed displacement is rounded: |dS/dDelta| <= sqrt(2n+2) of either state
    moved = 4e-16 * abs(delta) * math.sqrt(2 * max(v, n) + 2) * max(1.0, math.sqrt(g / f))
    assert np.abs(forward - back.T).max() <= bound + back_bound + moved


@EXAMPLES
@given(t=RATIOS, v=QUANTA, n=QUANTA)
def test_parity_without_displacement(t: float, v: int, n: int) -> None:
    table, bound = answered(t, 0.0, v, n)
    odd = (np.arange(v + 1)[:, None] + np.arange(n + 1)) % 2 == 1
    assert np.abs(table[odd]).max(initial=0.0) <= bound
    tables = decimal_tables(
        ExactPair(Fraction(t), Fraction(0), 0, False), 5, 5, 8, None, Deadline.none()
    )
    for i, row in enumerate(tables.overlaps):
        for j, value in enumerate(row):
            if (i + j) % 2:
                assert str(value) == "0"


@EXAMPLES
@given(s=st.floats(0.0, 30.0), n=st.integers(0, 60))
def test_the_cold_displaced_row_is_poisson(s: float, n: int) -> None:
    pair = one_pair(500.0, 500.0, s, "huang_rhys")
    answer = overlaps(OverlapsQuestion(pair, 0, n), Limits(), Deadline.none())
    row = np.asarray(answer.franck_condon_factors)[0, 0]
    context = mpmath.MPContext()
    context.dps = 30
    for k in range(n + 1):
        exact = context.exp(-context.mpf(s)) * context.mpf(s) ** k / context.factorial(k)
        assert abs(exact - row[k]) <= float(answer.factors_accuracy.bound[0])  # type: ignore[index]


@EXAMPLES
@given(t=RATIOS, delta=st.floats(-4.0, 4.0), v=QUANTA, n=QUANTA)
def test_two_routes_lie_inside_each_others_bounds(t: float, delta: float, v: int, n: int) -> None:
    k = pair_coefficients(one_pair(1000.0, 1000.0 * t, delta))
    ladder, ladder_bound = ladder_tables(k, v, n)
    tables, bounds = np.zeros_like(ladder), np.zeros(1)
    grid_tables(k, np.array([0]), tables, bounds, 1e-10)
    assert np.abs(ladder - tables).max() <= ladder_bound[0] + bounds[0]


@settings(EXAMPLES, max_examples=25)
@given(
    t=st.fractions(Fraction(1, 50), Fraction(50), max_denominator=1000),
    delta=st.fractions(Fraction(-6), Fraction(6), max_denominator=1000),
    v=st.integers(0, 6),
    n=st.integers(0, 6),
    digits=st.integers(1, 25),
)
def test_strings_of_digits_are_right_to_the_last(
    t: Fraction, delta: Fraction, v: int, n: int, digits: int
) -> None:
    """Against a trapezoidal sum in mpmath, 60 digits: half a unit of the last digit."""
    assume(delta != 0)
    sign = 1 if delta > 0 else -1
    tables = decimal_tables(
        ExactPair(t, delta**2, sign, False), v, n, digits, None, Deadline.none()
    )
    initial, final, weight = quadrature_rows(t, delta, v, n, dps=60)
    context = mpmath.MPContext()
    context.dps = 60
    value = tables.overlaps[v][n]
    truth = weight * context.fsum(a * b for a, b in zip(initial[v], final[n], strict=True))
    if value.mantissa == 0:
        assert abs(truth) < 1e-25
        return
    unit = context.mpf(10) ** value.exponent
    # 1e-26: the quadrature's own error
    assert abs(context.mpf(str(value)) - truth) <= unit * context.mpf("0.5000001") + 1e-26
