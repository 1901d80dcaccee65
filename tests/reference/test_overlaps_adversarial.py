"""The adversarial table: true error <= stated bound <= 1e-10, without being asked for.

Truth, twice: balls at much higher precision for every element, and independently of the service
either exact Laguerre values in fractions (equal frequencies) or a plain trapezoidal sum in mpmath.
"""

from __future__ import annotations

from fractions import Fraction

import mpmath
import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.oscillators import one_pair
from ladderband.usecases.limits import Limits
from ladderband.usecases.overlaps import OverlapsQuestion, overlaps
from overlap_oracles import displaced_overlap, exact_pair, quadrature_rows, worst_error

# ratio f/g, displacement, v_initial_max, v_final_max
TABLE = [
    pytest.param(Fraction(1), Fraction(5), 60, 60, id="shift5-60x60"),
    pytest.param(Fraction(1), Fraction(5), 120, 120, id="shift5-120x120"),
    pytest.param(Fraction(1), Fraction(9), 400, 400, id="shift9-400x400"),
    pytest.param(Fraction(1), Fraction(30), 400, 400, id="shift30-400x400"),
    pytest.param(Fraction(1, 4), Fraction(6), 200, 200, id="ratio1/4-shift6-200x200"),
    pytest.param(Fraction(1, 50), Fraction(3), 300, 300, id="ratio1/50-shift3-300x300"),
    pytest.param(Fraction(50), Fraction(3), 300, 300, id="ratio50-shift3-300x300"),
    pytest.param(Fraction(1), Fraction(0), 100, 100, id="identical"),
    pytest.param(Fraction(1), Fraction(1e-9), 100, 100, id="shift1e-9"),
    pytest.param(Fraction(1), Fraction(1), 2000, 0, id="v2000-against-0"),
    pytest.param(Fraction(1), Fraction(60), 2000, 0, id="v2000-against-0-shift60"),
    pytest.param(Fraction(1), Fraction(63), 3, 2000, id="S-near-2000"),
]


def answered(ratio: Fraction, displacement: Fraction, v: int, n: int) -> tuple[np.ndarray, float]:
    """The table and its bound as the use case gives them: nothing about accuracy is asked."""
    pair = one_pair(1000.0, Fraction(1000) * ratio, displacement)
    answer = overlaps(OverlapsQuestion(pair, v, n), Limits(), Deadline.none())
    assert answer.accuracy.evidence == "proven"
    assert isinstance(answer.overlap_integrals, np.ndarray)
    return answer.overlap_integrals[0], float(answer.accuracy.bound[0])  # type: ignore[index]


@pytest.mark.parametrize(("ratio", "displacement", "v", "n"), TABLE)
def test_every_element_against_balls(
    ratio: Fraction, displacement: Fraction, v: int, n: int
) -> None:
    table, bound = answered(ratio, displacement, v, n)
    assert bound <= 1e-10
    assert worst_error(table, exact_pair(ratio, displacement)) <= bound


def sampled(v: int, n: int, count: int) -> list[tuple[int, int]]:
    rng = np.random.default_rng(11)
    corners = [(0, 0), (v, n), (0, n), (v, 0)]
    return corners + [(int(rng.integers(v + 1)), int(rng.integers(n + 1))) for _ in range(count)]


@pytest.mark.parametrize(
    ("ratio", "displacement", "v", "n"), [case for case in TABLE if case.values[0] == 1]
)
def test_equal_frequencies_against_exact_laguerre_values(
    ratio: Fraction, displacement: Fraction, v: int, n: int
) -> None:
    """NIST DLMF 18.5.12 summed in fractions: shares nothing with the service."""
    table, bound = answered(ratio, displacement, v, n)
    for i, j in sampled(v, n, 12):
        assert abs(displaced_overlap(i, j, displacement, 30) - table[i, j]) <= bound


@pytest.mark.parametrize(
    ("ratio", "displacement", "v", "n"), [case for case in TABLE if case.values[0] != 1]
)
def test_distorted_against_multiprecision_quadrature(
    ratio: Fraction, displacement: Fraction, v: int, n: int
) -> None:
    table, bound = answered(ratio, displacement, v, n)
    initial, final, weight = quadrature_rows(ratio, displacement, v, n, dps=30)
    for i, j in sampled(v, n, 12):
        truth = weight * mpmath.fsum(a * b for a, b in zip(initial[i], final[j], strict=True))
        assert abs(truth - table[i, j]) <= bound
