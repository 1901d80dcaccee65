r"""Orthonormal Hermite functions at given points, with a proven error bound.

.. math::
   \varphi_{n+1}(x) = \sqrt{\tfrac{2}{n+1}}\,x\,\varphi_n - \sqrt{\tfrac{n}{n+1}}\,\varphi_{n-1},
   \qquad \varphi_0 = \pi^{-1/4} e^{-x^2/2}

(NIST DLMF 18.9.1 with Table 18.9.1 and 18.3). The start is kept as mantissa and exponent, so nothing
underflows at large x. Everywhere |phi_n| <= pi^{-1/4} (DLMF 18.14.9).

Why the forward recursion may be trusted (proofs in DEVELOPERS.md, "Hermite functions"), with
X = x^2/2, b_n^2 = n/2, u = 2^-53 and a local rounding error of at most
u (3.5 |alpha x phi_{n-1}| + 2.5 |beta phi_{n-2}| + |phi_n|):

* n <= X (forbidden region): b_n phi_n / phi_{n-1} >= x/2, so the relative errors eta_n grow by
  d_{n+1} <= (n/X) d_n + u (4.5 + 6n/X);
* n > X (allowed region): the energy A_n = b_n^2 e_{n-1}^2 - x b_n e_n e_{n-1} + b_{n+1}^2 e_n^2 of
  an error e obeys |e_n|^2 <= 2 A_n / k_n, k_n = n + 1 - X, and A_n / k_n never grows; a new local
  error delta enters with sqrt((n+1)/k_n) |delta|.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

PEAK = 0.7511255444649425
"""pi^{-1/4}, the largest value of any Hermite function."""

FORBIDDEN_MAX = 1 << 13
"""Largest x^2/2 the error tables reach; beyond (|x| > 128) the functions of n <= 2004 are zero."""


@njit(cache=True, nogil=True)
def forbidden_errors(largest):  # type: ignore[no-untyped-def]
    """Bounds of eta_{F+1} and d_{F+1} for F = floor(X) = 0..largest, shape (2, largest + 1)."""
    out = np.empty((2, largest + 1))
    unit = UNIT_ROUNDOFF
    for floor in range(largest + 1):
        step = 4.5 * unit
        total = step
        for n in range(1, floor + 1):
            ratio = n / floor
            step = ratio * step + unit * (4.5 + 6.0 * ratio)
            total += step
        out[0, floor] = total
        out[1, floor] = step
    return out


@njit(cache=True, nogil=True)
def log_tail(n, x):  # type: ignore[no-untyped-def]
    r"""Logarithm of a bound of the norm of phi_n beyond x, ``(integral_x^inf phi_n^2)^(1/2)``.

    For x > a = sqrt(2n+1) the decay rate u = -phi'/phi obeys u' = u^2 - q, q = x^2 - a^2, and
    u >= sqrt(q) (a solution that falls below can not decay), hence phi_n(x) <= pi^{-1/4}
    exp(-integral_a^x sqrt(q)) and the tail is at most phi_n(x)^2 / (2 sqrt(q(x))).
    """
    a2 = 2.0 * n + 1.0
    q = x * x - a2
    if q <= 0.0:
        return 0.0
    root = np.sqrt(q)
    action = 0.5 * (x * root - a2 * np.log((x + root) / np.sqrt(a2)))
    return min(0.0, np.log(PEAK) - action - 0.5 * np.log(2.0 * root))


@njit(cache=True, nogil=True)
def reach(n, log_target):  # type: ignore[no-untyped-def]
    """Smallest x (to 1e-3, from above) with log_tail(n, x) <= log_target."""
    low = np.sqrt(2.0 * n + 1.0)
    high = low + 1.0
    while log_tail(n, high) > log_target:
        high += 1.0
    while high - low > 1e-3:
        middle = 0.5 * (low + high)
        if log_tail(n, middle) > log_target:
            low = middle
        else:
            high = middle
    return high


@njit(cache=True, nogil=True)
def _start(x, weight, value, exponent, scale):  # type: ignore[no-untyped-def]
    """phi_0 as mantissa times 2^exponent; ``scale`` = weight * 2^exponent."""
    for j in range(len(x)):
        half = 0.5 * x[j] * x[j]
        exponent[j] = 0
        if half > 600.0:
            exponent[j] = -np.int64(half / np.log(2.0))
        value[j] = PEAK * np.exp(-half - exponent[j] * np.log(2.0))
        scale[j] = np.ldexp(weight, exponent[j])


@njit(cache=True, nogil=True)
def _store(value, scale, row, squares):  # type: ignore[no-untyped-def]
    for j in range(len(value)):
        shown = value[j] * scale[j]
        row[j] = shown
        squares[j] += shown * shown


@njit(cache=True, nogil=True)
def _step(alpha, beta, x, value, older):  # type: ignore[no-untyped-def]
    """One step of the recursion; the result replaces ``older``."""
    for j in range(len(x)):
        older[j] = (alpha * x[j]) * value[j] - beta * older[j]


@njit(cache=True, nogil=True)
def _rescale(weight, value, older, scale, exponent):  # type: ignore[no-untyped-def]
    """Move large mantissas into the exponent: at most a factor 2^61 arises between two calls."""
    for j in range(len(value)):
        if exponent[j] < 0 and abs(value[j]) > 2.0**400:
            value[j] *= 2.0**-400
            older[j] *= 2.0**-400
            exponent[j] += 400
            scale[j] = np.ldexp(weight, exponent[j])


@njit(cache=True, nogil=True)
def fill_hermite(x, weight, out, error, forbidden):  # type: ignore[no-untyped-def]
    """Write weight * phi_n(x_j) into ``out`` (N + 1, M) and pointwise error bounds into ``error``.

    ``error[j]`` >= |computed - weight * phi_n(x_j)| for every n <= N, the x_j taken as exact; all
    |x_j| <= 128. ``forbidden``: table of :func:`forbidden_errors`, up to max x^2/2.
    """
    top = out.shape[0] - 1
    points = out.shape[1]
    older = np.zeros(points)
    value = np.empty(points)
    scale = np.empty(points)
    exponent = np.zeros(points, dtype=np.int64)
    squares = np.zeros(points)  # weight^2 * sum of phi_m^2, m <= n
    switch = (0.5 * x * x).astype(np.int64) + 1  # first n of the allowed region
    order = np.argsort(switch)
    error[:] = 0.0
    _start(x, weight, value, exponent, scale)
    _store(value, scale, out[0], squares)
    waiting = 0
    for n in range(1, top + 1):
        _step(np.sqrt(2.0 / n), np.sqrt((n - 1.0) / n), x, value, older)
        value, older = older, value
        _store(value, scale, out[n], squares)
        while waiting < points and switch[order[waiting]] == n:
            j = order[waiting]
            error[j] = _at_switch(n, x[j], out[n - 1, j], out[n, j], squares[j], forbidden)
            waiting += 1
        if n % 8 == 0:
            _rescale(weight, value, older, scale, exponent)
    for j in range(points):
        error[j] = _at_end(top, x[j], weight, out[top, j], squares[j], error[j], forbidden)


@njit(cache=True, nogil=True)
def _start_error(x):  # type: ignore[no-untyped-def]
    """Relative error of phi_0: the square (1), the exponent's removal (2), exp and products."""
    return (1.5 * x * x + 12.0) * UNIT_ROUNDOFF


