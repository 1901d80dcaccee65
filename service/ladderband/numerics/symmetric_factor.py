r"""Factorisation X = L D L^T of a complex symmetric matrix, compiled, with its rounding bound.

Half the work of an LU factorisation, and no pivoting: the matrices of
:mod:`ladderband.numerics.mixed_modes` keep all leading minors away from zero (proof there), and
the unpivoted pivots are what fixes the branch of the square root of the determinant.

Rounding. In exact arithmetic U_kj = d_k L_jk = X_kj - sum_{m<k} L_km U_mj. Four pivots are applied
to a row at a time, so a product passes through at most n/4 + 11 additions, one multiplication and
the quotient (at most 8 roundings). With gamma_m = m u / (1 - m u), u = 2^-53, and two real
components,

.. math::
   L D L^T = X + E, \qquad |E| \le \sqrt2\,\gamma_{n/4 + 24}\, |L|\,|D|\,|L|^T,

The kernels may contract a multiplication and an addition into one fused operation, which only
leaves a rounding out; nothing else of the order is left to the compiler. Hence

.. math::  |E|_F \le \sqrt2\,\gamma_{n/4+24} \sum_k |d_k|\,|L_{:k}|^2,

the sum being the ``growth`` computed here. The two triangular solves of a quadratic form
b^T X^{-1} b each add as much (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., SIAM
2002, Theorems 8.5 and 9.3 with the sums of sec. 3.1).
"""

from __future__ import annotations

import math

from numba import njit

from ladderband.numerics.rounding import gamma
from ladderband.numerics.transition import Floats


def factor_rounding(order: int) -> float:
    """The factor sqrt2 gamma_{n/4 + 24} in front of ``growth``."""
    return math.sqrt(2.0) * gamma(order / 4.0 + 24.0)


@njit(cache=True, nogil=True, error_model="numpy", fastmath={"contract"})
def factor(re: Floats, im: Floats) -> float:
    """Overwrite the upper triangle of re + i im by U = D L^T; return the growth.

    Rows are contiguous; the lower triangle is neither read nor written. Cost: n^3/3 complex
    multiplications, about the time of one LAPACK zgetrf of the same order at n = 100.
    """
    n = re.shape[0]
    k = 0
    while k < n:
        width = min(4, n - k)
        for p in range(k, k + width):
            for m in range(k, p):
                inv = 1.0 / (re[m, m] * re[m, m] + im[m, m] * im[m, m])
                lr = (re[m, p] * re[m, m] + im[m, p] * im[m, m]) * inv
                li = (im[m, p] * re[m, m] - re[m, p] * im[m, m]) * inv
                for j in range(p, n):
                    re[p, j] -= lr * re[m, j] - li * im[m, j]
                    im[p, j] -= lr * im[m, j] + li * re[m, j]
        if width == 4:
            _apply_four(re, im, k)
        k += width
    growth = 0.0
    for k in range(n):
        total = 0.0
        for j in range(k, n):
            total += re[k, j] * re[k, j] + im[k, j] * im[k, j]
        growth += total / math.sqrt(re[k, k] * re[k, k] + im[k, k] * im[k, k])
    return growth


