"""The complex symmetric factorisation against numpy and against its own bound."""

from __future__ import annotations

import numpy as np
import pytest

from ladderband.numerics.symmetric_factor import backward, factor, factor_rounding, forward


def matrix(n, seed):
    rng = np.random.default_rng(seed)
    a = rng.normal(size=(n, n)) + 1j * rng.normal(size=(n, n))
    return a + a.T + 3.0 * n**0.5 * (1.0 + 0.5j) * np.eye(n)


@pytest.mark.parametrize("n", [1, 2, 3, 4, 5, 6, 7, 8, 9, 31, 100])
def test_factors_multiply_back_within_the_bound(n):
    a = matrix(n, n)
    re, im = a.real.copy(), a.imag.copy()
    growth = factor(re, im)
    u = np.triu(re + 1j * im)
    d = np.diag(u)
    product = (u / d[:, None]).T @ u
    error = np.linalg.norm(product - a)
    assert error <= factor_rounding(n) * growth + 1e-14 * np.linalg.norm(a)
    assert growth == pytest.approx(
        sum(abs(d[k]) * np.linalg.norm(u[k] / d[k]) ** 2 for k in range(n)), rel=1e-12
    )
    assert np.prod(d / 10.0) == pytest.approx(np.linalg.det(a / 10.0), rel=1e-11)


@pytest.mark.parametrize("n", [1, 4, 7, 30])
def test_solution_solves(n):
    a = matrix(n, n)
    b = np.random.default_rng(9).normal(size=n) * (1.0 - 0.3j)
    re, im = a.real.copy(), a.imag.copy()
    factor(re, im)
    yr, yi = b.real.copy(), b.imag.copy()
    forward(re, im, yr, yi)
    xr, xi = np.empty(n), np.empty(n)
    backward(re, im, yr, yi, xr, xi)
    assert a @ (xr + 1j * xi) == pytest.approx(b, abs=1e-12)
    y, d = yr + 1j * yi, np.diag(re + 1j * im)
    assert np.sum(y * y / d) == pytest.approx(b @ np.linalg.solve(a, b), rel=1e-11)