@njit(cache=True, nogil=True)
def _at_switch(n, x, below, here, squares, forbidden):  # type: ignore[no-untyped-def]
    """Norm sqrt(2 A_n / k_n) of the error where the allowed region begins, n = floor(x^2/2) + 1."""
    relative = _start_error(x) + forbidden[0, n - 1]
    step = forbidden[1, n - 1]
    k = n + 1.0 - 0.5 * x * x
    inherited = relative * np.sqrt(0.5 * squares) + np.sqrt(0.5 * (n + 1.0)) * step * abs(here)
    return max(np.sqrt(2.0 / k) * inherited, relative * max(abs(below), abs(here)))


@njit(cache=True, nogil=True)
def _at_end(top, x, weight, value, squares, inherited, forbidden):  # type: ignore[no-untyped-def]
    """Error bound valid for all n <= top at one point."""
    half = 0.5 * x * x
    switch = np.int64(half) + 1
    lost = 1e-180 * weight  # exponents below float64
    if switch > top:
        return 1.001 * (_start_error(x) + forbidden[0, switch - 1]) * abs(value) + lost
    growth = top - switch + half * np.log((top + 1.0 - half) / (switch + 1.0 - half))
    fresh = 13.0 * UNIT_ROUNDOFF * np.sqrt(growth * squares)
    # 2 roundings of the weight and the stored product; 1.001: second order
    return 1.001 * (inherited + fresh + 2.0 * UNIT_ROUNDOFF * weight * PEAK) + lost


_forbidden = forbidden_errors(0)


def forbidden_table(largest: int) -> Floats:
    """The error table up to ``largest`` at least; grown on demand, kept for the process."""
    global _forbidden
    table: Floats = _forbidden
    if table.shape[1] <= largest:
        table = forbidden_errors(min(FORBIDDEN_MAX, 1 << int(largest).bit_length()))
        _forbidden = table
    return table


def hermite_functions(x: Floats, n_max: int) -> tuple[Floats, Floats]:
    """phi_0..phi_n_max at the points x.

    Returns
    -------
    values : (n_max + 1, M) float64
    error : (M,) float64
        Proven: |values[n, j] - phi_n(x_j)| <= error[j] for all n, the double x_j taken as exact.
        Beyond |x| = 128 the value 0 is given with the tail bound (below 1e-300 for n <= 2000).

    Notes
    -----
    Cost: about 1 ns a value. n_max <= 2004.
    """
    inside = np.abs(x) <= 128.0
    points = np.ascontiguousarray(x[inside])
    values = np.zeros((n_max + 1, len(x)))
    error = np.full(len(x), 1e-180)
    if len(points):
        table = forbidden_table(int(0.5 * np.max(np.abs(points)) ** 2) + 1)
        filled = np.empty((n_max + 1, len(points)))
        bounds = np.empty(len(points))
        fill_hermite(points, 1.0, filled, bounds, table)
        values[:, inside] = filled
        error[inside] = bounds
    return values, error
