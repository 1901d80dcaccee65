r"""Correlation function of one block of modes mixed by a Duschinsky matrix, N instead of 2N rows.

With the Boltzmann factors q_k = exp(-beta g_k + i g_k t), tau_k = (1 - q_k)/(1 + q_k), the phases
phi_k = f_k t / 2, c = cos phi, s = sin phi, and the two complex symmetric matrices

.. math::
   R_1 = F^{-1/2} J G \tau J^T F^{-1/2},\quad R_2 = F^{1/2} J G^{-1} \tau J^T F^{1/2},\quad
   X_m = c^{1/2} R_m c^{1/2} + i s,

the correlation function is

.. math::
   \chi(t) = \prod_k \frac{1 - e^{-\beta g_k}}{1 + q_k}
     \prod_{m=1,2} \prod_k \bigl(d^{(m)}_k e^{-i\phi_k}\bigr)^{-1/2}
     \exp\{-\Delta^T R_1 \Delta + b^T X_1^{-1} b\},\qquad b = c^{1/2} R_1 \Delta,

d^(m) the unpivoted pivots of X_m and every square root the principal one.

Derivation (full text in DEVELOPERS.md, "Correlation function"). The generator's W is a reflection,
W = 2 V V^T - 1 with V = [G^1/2; F^1/2 J] P^1/2, so the 2N-dimensional det(1 - EWEW) of the pairing
integral splits into det(V^T tau V) and the same with the complement of V. Multiplying the tangents
tau_z = i tan phi by cos phi removes their poles. The cotangent/tangent form goes back to Yan and
Mukamel, J. Chem. Phys. 85, 5908 (1986).

Condition. With alpha = |D W D| < 1 (D: square roots of the Boltzmann factors on the initial side)
and Gamma = (R - 1)(R + 1)^{-1}, c R + i s = e^{i phi} (1 + e^{-2 i phi} Gamma)(R + 1)/2, and
1 + e^{-2 i phi} Gamma is the Schur complement of 1 -+ E^1/2 W E^1/2 on the final side; hence
|X^{-1}| <= kappa = 2 / (1 - alpha) for every real t (the symmetric scaling by c^1/2 keeps the bound
by the three-lines theorem). A leading block of X is the same matrix with the other phases at pi/2,
so all leading minors obey the bound too: no pivoting is needed.

Branch. Each pivot is d_k = c_k r_k + i s_k with Re r_k > 0 (a Schur complement of a matrix with
positive real part), so d_k e^{-i phi_k} = (r_k + 1)(1 + e^{-2 i phi_k} gamma_k)/2 with both factors
in the right half-plane: its argument lies in (-pi, pi), the principal root is continuous in t, and
at t = 0 it is the positive one. No phase is followed from point to point.

Rounding. ``*_bound`` below are proved: phases, forming R by matrix products, the factorisation, the
solves and the sums. See
:func:`tangent_kernel._solve_bound` and DEVELOPERS.md, "Rounding of chi(t)".
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.errors import PrecisionNotReached
from ladderband.numerics.generator import overlap_generator
from ladderband.numerics.rounding import UNIT_ROUNDOFF, gamma
from ladderband.numerics.symmetric_factor import factor_rounding
from ladderband.numerics.tangent_kernel import (
    ALPHA,
    CONSTANTS,
    FACTOR_UNIT,
    KAPPA,
    SUM_UNIT,
    Complexes,
    evaluate,
    tangents,
)
from ladderband.numerics.transition import Floats

CHUNK_BYTES = 64 * 2**20
"""Memory of the products formed at a time; what keeps 300 modes far below a gigabyte."""


@dataclass(frozen=True)
class ModeBlock:
    """Modes coupled to each other and to no others.

    g, f, displacement, exponents : (n,) initial and final wavenumbers, Delta, h c g / (k T).
    mixing : (n, n) orthogonal, row i = final mode i.
    slopes : (n, 3) derivative of the moment along the INITIAL mass-weighted coordinate (hbar = 1),
        all zero for a constant moment.
    """

    g: Floats
    f: Floats
    mixing: Floats
    displacement: Floats
    exponents: Floats
    slopes: Floats

    def __len__(self) -> int:
        return len(self.g)

    @property
    def has_slopes(self) -> bool:
        return bool(self.slopes.any())


@dataclass(frozen=True)
class BlockValues:
    """What one block adds at each of T times, with proved bounds.

    log : (T,) complex, ln chi of the block on the continuous branch; error <= log_bound (T,).
    mean : (3, T) complex, shift of the moment's argument; error <= mean_bound (T,) each.
    covariance : (T,) complex, its pair term summed over components; error <= covariance_bound.
    The moment's factor of all blocks together is sum_c (mu_c + sum mean_c)^2 + sum covariance.
    """

    log: Complexes
    log_bound: Floats
    mean: Complexes
    mean_bound: Floats
    covariance: Complexes
    covariance_bound: Floats


def contraction(block: ModeBlock) -> float:
    """alpha = |D W D| rounded up; raises where the bound cannot be told from 1.

    W comes from a Cholesky inverse of a matrix of condition at most s = (largest / smallest
    wavenumber), scaled by s again: its error is below 8 n^2 u s^2 (Higham 2002, ch. 10 and 14).
    """
    generator = overlap_generator(block.g, block.f, block.mixing, np.zeros(len(block)))
    norm = float(np.abs(np.linalg.eigvalsh(generator.thermal(block.exponents).W)).max())
    both = np.concatenate([block.g, block.f])
    spread = float(both.max() / both.min())
    alpha = norm + 8.0 * len(block) ** 2 * UNIT_ROUNDOFF * spread**2
    if not alpha < 1.0 - 1e-9:
        raise PrecisionNotReached(
            "The thermal populations are too high for a proven band in double precision "
            "(a mode far below k T, or wavenumbers too many orders of magnitude apart).",
            "1",
            f"{alpha:.3g}",
        )
    return alpha


def block_values(
    block: ModeBlock, step: float, start: int, stop: int, deadline: Deadline
) -> BlockValues:
    """Evaluate one block at the times start * step, ..., (stop - 1) * step.

    Cost a time point for n modes: 4 n^3 flops of real matrix product (all points at once) and two
    factorisations of n^3/3 complex multiplications. ``step`` must have at most 30 significant bits
    so that every t is exact.
    """
    constant = _constants(block)
    outer = _outer(block.mixing)
    chunk = max(1, min(64, CHUNK_BYTES // (8 * 4 * len(outer))))
    parts = []
    for first in range(start, stop, chunk):
        deadline.check()
        times = step * np.arange(first, min(first + chunk, stop), dtype=np.float64)
        parts.append(_chunk(block, outer, constant, times))
    log, log_bound, mean, mean_bound, cov, cov_bound = (
        np.concatenate(column, axis=-1) for column in zip(*parts, strict=True)
    )
    if not np.isfinite(log_bound).all():
        raise PrecisionNotReached(
            "The correlation function could not be bounded in double precision: the modes are too "
            "strongly mixed or too hot.",
            "finite",
            "infinite",
        )
    return BlockValues(log, log_bound, mean, mean_bound, cov, cov_bound)


@dataclass(frozen=True)
class _Constants:
    """What does not depend on time: J scaled to either form, slopes in Q', and the bound's."""

    scaled: tuple[Floats, Floats]  # F^-1/2 J, F^1/2 J
    weights: tuple[Floats, Floats]  # g, 1/g: R_m = scaled diag(weight tau) scaled^T
    slopes: Floats
    traces: Floats
    skews: Floats
    bounds: Floats


def _constants(block: ModeBlock) -> _Constants:
    n = len(block)
    root = np.sqrt(block.f)[:, None]
    scaled = (block.mixing / root, block.mixing * root)
    weights = (block.g, 1.0 / block.g)
    alpha = contraction(block)
    slack = block.mixing @ block.mixing.T - np.eye(n)
    skew = float(np.linalg.norm(slack)) + 4.0 * n * UNIT_ROUNDOFF
    bounds = np.empty(CONSTANTS)
    bounds[ALPHA], bounds[KAPPA] = alpha, 2.0 / (1.0 - alpha)
    bounds[FACTOR_UNIT], bounds[SUM_UNIT] = factor_rounding(n), gamma(n + 30.0)
    return _Constants(
        scaled,
        weights,
        np.ascontiguousarray(((block.mixing @ block.slopes) / root).T),
        np.stack([w * (a**2).sum(axis=0) for w, a in zip(weights, scaled, strict=True)]),
        skew * np.array([block.g.max() / block.f.min(), block.f.max() / block.g.min()]),
        bounds,
    )


def _outer(mixing: Floats) -> Floats:
    """J_ik J_jk for i <= j, packed: (n (n + 1) / 2, n); J D J^T is then one matrix product."""
    rows, columns = np.triu_indices(len(mixing))
    return np.ascontiguousarray(mixing[rows] * mixing[columns])


def _chunk(
    block: ModeBlock, outer: Floats, constant: _Constants, times: Floats
) -> tuple[Complexes, Floats, Complexes, Floats, Complexes, Floats]:
    """Evaluate the times of one chunk: matrix products here, the rest compiled."""
    values = tangents(block.g, block.f, block.exponents, times)
    tau = values[:2]
    stacked = np.concatenate([part * weight for weight in constant.weights for part in tau])
    slope_products = np.zeros((0, 2, len(times), len(block)))
    if block.has_slopes:
        slope_products = np.stack(
            [_applied(constant, 1, tau, vector) for vector in constant.slopes]
        )
    return evaluate(  # type: ignore[no-any-return]
        stacked @ outer.T,
        _applied(constant, 0, tau, block.displacement),
        slope_products,
        values,
        times,
        block.g,
        block.f,
        block.exponents,
        block.displacement,
        constant.slopes,
        constant.traces,
        constant.skews,
        constant.bounds,
    )


def _applied(constant: _Constants, form: int, tau: Floats, vector: Floats) -> Floats:
    """R v of one form at all times, (2, T, n); error at most gamma_{2n+8} sum nu |tau| |v|."""
    scaled = constant.scaled[form]
    return (tau * (constant.weights[form] * (scaled.T @ vector))) @ scaled.T