@njit(cache=True, nogil=True, error_model="numpy", fastmath={"contract"})
def _apply_four(re: Floats, im: Floats, k: int) -> None:
    """Subtract pivots k..k+3 from all later rows, two rows at a time so that loads are shared."""
    n = re.shape[0]
    r0, r1, r2, r3 = re[k], re[k + 1], re[k + 2], re[k + 3]
    s0, s1, s2, s3 = im[k], im[k + 1], im[k + 2], im[k + 3]
    p0, t0 = r0[k], s0[k]
    p1, t1 = r1[k + 1], s1[k + 1]
    p2, t2 = r2[k + 2], s2[k + 2]
    p3, t3 = r3[k + 3], s3[k + 3]
    q0, q1 = 1.0 / (p0 * p0 + t0 * t0), 1.0 / (p1 * p1 + t1 * t1)
    q2, q3 = 1.0 / (p2 * p2 + t2 * t2), 1.0 / (p3 * p3 + t3 * t3)
    i = k + 4
    while i + 1 < n:
        a0, b0 = (r0[i] * p0 + s0[i] * t0) * q0, (s0[i] * p0 - r0[i] * t0) * q0
        a1, b1 = (r1[i] * p1 + s1[i] * t1) * q1, (s1[i] * p1 - r1[i] * t1) * q1
        a2, b2 = (r2[i] * p2 + s2[i] * t2) * q2, (s2[i] * p2 - r2[i] * t2) * q2
        a3, b3 = (r3[i] * p3 + s3[i] * t3) * q3, (s3[i] * p3 - r3[i] * t3) * q3
        h = i + 1
        c0, d0 = (r0[h] * p0 + s0[h] * t0) * q0, (s0[h] * p0 - r0[h] * t0) * q0
        c1, d1 = (r1[h] * p1 + s1[h] * t1) * q1, (s1[h] * p1 - r1[h] * t1) * q1
        c2, d2 = (r2[h] * p2 + s2[h] * t2) * q2, (s2[h] * p2 - r2[h] * t2) * q2
        c3, d3 = (r3[h] * p3 + s3[h] * t3) * q3, (s3[h] * p3 - r3[h] * t3) * q3
        x, y, v, w = re[i], im[i], re[h], im[h]
        for j in range(i, n):  # writes v[i], w[i] below the diagonal: never read
            e0, f0, e1, f1 = r0[j], s0[j], r1[j], s1[j]
            e2, f2, e3, f3 = r2[j], s2[j], r3[j], s3[j]
            x[j] -= (a0 * e0 - b0 * f0 + a1 * e1 - b1 * f1) + (
                a2 * e2 - b2 * f2 + a3 * e3 - b3 * f3
            )
            y[j] -= (a0 * f0 + b0 * e0 + a1 * f1 + b1 * e1) + (
                a2 * f2 + b2 * e2 + a3 * f3 + b3 * e3
            )
            v[j] -= (c0 * e0 - d0 * f0 + c1 * e1 - d1 * f1) + (
                c2 * e2 - d2 * f2 + c3 * e3 - d3 * f3
            )
            w[j] -= (c0 * f0 + d0 * e0 + c1 * f1 + d1 * e1) + (
                c2 * f2 + d2 * e2 + c3 * f3 + d3 * e3
            )
        i += 2
    if i < n:
        for m in range(k, k + 4):
            inv = 1.0 / (re[m, m] * re[m, m] + im[m, m] * im[m, m])
            lr = (re[m, i] * re[m, m] + im[m, i] * im[m, m]) * inv
            li = (im[m, i] * re[m, m] - re[m, i] * im[m, m]) * inv
            ur, ui = re[m, i], im[m, i]
            re[i, i] -= lr * ur - li * ui
            im[i, i] -= lr * ui + li * ur


@njit(cache=True, nogil=True, error_model="numpy", fastmath={"contract"})
def forward(re: Floats, im: Floats, br: Floats, bi: Floats) -> None:
    """Overwrite b by y = L^{-1} b, with the U of :func:`factor`."""
    n = re.shape[0]
    for k in range(n):
        inv = 1.0 / (re[k, k] * re[k, k] + im[k, k] * im[k, k])
        zr = (br[k] * re[k, k] + bi[k] * im[k, k]) * inv
        zi = (bi[k] * re[k, k] - br[k] * im[k, k]) * inv
        for j in range(k + 1, n):
            br[j] -= re[k, j] * zr - im[k, j] * zi
            bi[j] -= re[k, j] * zi + im[k, j] * zr


@njit(cache=True, nogil=True, error_model="numpy", fastmath={"contract"})
def backward(re: Floats, im: Floats, yr: Floats, yi: Floats, xr: Floats, xi: Floats) -> None:
    """x = L^{-T} D^{-1} y, the solution of X x = b when y = L^{-1} b."""
    n = re.shape[0]
    for k in range(n - 1, -1, -1):
        tr, ti = yr[k], yi[k]
        for j in range(k + 1, n):
            tr -= re[k, j] * xr[j] - im[k, j] * xi[j]
            ti -= re[k, j] * xi[j] + im[k, j] * xr[j]
        inv = 1.0 / (re[k, k] * re[k, k] + im[k, k] * im[k, k])
        xr[k] = (tr * re[k, k] + ti * im[k, k]) * inv
        xi[k] = (ti * re[k, k] - tr * im[k, k]) * inv
