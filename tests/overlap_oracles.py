"""Independent routes to overlap integrals, for tests only; each is simple, slow and exact or bounded."""

from __future__ import annotations

from fractions import Fraction
from math import comb, factorial

import mpmath
import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.balls import ExactPair, ball_table, working_precision


def displaced_factor_times_exp(v: int, n: int, huang_rhys: Fraction) -> Fraction:
    """F(v, n) * e^S, a rational number, for equal frequencies and rational S.

    F = e^-S (m!/k!) S^(k-m) L_m^(k-m)(S)^2 with m = min, k = max and the Laguerre polynomial summed
    from its definition (NIST DLMF 18.5.12), all in fractions.
    """
    m, k = min(v, n), max(v, n)
    laguerre = sum(
        Fraction((-1) ** i * comb(k, m - i), factorial(i)) * huang_rhys**i for i in range(m + 1)
    )
    return Fraction(factorial(m), factorial(k)) * huang_rhys ** (k - m) * laguerre**2


def displaced_overlap(v: int, n: int, displacement: Fraction, dps: int) -> mpmath.mpf:
    """<v|n> for equal frequencies, with its sign, from the exact Laguerre value.

    The initial minimum lies at +displacement, so for n >= v the sign is that of the Laguerre value
    and for n < v it carries (-1)^(v - n).
    """
    context = mpmath.MPContext()
    context.dps = dps
    s = displacement**2 / 2
    m, k = min(v, n), max(v, n)
    laguerre = sum(Fraction((-1) ** i * comb(k, m - i), factorial(i)) * s**i for i in range(m + 1))
    value = context.mpf(laguerre.numerator) / laguerre.denominator
    root = context.sqrt(context.mpf(s.numerator) / s.denominator)
    value *= root ** (k - m) * context.sqrt(context.mpf(factorial(m)) / factorial(k))
    value *= context.exp(-context.mpf(s.numerator) / s.denominator / 2)
    return value * (-1) ** (v - n) if n < v else value


def quadrature_rows(
    ratio: Fraction, displacement: Fraction, v_max: int, n_max: int, dps: int = 40
) -> tuple[list[list[mpmath.mpf]], list[list[mpmath.mpf]], mpmath.mpf]:
    """Hermite functions of both states on one fine grid, and its step: overlaps are dot products.

    The step is half of what float64 would need, the range wider by 3: a plain trapezoidal sum in
    multiple precision (mpmath), independent of everything in the service.
    """
    context = mpmath.MPContext()
    context.dps = dps
    s = 1 / context.sqrt(context.mpf(ratio.numerator) / ratio.denominator)
    delta = context.mpf(displacement.numerator) / displacement.denominator
    reach_v, reach_n = np.sqrt(2.0 * v_max + 1) + 14, np.sqrt(2.0 * n_max + 1) + 14
    h = context.mpf(float(2 * np.pi / (float(s) * reach_v + reach_n)))
    low = max(-reach_n, float(delta) - reach_v / float(s))
    high = min(reach_n, float(delta) + reach_v / float(s))
    points = [j * h for j in range(int(low / float(h)) - 1, int(high / float(h)) + 2)]
    final = _hermite(context, points, n_max)
    initial = _hermite(context, [s * (x - delta) for x in points], v_max)
    return initial, final, h * context.sqrt(s)


def _hermite(
    context: mpmath.MPContext, points: list[mpmath.mpf], top: int
) -> list[list[mpmath.mpf]]:
    quarter = context.mpf(1) / 4
    rows = [[context.exp(-x * x / 2) / context.power(context.pi, quarter) for x in points]]
    below = [context.mpf(0)] * len(points)
    for n in range(1, top + 1):
        alpha, beta = context.sqrt(context.mpf(2) / n), context.sqrt(context.mpf(n - 1) / n)
        row = [alpha * x * a - beta * b for x, a, b in zip(points, rows[-1], below, strict=True)]
        below = rows[-1]
        rows.append(row)
    return rows


def exact_pair(ratio: Fraction | int, displacement: Fraction | int) -> ExactPair:
    """A pair of equal-frequency or distorted oscillators from exact numbers."""
    displacement = Fraction(displacement)
    sign = (displacement > 0) - (displacement < 0)
    return ExactPair(Fraction(ratio), displacement**2, sign, False)


def worst_error(table: np.ndarray, pair: ExactPair, bits: int | None = None) -> float:
    """Largest |table - truth| over the table, an upper bound, truth from balls of ample precision."""
    rows, columns = table.shape
    bits = bits or 200 + 3 * (rows + columns)
    with working_precision(bits, columns):
        truth = ball_table(pair, rows - 1, columns - 1, Deadline.none())
        worst = max(
            abs(ball - float(value)).upper()
            for balls, values in zip(truth, table, strict=True)
            for ball, value in zip(balls, values, strict=True)
        )
        return float(worst)
