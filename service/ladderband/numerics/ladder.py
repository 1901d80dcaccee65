r"""Weighted ladder recursion for tables of overlap integrals, with a proven bound.

Applying a_i to the generating function gives, averaged over all raisings with the quanta as weights,

.. math::
   |k|\,S(k) = \sum_i \sqrt{k_i}\Bigl[w_i S(k-e_i)
             + \sum_j W_{ij}\sqrt{k_j-\delta_{ij}}\,S(k-e_i-e_j)\Bigr],\qquad |k| = v + n,

the stable form of the recursion: the textbook form, which raises one index at a time, has an
absolute error of 0.5 at displacement 5 and 60 x 60 quanta (tests/unit/test_ladder.py shows it).

The bound (proof in DEVELOPERS.md, "The ladder bound"). With L the highest shell v + n of the table,
u = 2^-53, Q = |w|^2 / 8 and any lambda in (0, 1),

.. math::
   |\hat S - S| \le |\varepsilon_c| + \sum_{l=1}^{L} \rho_l
       \left[\frac{\lambda^{-\mu}-1}{\mu} + \frac{(1-\lambda^2)^{-L/2}\lambda^{-\mu'}}{l}\right],
   \quad \mu = 1 + Q,\ \mu' = 1 + Q\,\frac{1+\lambda}{1-\lambda},

.. math::
   \rho_l = 28u\,(|w|\sqrt l\,\|\hat S_{l-1}\| + (|W_{yy}|+|W_{yz}|)\,l\,\|\hat S_{l-2}\|),

where ||S_l|| is the Euclidean norm of shell l of the computed table. It is a posteriori and costs one
multiplication an element. Assumed: IEEE 754 double arithmetic, and an ``exp`` within 4 units of 2^-53.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numba import njit

from ladderband.numerics.oscillators import OscillatorColumns, exact
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

ROUNDINGS = 28
"""Roundings on the longest path to an element: 16 in a coefficient, 2 square roots, 3 products, 4
sums, 2 in the division by v + n; one more covers second order."""

DISPLACEMENT_ROUNDINGS = {"displacement": 1.0, "huang_rhys": 2.0, "shift_angstrom_sqrt_u": 6.0}
"""Units of 2^-53 by which Delta may be off; see :meth:`OscillatorColumns.displacements`."""


@dataclass(frozen=True)
class PairCoefficients:
    """W, w, c of B oscillator pairs in float64, each entry within 16 units of 2^-53 (relative).

    ``c`` is c itself (0 where it underflows) with its own relative error ``c_error``; ``scale`` is
    sqrt(g/f), within 3 units; ``displacement`` is within ``displacement_error`` (relative). All (B,).
    """

    w_yy: Floats
    w_yz: Floats
    w_y: Floats
    w_z: Floats
    c: Floats
    c_error: Floats
    scale: Floats
    displacement: Floats
    displacement_error: float


def _ratios_exact(pairs: OscillatorColumns) -> tuple[Floats, Floats, Floats]:
    """(1 - t)/(1 + t), 1/(1 + t) and t, t = f/g, each correctly rounded from exact input."""
    columns = ([], [], [])  # type: tuple[list[float], list[float], list[float]]
    for index in range(len(pairs)):
        g = exact(pairs.wavenumber_initial_cm1, index)
        f = exact(pairs.wavenumber_final_cm1, index)
        for column, value in zip(columns, ((g - f) / (g + f), g / (g + f), f / g), strict=True):
            column.append(_nearest(value))
    return np.array(columns[0]), np.array(columns[1]), np.array(columns[2])


def _nearest(value: Fraction) -> float:
    return value.numerator / value.denominator


def _ratios(pairs: OscillatorColumns) -> tuple[Floats, Floats, Floats]:
    """The same; from doubles with at most 3 roundings, and no cancellation (g - f is one rounding)."""
    g, f = pairs.wavenumber_initial_cm1, pairs.wavenumber_final_cm1
    if isinstance(g, tuple) or isinstance(f, tuple):
        return _ratios_exact(pairs)
    total = g + f
    return (g - f) / total, g / total, f / g


def pair_coefficients(pairs: OscillatorColumns) -> PairCoefficients:
    """The generator of each pair for N = 1, with the error each entry is promised to have.

    Notes
    -----
    Roundings, in units of 2^-53: the three ratios <= 3; t <= 1, sqrt t <= 1.5; the displacement <= 6
    (see :class:`OscillatorColumns`); w_z = sqrt2 * Delta * g/(g+f): 1 + 6 + 3 + 2 = 12, w_y a product
    and sqrt t more: 14.5; w_yz 1.5 + 3 + 1. The exponent Delta^2 g/(g+f)/2: 13 + 3 + 2 = 18, which the
    exponential turns into 18 times its size.
    """
    ratios = _ratios(pairs)
    delta = pairs.displacements()
    w_yy, w_yz, w_y, w_z, c, c_error, scale = _coefficients(*ratios, delta)
    return PairCoefficients(
        w_yy=w_yy,
        w_yz=w_yz,
        w_y=w_y,
        w_z=w_z,
        c=c,
        c_error=c_error,
        scale=scale,
        displacement=delta,
        displacement_error=DISPLACEMENT_ROUNDINGS[pairs.shift_kind] * UNIT_ROUNDOFF,
    )


@njit(cache=True, nogil=True)
def _coefficients(difference, share, t, delta):  # type: ignore[no-untyped-def]
    """Rows w_yy, w_yz, w_y, w_z, c, c_error, scale of all pairs, one operation after the other."""
    out = np.empty((7, len(delta)))
    for b in range(len(delta)):
        root_t = np.sqrt(t[b])
        w_yz = 2.0 * root_t * share[b]
        w_z = np.sqrt(2.0) * delta[b] * share[b]
        exponent = 0.5 * delta[b] * delta[b] * share[b]
        out[0, b] = difference[b]
        out[1, b] = w_yz
        out[2, b] = -w_z * root_t
        out[3, b] = w_z
        out[4, b] = np.sqrt(w_yz) * np.exp(-exponent)
        out[5, b] = (20.0 * exponent + 16.0) * UNIT_ROUNDOFF
        out[6, b] = 1.0 / root_t
    return out


@njit(cache=True, nogil=True)
def _fill(w_yy, w_yz, w_y, w_z, c, root, inverse, table):  # type: ignore[no-untyped-def]
    """Fill one table (V + 1, N + 1) in place; ``root[k]`` = sqrt k, ``inverse[k]`` = 1/k."""
    rows, columns = table.shape
    for v in range(rows):
        row = table[v]
        for n in range(columns):
            row[n] = 0.0
        if v >= 1:  # what the two finished rows give: no dependence along the row
            below = table[v - 1]
            first = w_y * root[v]
            cross = 2.0 * w_yz * root[v]
            row[0] = first * below[0]
            for n in range(1, columns):
                row[n] = first * below[n] + (cross * root[n]) * below[n - 1]
        if v >= 2:
            below = table[v - 2]
            second = w_yy * np.sqrt(v * (v - 1.0))
            for n in range(columns):
                row[n] += second * below[n]
        if v == 0:
            row[0] = c
        else:
            row[0] *= inverse[v]
        if columns > 1:
            row[1] = (row[1] + w_z * row[0]) * inverse[v + 1]
        for n in range(2, columns):
            along = (w_z * root[n]) * row[n - 1] - (w_yy * np.sqrt(n * (n - 1.0))) * row[n - 2]
            row[n] = (row[n] + along) * inverse[v + n]


@njit(cache=True, nogil=True)
def _shell_norms(table, norms):  # type: ignore[no-untyped-def]
    """Euclidean norm of each shell v + n = l of the table, into ``norms`` (V + N + 1,)."""
    rows, columns = table.shape
    norms[:] = 0.0
    for v in range(rows):
        for n in range(columns):
            norms[v + n] += table[v, n] * table[v, n]
    for shell in range(len(norms)):
        norms[shell] = np.sqrt(norms[shell])


@njit(cache=True, nogil=True)
def propagated(residual, residual_by_shell, squared_w, top):  # type: ignore[no-untyped-def]
    """Bound of the propagated error: the bracket of the module's formula, minimised over lambda.

    ``residual`` = sum of rho_l, ``residual_by_shell`` = sum of rho_l / l, ``top`` = L. Infinite
    where the formula overflows.
    """
    best = np.inf
    quarter = squared_w / 8.0
    mu = 1.0 + quarter
    for step in range(1, 17):
        lam = 2.0 ** (-0.5 * step)
        logarithm = -np.log(lam)
        far = mu * logarithm
        near = (1.0 + quarter * (1.0 + lam) / (1.0 - lam)) * logarithm
        near -= 0.5 * top * np.log1p(-lam * lam)
        if far < 600.0 and near < 600.0:
            value = residual * (np.exp(far) - 1.0) / mu + residual_by_shell * np.exp(near)
            best = min(best, value)
    return best


@njit(cache=True, nogil=True)
def _table_bound(table, norms, w_yy, w_yz, w_y, w_z, c_error):  # type: ignore[no-untyped-def]
    """Proven bound of one table filled by :func:`_fill`."""
    _shell_norms(table, norms)
    squared_w = w_y * w_y + w_z * w_z
    length = np.sqrt(squared_w)
    spread = abs(w_yy) + abs(w_yz)
    residual = 0.0
    residual_by_shell = 0.0
    for shell in range(1, len(norms)):
        rho = length * np.sqrt(shell) * norms[shell - 1]
        if shell >= 2:
            rho += spread * shell * norms[shell - 2]
        residual += rho
        residual_by_shell += rho / shell
    top = len(norms) - 1
    rounding = ROUNDINGS * UNIT_ROUNDOFF
    worst = propagated(rounding * residual, rounding * residual_by_shell, squared_w, top)
    # 1.01: rounding of the bound itself and of the coefficients in it; 1e-280: underflow
    return 1.01 * (c_error + worst) + 1e-280


@njit(cache=True, nogil=True)
def _tables(w_yy, w_yz, w_y, w_z, c, c_error, tables, bounds):  # type: ignore[no-untyped-def]
    pairs, rows, columns = tables.shape
    size = rows + columns
    root = np.sqrt(np.arange(size, dtype=np.float64))
    inverse = np.ones(size)
    for k in range(1, size):
        inverse[k] = 1.0 / k
    norms = np.empty(rows + columns - 1)
    for b in range(pairs):
        if c[b] < 1e-200:  # the recursion would start from a denormal number
            bounds[b] = np.inf
            continue
        _fill(w_yy[b], w_yz[b], w_y[b], w_z[b], c[b], root, inverse, tables[b])
        bounds[b] = _table_bound(tables[b], norms, w_yy[b], w_yz[b], w_y[b], w_z[b], c_error[b])


def ladder_tables(
    coefficients: PairCoefficients, v_initial_max: int, v_final_max: int
) -> tuple[Floats, Floats]:
    """Tables (B, v_initial_max + 1, v_final_max + 1) and their proven bounds (B,).

    A bound is infinite, and its table meaningless, where the route does not apply: the caller
    decides by the bound. Cost: about 5 ns an element, 2 microseconds a table.
    """
    shape = (len(coefficients.c), v_initial_max + 1, v_final_max + 1)
    tables = np.zeros(shape)
    bounds = np.empty(shape[0])
    k = coefficients
    _tables(k.w_yy, k.w_yz, k.w_y, k.w_z, k.c, k.c_error, tables, bounds)
    return tables, bounds
