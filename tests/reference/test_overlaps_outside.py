"""Overlaps against things outside the project; the source stands beside each check.

Numbers of equations of the NIST Digital Library of Mathematical Functions (DLMF) are from memory.
"""

from __future__ import annotations

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
import qutip
import sympy
from scipy import special
from sympy.physics.qho_1d import psi_n

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.hermite import hermite_functions
from ladderband.numerics.oscillators import one_pair
from ladderband.usecases.limits import Limits
from ladderband.usecases.overlaps import OverlapsAnswer, OverlapsQuestion, overlaps
from overlap_oracles import displaced_factor_times_exp


def ask(
    g: float | Fraction,
    f: float | Fraction,
    shift: float | Fraction,
    v: int,
    n: int,
    kind: str = "displacement",
    digits: int | None = None,
) -> OverlapsAnswer:
    pair = one_pair(g, f, shift, kind)  # type: ignore[arg-type]
    return overlaps(OverlapsQuestion(pair, v, n, digits=digits), Limits(), Deadline.none())


@pytest.mark.parametrize("s", [Fraction(1, 4), Fraction(5, 2), Fraction(12)], ids=str)
def test_factors_times_exp_s_are_the_exact_rationals(s: Fraction) -> None:
    """Exact fractions: F(v, n) e^S is rational for rational S and equal frequencies."""
    answer = ask(700.0, 700.0, s, 25, 25, kind="huang_rhys")
    factors = np.asarray(answer.franck_condon_factors)[0]
    bound = float(answer.factors_accuracy.bound[0])  # type: ignore[index]
    scale = math.exp(-s)
    for v in range(26):
        for n in range(26):
            exact = float(displaced_factor_times_exp(v, n, s)) * scale
            assert abs(factors[v, n] - exact) <= bound + 4e-16 * exact


def test_forty_digits_of_exact_rationals() -> None:
    """The same to 40 digits, e^-S by mpmath: the last digit included."""
    s = Fraction(7, 3)
    answer = ask(700.0, 700.0, s, 12, 12, kind="huang_rhys", digits=40)
    context = mpmath.MPContext()
    context.dps = 80
    for v in range(13):
        for n in range(13):
            exact = displaced_factor_times_exp(v, n, s)
            truth = context.mpf(exact.numerator) / exact.denominator
            truth *= context.exp(-context.mpf(s.numerator) / s.denominator)
            given = context.mpf(answer.franck_condon_factors[0][v][n])
            exponent = context.floor(context.log10(abs(truth)))
            assert abs(given - truth) <= context.mpf("0.50000001") * context.mpf(10) ** (
                exponent - 39
            )


@pytest.mark.parametrize("delta", [0.3, 1.7, 4.0])
def test_against_scipy_laguerre(delta: float) -> None:
    """scipy.special.eval_genlaguerre, where it is reliable itself (up to 30 quanta)."""
    s = 0.5 * delta**2
    table = np.asarray(ask(500.0, 500.0, delta, 30, 30).overlap_integrals)[0]
    for v in range(31):
        for n in range(v, 31):
            log_factor = 0.5 * (special.gammaln(v + 1) - special.gammaln(n + 1) - s)
            value = np.exp(log_factor) * (delta / np.sqrt(2)) ** (n - v)
            value *= special.eval_genlaguerre(v, n - v, s)
            assert table[v, n] == pytest.approx(value, abs=2e-12)


@pytest.mark.parametrize(
    ("ratio", "delta"), [(1.0, 1.3), (1.44, 0.0), (0.64, -0.8), (2.25, 1.1)], ids=str
)
def test_against_qutip_operators(ratio: float, delta: float) -> None:
    """QuTiP: final state n = D(alpha) S(r)|n>, alpha = -Delta/sqrt(2t), r = ln(t)/2.

    The operators are exponentials of truncated matrices, exact only far from their last rows
    (their last elements are off by order 1): 240 levels for elements up to 12.
    """
    levels = 240
    displace = qutip.displace(levels, -delta / math.sqrt(2 * ratio))
    squeeze = qutip.squeeze(levels, 0.5 * math.log(ratio))
    operator = (displace * squeeze).full()
    assert np.abs(operator.imag).max() < 1e-12
    table = np.asarray(ask(1000.0, 1000.0 * ratio, delta, 12, 12).overlap_integrals)[0]
    assert np.abs(table - operator.real[:13, :13]).max() < 1e-11


