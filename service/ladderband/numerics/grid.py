r"""Tables of overlap integrals by the trapezoidal rule, with a proven bound.

In the final oscillator's dimensionless coordinate x (final minimum at 0, initial one at Delta)

.. math::
   S(v,n) = \int \sqrt s\,\varphi_v(\xi)\,\varphi_n(x)\,dx
          \approx h \sum_j \sqrt s\,\varphi_v(\xi_j)\,\varphi_n(x_j),
   \qquad \xi = s\,(x-\Delta),\ s = \sqrt{g/f},\ x_j = j h .

The sum over j is one matrix product. Its error has three parts, all bounded (proof in DEVELOPERS.md,
"The grid bound"; the convergence is the classical result for analytic integrands, Trefethen and
Weideman, SIAM Review 56, 385 (2014)):

* step: by Poisson summation the sum of the integrand's Fourier transform over multiples of
  omega = 2 pi / h; a Hermite function is its own transform, so with omega = s p_v + p_n each term is at
  most tail_v(p_v) + tail_n(p_n), the norms of :func:`ladderband.numerics.hermite.log_tail`;
* range: outside the grid one of the two functions is in its tail;
* rounding: pointwise errors of the Hermite functions, of xi_j, and gamma_M of the product.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from ladderband.numerics.hermite import PEAK, fill_hermite, forbidden_table, log_tail, reach
from ladderband.numerics.ladder import PairCoefficients
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

BLOCK = 512
"""Grid points in one product: keeps memory at 8 MB a factor for 2000 quanta."""


@njit(cache=True, nogil=True)
def plan(s, delta, v_max, n_max, log_target):  # type: ignore[no-untyped-def]
    """Choose the grid: (first index, number of points, h, squared norms, error of the plan).

    The squared norms bound h * sum phi^2 over the grid for any row of the two functions: 1.01, or 3.1
    for the one whose own momentum range the step does not cover (only one alias term is not small).
    h is rounded down to 20 bits, so every x_j = j h is exact.
    """
    reach_v = reach(v_max, log_target)
    reach_n = reach(n_max, log_target)
    momentum_v = s * reach_v
    momentum_n = reach_n
    omega = momentum_v + momentum_n
    twice = 2.0 * max(momentum_v, momentum_n)
    norm_v = 1.01
    norm_n = 1.01
    if twice <= 1.1 * omega:
        omega = twice
    elif momentum_v > momentum_n:
        norm_v = 3.1
    else:
        norm_n = 3.1
    h = 2.0 * np.pi / omega
    power = np.ldexp(1.0, 19 - np.int64(np.floor(np.log2(h))))
    h = np.floor(h * power) / power
    start = np.int64(np.ceil(max(-reach_n, delta - reach_v / s) / h)) - 1
    stop = np.int64(np.floor(min(reach_n, delta + reach_v / s) / h)) + 1
    tail_v = np.exp(log_tail(v_max, reach_v))
    tail_n = np.exp(log_tail(n_max, reach_n))
    # aliases: both signs; beyond the first the tails fall by more than a factor 2 a step
    step_error = 2.0 * 2.0 * (tail_v + tail_n)
    range_error = 2.0 * max(tail_v * np.sqrt(norm_n), tail_n * np.sqrt(norm_v))
    return start, max(0, stop - start + 1), h, norm_v, norm_n, step_error + range_error


@njit(cache=True, nogil=True)
def _points(first, count, h, s, delta, x, xi):  # type: ignore[no-untyped-def]
    for j in range(count):
        x[j] = (first + j) * h
        xi[j] = s * (x[j] - delta)


@njit(cache=True, nogil=True)
def _pointwise(xi, s, delta, delta_error, v_max, weight, error):  # type: ignore[no-untyped-def]
    """Add what the rounding of xi does to the initial functions: |phi'| <= sqrt(2 v + 2) pi^-1/4."""
    slope = weight * PEAK * np.sqrt(2.0 * v_max + 2.0)
    for j in range(len(xi)):
        moved = 5.0 * UNIT_ROUNDOFF * abs(xi[j]) + delta_error * abs(delta) * s
        error[j] += slope * moved


@njit(cache=True, nogil=True)
def grid_table(s, delta, delta_error, log_target, forbidden, table):  # type: ignore[no-untyped-def]
    """Fill ``table`` (V + 1, N + 1) and return its proven bound."""
    rows, columns = table.shape
    first, count, h, norm_v, norm_n, bound = plan(s, delta, rows - 1, columns - 1, log_target)
    table[:, :] = 0.0
    weight_v = np.sqrt(h * s)
    weight_n = np.sqrt(h)
    squared_v = 0.0
    squared_n = 0.0
    for begin in range(0, count, BLOCK):
        size = min(BLOCK, count - begin)
        x = np.empty(size)
        xi = np.empty(size)
        _points(first + begin, size, h, s, delta, x, xi)
        error_v = np.empty(size)
        error_n = np.empty(size)
        initial = np.empty((rows, size))
        final = np.empty((columns, size))
        fill_hermite(xi, weight_v, initial, error_v, forbidden)
        fill_hermite(x, weight_n, final, error_n, forbidden)
        _pointwise(xi, s, delta, delta_error, rows - 1, weight_v, error_v)
        squared_v += np.sum(error_v * error_v)
        squared_n += np.sum(error_n * error_n)
        if count <= BLOCK:
            np.dot(initial, final.T, table)
        else:
            table += np.dot(initial, final.T)
    # + 16: the weights' roundings (4 each) and the sum over blocks
    product = (count + 16.0) * UNIT_ROUNDOFF * np.sqrt(norm_v * norm_n)
    rounding = np.sqrt(squared_v * norm_n) + np.sqrt(squared_n * norm_v)
    rounding += np.sqrt(squared_v * squared_n)
    return 1.01 * (bound + product + rounding)


@njit(cache=True, nogil=True)
def _tables(  # type: ignore[no-untyped-def]
    scale, displacement, displacement_error, which, log_target, forbidden, tables, bounds
):
    for index in which:
        bounds[index] = grid_table(
            scale[index],
            displacement[index],
            displacement_error,
            log_target,
            forbidden,
            tables[index],
        )


def grid_points(coefficients: PairCoefficients, index: int, v_max: int, n_max: int) -> int:
    """Number of grid points for one pair: what the cost model needs."""
    s, delta = coefficients.scale[index], coefficients.displacement[index]
    return int(plan(s, delta, v_max, n_max, -30.0)[1])


def grid_tables(
    coefficients: PairCoefficients,
    which: np.ndarray[tuple[int], np.dtype[np.int64]],
    tables: Floats,
    bounds: Floats,
    tolerance: float,
) -> None:
    """Overwrite the tables of the pairs ``which`` and their bounds, in place.

    tables : (B, V + 1, N + 1); bounds : (B,). Cost: one product of 2 (V+1)(N+1) M operations a pair
    with M of the order of the larger number of quanta, and (V + N + 2) M Hermite values.
    """
    _, rows, columns = tables.shape
    log_target = float(np.log(max(1e-17, min(1e-13, 1e-3 * tolerance))))
    top = max(reach(rows - 1, log_target), reach(columns - 1, log_target)) + 1.0
    forbidden = forbidden_table(int(0.5 * top * top) + 1)
    _tables(
        coefficients.scale,
        coefficients.displacement,
        coefficients.displacement_error,
        which,
        log_target,
        forbidden,
        tables,
        bounds,
    )
