"""Compiled evaluation of the tangent form, one time point after another.

Formulas, proofs and names are those of :mod:`ladderband.numerics.mixed_modes`. Complex arrays are
kept as two real ones, which the compiler turns into vector instructions. What bounds need travels
in two small arrays, indexed by the names below.
"""

from __future__ import annotations

import math

import numpy as np
from numba import njit
from numpy.typing import NDArray

from ladderband.numerics.symmetric_factor import backward, factor, forward
from ladderband.numerics.transition import Floats

Complexes = NDArray[np.complex128]

# of the block: constants of the bound
ALPHA, KAPPA, FACTOR_UNIT, SUM_UNIT = 0, 1, 2, 3
CONSTANTS = 4
# of the time point: largest rounding of a final phase, sum of all phases' roundings, and for the
# two forms: sum of nu |tau|, change of R by the initial phases; ln of the prefactor and its size
WORST, PHASES, SIZE, MOVED, LOG_RE, LOG_IM, LOG_SIZE, TAU_TOP = 0, 1, 2, 4, 6, 7, 8, 9
SUMMARY = 10
# of one form at the time point: |dR|, backward error of the factorisation, sum of nu |tau|
MATRIX, FACTORING, FORM_SIZE = 0, 1, 2
U = 2.0**-53


@njit(cache=True, nogil=True, error_model="numpy")
def tangents(g: Floats, f: Floats, exponents: Floats, times: Floats) -> Floats:
    """tau (re, im), cos and sin of f t / 2, |1 + q|^2, Re(1 + q) and Im q: (7, T, n)."""
    out = np.empty((7, len(times), len(g)))
    for k in range(len(g)):
        r = math.exp(-exponents[k])
        one_less = -math.expm1(-exponents[k])
        for m in range(len(times)):
            c, s = math.cos(0.5 * g[k] * times[m]), math.sin(0.5 * g[k] * times[m])
            size = one_less * one_less + 4.0 * r * c * c  # |1 + q|^2 without cancellation
            out[0, m, k] = one_less * (1.0 + r) / size
            out[1, m, k] = -4.0 * r * s * c / size
            out[2, m, k] = math.cos(0.5 * f[k] * times[m])
            out[3, m, k] = math.sin(0.5 * f[k] * times[m])
            out[4, m, k] = size
            out[5, m, k] = one_less + 2.0 * r * c * c
            out[6, m, k] = 2.0 * r * s * c
    return out


@njit(cache=True, nogil=True, error_model="numpy")
def _summarise(
    values: Floats, m: int, t: float, g: Floats, f: Floats, exponents: Floats, traces: Floats,
    out: Floats,
) -> None:  # fmt: skip
    """Fill a SUMMARY: phases are off by their products' rounding and a last place of cos, sin."""
    out[:] = 0.0
    for k in range(len(g)):
        initial = 2.0 * U * g[k] * t + 4.0 * U
        final = 2.0 * U * f[k] * t + 4.0 * U
        tau2 = values[0, m, k] ** 2 + values[1, m, k] ** 2
        tau = math.sqrt(tau2)
        out[WORST] = max(out[WORST], final)
        out[PHASES] += initial + final
        for form in range(2):
            out[SIZE + form] += traces[form, k] * tau
            out[MOVED + form] += traces[form, k] * 0.5 * (1.0 + tau2) * initial
        log_re = math.log(-math.expm1(-exponents[k])) - 0.5 * math.log(values[4, m, k])
        log_im = -math.atan2(values[6, m, k], values[5, m, k])
        out[LOG_RE] += log_re
        out[LOG_IM] += log_im
        out[LOG_SIZE] += abs(log_re) + abs(log_im)
        out[TAU_TOP] = max(out[TAU_TOP], tau)


@njit(cache=True, nogil=True, error_model="numpy")
def _times_root(c: Floats, vr: Floats, vi: Floats) -> None:
    """v <- c^1/2 v; the root of a negative cosine is imaginary."""
    for k in range(len(c)):
        root = math.sqrt(abs(c[k]))
        re, im = root * vr[k], root * vi[k]
        vr[k] = re if c[k] >= 0.0 else -im
        vi[k] = im if c[k] >= 0.0 else re


@njit(cache=True, nogil=True, error_model="numpy")
def _factored(
    row_re: Floats, row_im: Floats, c: Floats, s: Floats, scale: Floats, re: Floats, im: Floats
) -> float:
    """Factor X = c^1/2 R c^1/2 + i s in place from the packed rows of J D J^T; the growth."""
    n = len(c)
    ar, ai = scale.copy(), np.zeros(n)
    _times_root(c, ar, ai)
    p = 0
    for i in range(n):
        for j in range(i, n):
            fr = ar[i] * ar[j] - ai[i] * ai[j]
            fi = ar[i] * ai[j] + ai[i] * ar[j]
            re[i, j] = row_re[p + j - i] * fr - row_im[p + j - i] * fi
            im[i, j] = row_re[p + j - i] * fi + row_im[p + j - i] * fr
        im[i, i] += s[i]
        p += n - i
    growth: float = factor(re, im)
    return growth


