r"""Overlap integrals to any number of digits, by ball arithmetic.

Every number is a ball (midpoint and radius) that contains the true value, so the bound is the radius
and needs no further proof (F. Johansson, IEEE Trans. Comput. 66, 1281 (2017)). Row v of the table is
the v-th derivative of the generating function at y = 0 (divided by sqrt(v!) as it is built),

.. math::
   P_{v+1}(z) = (w_y + W_{yz} z)\,P_v(z) + v\,W_{yy}\,P_{v-1}(z),\qquad
   P_0(z) = c\,e^{W_{zz} z^2/2 + w_z z},\qquad
   S(v,n) = \sqrt{n!/v!}\;[z^n]P_v(z),

three operations on truncated power series a row. The radii grow by one to two bits a quantum; the
precision is raised until every digit asked for is decided.

The working precision of the library is process-global: every use in the service holds ``LOCK``.
"""

from __future__ import annotations

import operator
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction

import flint

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.oscillators import OscillatorColumns, exact
from ladderband.numerics.units import SHIFT_DISPLACEMENT2_PER_PI2

LOCK = threading.Lock()

BallTable = list[list[flint.arb]]


@contextmanager
def working_precision(bits: int, series_length: int = 1) -> Iterator[None]:
    """Own the library and its precision for the duration of the block."""
    with LOCK:
        before = flint.ctx.prec, flint.ctx.cap
        flint.ctx.prec, flint.ctx.cap = bits, series_length
        try:
            yield
        finally:
            flint.ctx.prec, flint.ctx.cap = before


@dataclass(frozen=True, slots=True)
class ExactPair:
    """One oscillator pair as exact fractions; squared displacement = square * (pi^2 if ``pi``)."""

    ratio: Fraction
    """t = f / g."""
    square: Fraction
    sign: int
    pi: bool

    @classmethod
    def of(cls, pairs: OscillatorColumns, index: int) -> ExactPair:
        g = exact(pairs.wavenumber_initial_cm1, index)
        f = exact(pairs.wavenumber_final_cm1, index)
        shift = exact(pairs.shift, index)
        sign = (shift > 0) - (shift < 0)
        if pairs.shift_kind == "huang_rhys":
            return cls(f / g, 2 * shift, sign, False)
        if pairs.shift_kind == "displacement":
            return cls(f / g, shift * shift, sign, False)
        return cls(f / g, SHIFT_DISPLACEMENT2_PER_PI2 * f * shift * shift, sign, True)

    @property
    def zero_by_parity(self) -> bool:
        """Whether overlaps of odd v + n vanish."""
        return self.square == 0


def _ball(value: Fraction) -> flint.arb:
    return flint.arb(_rational(value))


def ball_table(
    pair: ExactPair, v_initial_max: int, v_final_max: int, deadline: Deadline
) -> BallTable:
    """The table as balls; call inside :func:`working_precision` with that series length."""
    length = v_final_max + 1
    t = pair.ratio
    w_yy = _ball((1 - t) / (1 + t))
    root_t = _ball(t).sqrt()
    share = _ball(1 / (1 + t))
    w_yz = 2 * root_t * share
    square = _ball(pair.square) * (flint.arb.pi() ** 2 if pair.pi else 1)
    w_z = pair.sign * (2 * square).sqrt() * share
    w_y = -w_z * root_t
    c = (w_yz.sqrt()) * (-square * share / 2).exp()
    root = [flint.arb(k).sqrt() for k in range(max(v_initial_max, v_final_max) + 2)]
    factors = [flint.arb(1)]  # sqrt(n!)
    for n in range(1, length):
        factors.append(factors[-1] * root[n])
    below = flint.arb_series([], length)
    here = flint.arb_series(_first_row(w_z, -w_yy, c, length), length)
    rows: BallTable = []
    for v in range(v_initial_max + 1):  # here = P_v / sqrt(v!)
        deadline.check()
        coefficients = here.coeffs()
        coefficients += [flint.arb(0)] * (length - len(coefficients))
        rows.append(list(map(operator.mul, coefficients, factors)))
        scale = 1 / root[v + 1]
        raising = flint.arb_series([w_y * scale, w_yz * scale], length)
        here, below = raising * here + (root[v] * w_yy * scale) * below, here
    return rows


def _first_row(w_z: flint.arb, w_zz: flint.arb, c: flint.arb, length: int) -> list[flint.arb]:
    """Coefficients of c exp(W_zz z^2 / 2 + w_z z): n B_n = w_z B_{n-1} + W_zz B_{n-2}."""
    row = [c]
    for n in range(1, length):
        value = w_z * row[n - 1]
        if n > 1:
            value += w_zz * row[n - 2]
        row.append(value / n)
    return row


def exactly_zero(pair: ExactPair, v: int, n: int) -> bool:
    r"""Whether S(v, n) vanishes exactly, decided in rational arithmetic; O(v n) operations.

    With W_yy = -W_zz and q = Delta^2 rational, S(v, n) is proportional to

    .. math::
       \sum_k \frac{(-1/(q\,\tau))^k}{k!}\,A_{v-k}\,B_{n-k},\quad
       A_j = \sum_i \frac{(W_{yy}/2w_y^2)^i}{i!\,(j-2i)!},\quad \tau = \frac1{1+t},

    and B_j the same with W_zz and w_z: an exact zero such as <1|1> at S = 1 is found as one. A
    displacement given as a shift carries pi and is never decided here (returns False).
    """
    if pair.pi:
        return False
    if pair.square == 0:
        return (v + n) % 2 == 1
    t, q = _rational(pair.ratio), _rational(pair.square)
    share = 1 / (1 + t)
    w_yy = (1 - t) * share
    w_z2 = 2 * q * share * share
    a = _gaussian_coefficients(w_yy / (2 * t * w_z2), v)
    b = _gaussian_coefficients(-w_yy / (2 * w_z2), n)
    ratio = -1 / (q * share)
    total, factor = flint.fmpq(0), flint.fmpq(1)
    for k in range(min(v, n) + 1):
        total += factor * a[v - k] * b[n - k]
        factor *= ratio / (k + 1)
    return bool(total == 0)


def _rational(value: Fraction) -> flint.fmpq:
    return flint.fmpq(value.numerator, value.denominator)


def _gaussian_coefficients(half: flint.fmpq, top: int) -> list[flint.fmpq]:
    """Coefficients of exp(half x^2 + x): j B_j = B_{j-1} + 2 half B_{j-2}."""
    row = [flint.fmpq(1)]
    for j in range(1, top + 1):
        value = row[j - 1] + (2 * half * row[j - 2] if j > 1 else 0)
        row.append(value / j)
    return row