def test_against_sympy_wavefunctions() -> None:
    """sympy.physics.qho_1d.psi_n (m = 1) integrated by mpmath.quad to 25 digits."""
    g, f, delta = Fraction(1), Fraction(9, 4), Fraction(3, 5)
    x = sympy.symbols("x")
    context = mpmath.MPContext()
    context.dps = 25
    shift = delta / sympy.sqrt(sympy.Rational(9, 4))
    answer = ask(g, f, delta, 4, 4, digits=20)
    for v, n in [(0, 0), (1, 3), (4, 2), (3, 4)]:
        initial = psi_n(v, x, 1, 1)
        final = psi_n(n, x + shift, 1, sympy.Rational(9, 4))
        function = sympy.lambdify(
            x, (initial * final).subs(sympy.physics.quantum.constants.hbar, 1), modules="mpmath"
        )
        with mpmath.workdps(25):
            integral = mpmath.quad(lambda t, function=function: function(t), [-9, -3, 0, 3, 9])
        assert abs(integral - context.mpf(answer.overlap_integrals[0][v][n])) < 1e-18


def test_generating_function_of_the_first_row() -> None:
    """DLMF 18.12.15 (generating function of the Hermite polynomials) turned into sum_n S(0,n) z^n/sqrt n!.

    Evaluated at several z as c exp(W_zz z^2/2 + w_z z) with the closed form of c, W_zz, w_z.
    """
    g, f, delta = 800.0, 1100.0, 0.9
    t = f / g
    row = np.asarray(ask(g, f, delta, 0, 60).overlap_integrals)[0, 0]
    factorials = np.cumprod(np.concatenate([[1.0], np.sqrt(np.arange(1, 61))]))
    c = math.sqrt(2 * math.sqrt(t) / (1 + t)) * math.exp(-(delta**2) / (2 * (1 + t)))
    for z in (-1.0, 0.3, 0.9):
        total = float(np.sum(row * z ** np.arange(61) / factorials))
        w_zz, w_z = (t - 1) / (1 + t), math.sqrt(2) * delta / (1 + t)
        assert total == pytest.approx(c * math.exp(0.5 * w_zz * z * z + w_z * z), abs=1e-12)


def test_mehler_kernel() -> None:
    """DLMF 18.18.28 (Poisson kernel): sum_n phi_n(x) phi_n(y) z^n in closed form."""
    points = np.array([-1.2, 0.0, 0.7, 2.5])
    values, _ = hermite_functions(points, 200)
    z = 0.6
    kernel = (values.T * z ** np.arange(201)) @ values
    x, y = points[:, None], points[None, :]
    exponent = (4 * x * y * z - (x**2 + y**2) * (1 + z * z)) / (2 * (1 - z * z))
    assert np.abs(kernel - np.exp(exponent) / np.sqrt(np.pi * (1 - z * z))).max() < 1e-13


@pytest.mark.parametrize("degeneracy", [1, 2, 3])
def test_distorted_undisplaced_progressions_follow_smiths_series(degeneracy: int) -> None:
    """(1 - x)^(-d/2) with x = ((f - g)/(f + g))^2: W. L. Smith, Proc. Phys. Soc. 89 (1966).

    The factors of d equal undisplaced modes, summed over all ways to share 2n quanta, relative to the
    0-0 line, are the coefficients of the binomial series.
    """
    g, f = 400.0, 900.0
    x = ((f - g) / (f + g)) ** 2
    row = np.asarray(ask(g, f, 0.0, 0, 40).franck_condon_factors)[0, 0]
    assert np.all(row[1::2] == 0) or np.abs(row[1::2]).max() < 1e-20
    shells = row[::2]
    total = np.array([1.0])
    for _ in range(degeneracy):
        total = np.convolve(total, shells)[:21]
    series = special.binom(degeneracy / 2 + np.arange(21) - 1, np.arange(21)) * x ** np.arange(21)
    assert np.abs(total / total[0] - series).max() < 1e-11


def test_one_quantum_on_one_quantum() -> None:
    """<1|1'> = e^(-S/2) (1 - S), the textbook value (common practice)."""
    for s in (0.5, 1.0, 3.0):
        table = np.asarray(ask(300.0, 300.0, s, 1, 1, kind="huang_rhys").overlap_integrals)[0]
        assert table[1, 1] == pytest.approx(math.exp(-s / 2) * (1 - s), abs=1e-14)