@njit(cache=True, nogil=True, error_model="numpy")
def _pivot_logs(re: Floats, im: Floats, c: Floats, s: Floats) -> tuple[float, float, float, float]:
    """Sum of Log(d_k e^{-i phi_k}), the sum of |Log|, and the least distance from the cut."""
    total_re, total_im, size, margin = 0.0, 0.0, 0.0, 1.0
    for k in range(len(c)):
        wr = re[k, k] * c[k] + im[k, k] * s[k]
        wi = im[k, k] * c[k] - re[k, k] * s[k]
        modulus = math.hypot(wr, wi)
        log_re, log_im = math.log(modulus), math.atan2(wi, wr)
        total_re += log_re
        total_im += log_im
        size += abs(log_re) + abs(log_im)
        if wr < 0.0:
            margin = min(margin, abs(wi) / modulus)
    return total_re, total_im, size, margin


@njit(cache=True, nogil=True, error_model="numpy")
def _norm(re: Floats, im: Floats) -> float:
    total = 0.0
    for k in range(len(re)):
        total += re[k] * re[k] + im[k] * im[k]
    return math.sqrt(total)


@njit(cache=True, nogil=True, error_model="numpy")
def _bilinear(
    re: Floats, im: Floats, yr: Floats, yi: Floats, zr: Floats, zi: Floats
) -> tuple[float, float, float]:
    """sum_k y_k z_k / d_k and the sum of the moduli."""
    total_re, total_im, size = 0.0, 0.0, 0.0
    for k in range(len(yr)):
        dr, di = re[k, k], im[k, k]
        inv = 1.0 / (dr * dr + di * di)
        pr = yr[k] * zr[k] - yi[k] * zi[k]
        pi = yr[k] * zi[k] + yi[k] * zr[k]
        tr, ti = (pr * dr + pi * di) * inv, (pi * dr - pr * di) * inv
        total_re += tr
        total_im += ti
        size += math.sqrt(tr * tr + ti * ti)
    return total_re, total_im, size


@njit(cache=True, nogil=True, error_model="numpy")
def _solve_bound(form: Floats, x: float, y: float, v: float, w: float, phases: float) -> float:
    """Error of a^T X^{-1} b from what X is wrong by.

    x, y: norms of X^{-1} a and X^{-1} b; v, w: norms of the vectors a change of R meets; the
    factorisation's error is met three times (factor and two solves). ``phases`` is the change by
    the final phases, already with its vectors. First order times 1.2, which covers the higher
    orders and the rounded norms because kappa |dX| <= 0.05 was checked.
    """
    first_order: float = form[MATRIX] * (v * w + x * y) + 3.0 * form[FACTORING] * x * y + phases
    return 1.2 * first_order


@njit(cache=True, nogil=True, error_model="numpy")
def _parallel(
    re: Floats, im: Floats, c: Floats, vector: Floats, br: Floats, bi: Floats, form: Floats,
    turned: float, sum_unit: float,
) -> tuple[complex, float, float, float]:  # fmt: skip
    """-v^T (R : tau_z) v = b^T X^{-1} b - v^T R v for b = R v on entry, L^{-1} c^1/2 b on exit.

    Returns it, its bound, |X^{-1} c^1/2 R v| and |v - c^1/2 X^{-1} c^1/2 R v|.
    """
    n = len(c)
    head = complex(np.dot(vector, br), np.dot(vector, bi))
    _times_root(c, br, bi)
    forward(re, im, br, bi)
    xr, xi = np.empty(n), np.empty(n)
    backward(re, im, br, bi, xr, xi)
    value_re, value_im, size = _bilinear(re, im, br, bi, br, bi)
    x, length = _norm(xr, xi), _norm(vector, np.zeros(n))
    _times_root(c, xr, xi)
    rest = _norm(vector - xr, xi)
    bound = _solve_bound(form, x, x, rest, rest, turned * length * length)
    bound += 2.0 * sum_unit * (length * form[FORM_SIZE] * (length + 2.0 * x) + size)
    return complex(value_re, value_im) - head, bound, x, rest


