"""Hermite functions, their error bound and their tails."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from scipy import integrate, special

from ladderband.numerics.hermite import PEAK, hermite_functions, log_tail, reach


def multiprecision(x: float, top: int) -> list[mpmath.mpf]:
    """phi_0..phi_top at the double x, 60 digits, by the recursion in mpmath."""
    context = mpmath.MPContext()
    context.dps = 60
    point = context.mpf(x)
    values = [context.exp(-point * point / 2) / context.power(context.pi, context.mpf(1) / 4)]
    below = context.mpf(0)
    for n in range(1, top + 1):
        step = context.sqrt(context.mpf(2) / n) * point * values[-1]
        step -= context.sqrt(context.mpf(n - 1) / n) * below
        below = values[-1]
        values.append(step)
    return values


@pytest.mark.parametrize("top", [0, 1, 2, 7, 60, 400, 2000])
def test_the_error_bound_holds(top: int) -> None:
    """Inside, at and beyond the turning point; the bound is not vacuous either."""
    turning = np.sqrt(2.0 * top + 1)
    x = np.array([0.0, 0.3, 0.5 * turning, 0.9 * turning, turning, -turning, turning + 2, 40.0])
    values, error = hermite_functions(x, top)
    for j, point in enumerate(x):
        truth = multiprecision(float(point), top)
        worst = max(abs(float(truth[n] - mpmath.mpf(values[n, j]))) for n in range(top + 1))
        assert worst <= error[j]
    assert error.max() < 1e-14 * (top + 2)


def test_known_functions() -> None:
    """scipy.special.eval_hermite, normalised by hand."""
    x = np.linspace(-6, 6, 25)
    values, _ = hermite_functions(x, 12)
    for n in (0, 1, 5, 12):
        norm = np.sqrt(2.0**n * special.factorial(n) * np.sqrt(np.pi))
        assert np.allclose(
            values[n], special.eval_hermite(n, x) * np.exp(-x * x / 2) / norm, atol=1e-13
        )


def test_nothing_exceeds_the_peak() -> None:
    """|phi_n| <= pi^(-1/4), NIST DLMF 18.14.9."""
    values, _ = hermite_functions(np.linspace(-64, 64, 2001), 2000)
    assert np.abs(values).max() <= PEAK * (1 + 1e-12)


def test_far_outside_is_zero_with_a_bound() -> None:
    values, error = hermite_functions(np.array([-1e6, 129.0, 0.0]), 2000)
    assert np.all(values[:, :2] == 0)
    assert np.all(error[:2] > 0)


@pytest.mark.parametrize("n", [0, 1, 10, 100])
def test_the_tail_bound_limits_the_tail(n: int) -> None:
    """Against scipy.integrate.quad of the squared function."""
    for beyond in (0.3, 1.0, 2.5):
        x = np.sqrt(2.0 * n + 1) + beyond

        def squared(t: float) -> float:
            return float(hermite_functions(np.array([t]), n)[0][n, 0] ** 2)

        tail = integrate.quad(squared, x, x + 12, epsabs=0, epsrel=1e-6, limit=200)[0]
        assert np.sqrt(tail) <= np.exp(log_tail(n, x))
        assert np.exp(log_tail(n, x)) <= 10 * np.sqrt(tail)


@pytest.mark.parametrize("n", [0, 5, 2000])
def test_reach_is_where_the_tail_meets_the_target(n: int) -> None:
    x = reach(n, np.log(1e-13))
    assert log_tail(n, x) <= np.log(1e-13) < log_tail(n, x - 2e-3)