@njit(cache=True, nogil=True, error_model="numpy")
def _sum_forms(
    re: Floats, im: Floats, c: Floats, slopes: Floats, shift: Floats, br: Floats, bi: Floats,
    x: float, rest: float, form: Floats, turned: float, sum_unit: float, mean: Complexes,
) -> tuple[float, complex, float]:  # fmt: skip
    """What the sum coordinate adds to the moment: means, largest bound, pair term and its bound."""
    n = len(c)
    pair, pair_bound, mean_bound = 0.0 + 0.0j, 0.0, 0.0
    distance = _norm(shift, np.zeros(n))
    xr, xi = np.empty(n), np.empty(n)
    for axis in range(3):
        mr, mi = slopes[axis].copy(), np.zeros(n)
        length = _norm(mr, mi)
        _times_root(c, mr, mi)
        forward(re, im, mr, mi)
        backward(re, im, mr, mi, xr, xi)
        y = _norm(xr, xi)
        part_re, part_im, size = _bilinear(re, im, mr, mi, br, bi)
        mean[axis] = complex(part_re - np.dot(slopes[axis], shift), part_im)
        bound = _solve_bound(form, x, y, rest, y, turned * length * distance)
        rounding = distance * form[FORM_SIZE] * y + length * (distance + x) + size
        mean_bound = max(mean_bound, bound + 2.0 * sum_unit * rounding)
        part_re, part_im, size = _bilinear(re, im, mr, mi, mr, mi)
        pair += 0.5 * complex(part_re, part_im)
        bound = _solve_bound(form, y, y, y, y, turned * length * length)
        pair_bound += 0.5 * bound + sum_unit * (size + 2.0 * length * y)
    return mean_bound, pair, pair_bound


@njit(cache=True, nogil=True, error_model="numpy")
def evaluate(
    rows: Floats, products: Floats, slope_products: Floats, values: Floats, times: Floats,
    g: Floats, f: Floats, exponents: Floats, shift: Floats, slopes: Floats, traces: Floats,
    skews: Floats, constants: Floats,
) -> tuple[Complexes, Floats, Complexes, Floats, Complexes, Floats]:  # fmt: skip
    """All times of one chunk; an infinite ``log_bound`` marks one that could not be bounded.

    rows (4 T, n(n+1)/2): packed J D J^T, re and im of form 1, then of form 2. products (2, T, n):
    R_1 Delta. slope_products (axes, 2, T, n): R_2 m, no axes for a constant moment.
    """
    n, count = len(g), len(times)
    log, log_bound = np.empty(count, np.complex128), np.empty(count)
    mean, mean_bound = np.zeros((3, count), np.complex128), np.zeros(count)
    pair, pair_bound = np.zeros(count, np.complex128), np.zeros(count)
    re, im = np.empty((n, n)), np.empty((n, n))
    summary, form = np.empty(SUMMARY), np.empty(3)
    alpha, kappa, sum_unit = constants[ALPHA], constants[KAPPA], constants[SUM_UNIT]
    for m in range(count):
        c, s = values[2, m], values[3, m]
        _summarise(values, m, times[m], g, f, exponents, traces, summary)
        turned = summary[WORST] * kappa * kappa
        total = complex(summary[LOG_RE], summary[LOG_IM])
        bound = summary[PHASES] * alpha / (1.0 - alpha)
        bound += 4.0 * U * (n + 4.0) * (summary[LOG_SIZE] + n)
        for which in range(2):
            scale = 1.0 / np.sqrt(f) if which == 0 else np.sqrt(f)
            row = 2 * which * count + m
            growth = _factored(rows[row], rows[row + count], c, s, scale, re, im)
            size = summary[SIZE + which]
            forming = sum_unit * size + 8.0 * U * (size + math.sqrt(n))
            forming += 2.1 * summary[TAU_TOP] * skews[which]
            form[MATRIX] = forming + summary[MOVED + which]
            form[FACTORING] = constants[FACTOR_UNIT] * growth
            form[FORM_SIZE] = size
            log_re, log_im, log_size, margin = _pivot_logs(re, im, c, s)
            change = kappa * (forming + form[FACTORING])
            drift = math.sqrt(n) * change / (1.0 - min(change, 0.5))
            if not (change < 0.05 and margin > 4.0 * drift):
                bound = np.inf
                break
            total -= 0.5 * complex(log_re, log_im)
            bound += 0.5 * drift + 4.0 * U * (n + 4.0) * (log_size + n)
            if which == 0:
                br, bi = products[0, m].copy(), products[1, m].copy()
                value, error, x, rest = _parallel(
                    re, im, c, shift, br, bi, form, turned, sum_unit
                )  # fmt: skip
                total += value
                bound += error
                if len(slope_products):
                    mean_bound[m], pair[m], pair_bound[m] = _sum_forms(
                        re, im, c, slopes, shift, br, bi, x, rest, form, turned, sum_unit,
                        mean[:, m],
                    )  # fmt: skip
                continue
            for axis in range(len(slope_products)):
                br, bi = slope_products[axis, 0, m].copy(), slope_products[axis, 1, m].copy()
                value, error, x, rest = _parallel(
                    re, im, c, slopes[axis], br, bi, form, turned, sum_unit
                )  # fmt: skip
                pair[m] += 0.5 * value
                pair_bound[m] += 0.5 * error
        log[m] = total
        log_bound[m] = bound
    return log, log_bound, mean, mean_bound, pair, pair_bound
