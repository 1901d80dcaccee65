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
solves and the sums. See :func:`_quadratic_bound` and DEVELOPERS.md, "Rounding of chi(t)".
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.errors import PrecisionNotReached
from ladderband.numerics.generator import overlap_generator
from ladderband.numerics.symmetric_factor import (
    UNIT_ROUNDOFF,
    backward,
    factor,
    factor_rounding,
    forward,
    gamma,
)
from ladderband.numerics.transition import Floats

Complexes = NDArray[np.complex128]

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
    n = len(block)
    upper = np.triu_indices(n)
    outer = np.ascontiguousarray(block.mixing[upper[0]] * block.mixing[upper[1]])
    alpha = contraction(block)
    kappa = 2.0 / (1.0 - alpha)
    slack = block.mixing @ block.mixing.T - np.eye(n)
    skew = float(np.linalg.norm(slack)) + 4.0 * n * UNIT_ROUNDOFF
    trace_one = block.g * ((block.mixing / np.sqrt(block.f)[:, None]) ** 2).sum(axis=0)
    trace_two = ((block.mixing * np.sqrt(block.f)[:, None]) ** 2).sum(axis=0) / block.g
    slopes = (block.mixing @ block.slopes) / np.sqrt(block.f)[:, None]
    chunk = max(1, min(64, CHUNK_BYTES // (8 * 4 * len(outer))))
    parts = []
    for first in range(start, stop, chunk):
        deadline.check()
        times = step * np.arange(first, min(first + chunk, stop))
        values = _tangents(block.g, block.f, block.exponents, times)
        stacked = np.concatenate(
            [
                values[0] * block.g,
                values[1] * block.g,
                values[0] / block.g,
                values[1] / block.g,
            ]
        )
        parts.append(
            _evaluate(
                stacked @ outer.T,
                values,
                times,
                block.g,
                block.f,
                block.exponents,
                block.displacement,
                np.ascontiguousarray(slopes.T),
                block.has_slopes,
                np.stack([trace_one, trace_two]),
                skew * float(block.g.max() / block.f.min()),
                skew * float(block.f.max() / block.g.min()),
                alpha,
                kappa,
                factor_rounding(n),
                gamma(n + 30.0),
            )
        )
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


@njit(cache=True, nogil=True, error_model="numpy")
def _tangents(g: Floats, f: Floats, exponents: Floats, times: Floats) -> Floats:
    """tau (re, im), cos and sin of f t / 2, and |1 + q|^2, q (re, im): (7, T, n)."""
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
            out[5, m, k] = one_less + 2.0 * r * c * c  # Re(1 + q)
            out[6, m, k] = 2.0 * r * s * c
    return out


@njit(cache=True, nogil=True, error_model="numpy")
def _norm(re: Floats, im: Floats) -> float:
    total = 0.0
    for k in range(len(re)):
        total += re[k] * re[k] + im[k] * im[k]
    return math.sqrt(total)


@njit(cache=True, nogil=True, error_model="numpy")
def _fill(row_re: Floats, row_im: Floats, ar: Floats, ai: Floats, re: Floats, im: Floats) -> None:
    """Upper triangle of a_i a_j R_ij from the packed rows of R, without the i s of the diagonal."""
    n = len(ar)
    p = 0
    for i in range(n):
        for j in range(i, n):
            fr = ar[i] * ar[j] - ai[i] * ai[j]
            fi = ar[i] * ai[j] + ai[i] * ar[j]
            re[i, j] = row_re[p + j - i] * fr - row_im[p + j - i] * fi
            im[i, j] = row_re[p + j - i] * fi + row_im[p + j - i] * fr
        p += n - i


@njit(cache=True, nogil=True, error_model="numpy")
def _packed_product(
    row_re: Floats, row_im: Floats, scale: Floats, v: Floats, outr: Floats, outi: Floats
) -> None:
    """out = diag(scale) R diag(scale) v, R packed by rows of the upper triangle, v real."""
    n = len(v)
    outr[:] = 0.0
    outi[:] = 0.0
    p = 0
    for i in range(n):
        vi = scale[i] * v[i]
        for j in range(i, n):
            vj = scale[j] * v[j]
            rr, ri = row_re[p + j - i], row_im[p + j - i]
            outr[i] += rr * vj
            outi[i] += ri * vj
            if j > i:
                outr[j] += rr * vi
                outi[j] += ri * vi
        p += n - i
    for i in range(n):
        outr[i] *= scale[i]
        outi[i] *= scale[i]


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
def _quadratic_bound(
    x: float, y: float, v: float, w: float, matrix: float, factoring: float, phases: float
) -> float:
    """Error of a bilinear form through X^{-1}, to be multiplied by nothing else.

    x, y: norms of X^{-1} a and X^{-1} b; v, w: norms of the vectors the perturbation of R meets.
    ``matrix`` bounds |dR| (forming R, orthogonality of J, initial phases), ``factoring`` is the
    backward error of one factorisation, met three times (factor and two solves), ``phases`` is the
    change by the rounded final phases, already with its vectors. First order times 1.2, which
    covers the higher orders because kappa |dX| <= 0.05 was checked.
    """
    return 1.2 * (matrix * (v * w + x * y) + 3.0 * factoring * x * y + phases)


@njit(cache=True, nogil=True, error_model="numpy")
def _evaluate(
    rows: Floats,
    values: Floats,
    times: Floats,
    g: Floats,
    f: Floats,
    exponents: Floats,
    shift: Floats,
    slopes: Floats,
    with_slopes: bool,
    traces: Floats,
    skew_one: float,
    skew_two: float,
    alpha: float,
    kappa: float,
    factor_unit: float,
    sum_unit: float,
) -> tuple[Complexes, Floats, Complexes, Floats, Complexes, Floats]:
    n, count = len(g), len(times)
    u = 2.0**-53
    log, log_bound = np.empty(count, np.complex128), np.empty(count)
    mean, mean_bound = np.zeros((3, count), np.complex128), np.zeros(count)
    cov, cov_bound = np.zeros(count, np.complex128), np.zeros(count)
    re, im = np.empty((n, n)), np.empty((n, n))
    ar, ai = np.empty(n), np.empty(n)
    br, bi, xr, xi = np.empty(n), np.empty(n), np.empty(n), np.empty(n)
    mr, mi = np.empty((3, n)), np.empty((3, n))
    root_f = np.sqrt(f)
    inv_root_f = 1.0 / root_f
    shift_norm = _norm(shift, np.zeros(n))
    for m in range(count):
        c, s = values[2, m], values[3, m]
        # phases: products g t and f t, and one unit in the last place of each cosine and sine
        worst, phase_sum, size_one, size_two, moved_one, moved_two = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
        prefactor_re, prefactor_im, prefactor_size = 0.0, 0.0, 0.0
        for k in range(n):
            initial = 2.0 * u * g[k] * times[m] + 4.0 * u
            final = 2.0 * u * f[k] * times[m] + 4.0 * u
            phase_sum += initial + final
            worst = max(worst, final)
            tau2 = values[0, m, k] ** 2 + values[1, m, k] ** 2
            tau = math.sqrt(tau2)
            size_one += traces[0, k] * tau
            size_two += traces[1, k] * tau
            moved_one += traces[0, k] * 0.5 * (1.0 + tau2) * initial
            moved_two += traces[1, k] * 0.5 * (1.0 + tau2) * initial
            log_re = math.log(-math.expm1(-exponents[k])) - 0.5 * math.log(values[4, m, k])
            log_im = -math.atan2(values[6, m, k], values[5, m, k])
            prefactor_re += log_re
            prefactor_im += log_im
            prefactor_size += abs(log_re) + abs(log_im)
        tau_top = 0.0
        for k in range(n):
            tau_top = max(tau_top, math.hypot(values[0, m, k], values[1, m, k]))
        total_re, total_im, total_size = prefactor_re, prefactor_im, prefactor_size
        bound = phase_sum * alpha / (1.0 - alpha)
        fine = True
        for form in range(2):
            scale = inv_root_f if form == 0 else root_f
            size = size_one if form == 0 else size_two
            skew = 2.1 * tau_top * (skew_one if form == 0 else skew_two)
            moved = moved_one if form == 0 else moved_two
            row_re, row_im = rows[2 * form * count + m], rows[(2 * form + 1) * count + m]
            for k in range(n):
                root = math.sqrt(abs(c[k])) * scale[k]
                ar[k] = root if c[k] >= 0.0 else 0.0
                ai[k] = 0.0 if c[k] >= 0.0 else root
            _fill(row_re, row_im, ar, ai, re, im)
            for k in range(n):
                im[k, k] += s[k]
            growth = factor(re, im)
            forming = sum_unit * size + 8.0 * u * (size + math.sqrt(n)) + skew
            factoring = factor_unit * growth
            change = kappa * (forming + factoring)
            log_re, log_im, log_size, margin = _pivot_logs(re, im, c, s)
            drift = math.sqrt(n) * change / (1.0 - min(change, 0.5))
            if not (change < 0.05 and margin > 4.0 * drift):
                fine = False
                break
            bound += 0.5 * drift + 4.0 * u * (n + 4.0) * (log_size + n)
            total_re -= 0.5 * log_re
            total_im -= 0.5 * log_im
            if form == 0:
                _packed_product(row_re, row_im, scale, shift, br, bi)
                head_re, head_im = np.dot(shift, br), np.dot(shift, bi)
                _scale_and_solve(re, im, ar, ai, root_f, br, bi, xr, xi)
                q_re, q_im, q_size = _bilinear(re, im, br, bi, br, bi)
                total_re += q_re - head_re
                total_im += q_im - head_im
                x = _norm(xr, xi)
                v = _residual_norm(shift, c, xr, xi)
                turned = worst * (kappa * shift_norm) ** 2
                bound += _quadratic_bound(x, x, v, v, forming + moved, factoring, turned)
                rounding = shift_norm * size * (shift_norm + 2.0 * x) + q_size
                bound += sum_unit * 2.0 * (rounding + 1.0)
            if with_slopes and form == 0:
                sums, limits = 0.0 + 0.0j, 0.0
                for axis in range(3):
                    for k in range(n):
                        root = math.sqrt(abs(c[k]))
                        mr[axis, k] = slopes[axis, k] * root if c[k] >= 0.0 else 0.0
                        mi[axis, k] = 0.0 if c[k] >= 0.0 else slopes[axis, k] * root
                    wr, wi = np.empty(n), np.empty(n)
                    forward(re, im, mr[axis], mi[axis])
                    backward(re, im, mr[axis], mi[axis], wr, wi)
                    y = _norm(wr, wi)
                    length = _norm(slopes[axis], np.zeros(n))
                    e_re, e_im, e_size = _bilinear(re, im, mr[axis], mi[axis], br, bi)
                    mean[axis, m] = complex(e_re - np.dot(slopes[axis], shift), e_im)
                    turned = worst * kappa * kappa * length * shift_norm
                    limit = _quadratic_bound(x, y, v, y, forming + moved, factoring, turned)
                    limit += sum_unit * 2.0 * (shift_norm * size * y + length * (shift_norm + x))
                    mean_bound[m] = max(mean_bound[m], limit + sum_unit * 2.0 * e_size)
                    e_re, e_im, e_size = _bilinear(re, im, mr[axis], mi[axis], mr[axis], mi[axis])
                    sums += 0.5 * complex(e_re, e_im)
                    turned = worst * (kappa * length) ** 2
                    limit = _quadratic_bound(y, y, y, y, forming + moved, factoring, turned)
                    limits += 0.5 * limit + sum_unit * (e_size + 2.0 * length * y)
                cov[m] += sums
                cov_bound[m] += limits
            if with_slopes and form == 1:
                sums, limits = 0.0 + 0.0j, 0.0
                for axis in range(3):
                    _packed_product(row_re, row_im, scale, slopes[axis], br, bi)
                    head_re, head_im = np.dot(slopes[axis], br), np.dot(slopes[axis], bi)
                    _scale_and_solve(re, im, ar, ai, inv_root_f, br, bi, xr, xi)
                    e_re, e_im, e_size = _bilinear(re, im, br, bi, br, bi)
                    sums -= 0.5 * complex(head_re - e_re, head_im - e_im)
                    y = _norm(xr, xi)
                    length = _norm(slopes[axis], np.zeros(n))
                    v = _residual_norm(slopes[axis], c, xr, xi)
                    turned = worst * (kappa * length) ** 2
                    limit = _quadratic_bound(y, y, v, v, forming + moved, factoring, turned)
                    rounding = length * size * (length + 2.0 * y) + e_size
                    limits += 0.5 * limit + sum_unit * rounding
                cov[m] += sums
                cov_bound[m] += limits
        log[m] = complex(total_re, total_im)
        log_bound[m] = bound + 4.0 * u * (n + 4.0) * (total_size + n) if fine else np.inf
    return log, log_bound, mean, mean_bound, cov, cov_bound


@njit(cache=True, nogil=True, error_model="numpy")
def _scale_and_solve(
    re: Floats,
    im: Floats,
    ar: Floats,
    ai: Floats,
    unscale: Floats,
    br: Floats,
    bi: Floats,
    xr: Floats,
    xi: Floats,
) -> None:
    """b <- L^{-1} c^1/2 b and x = X^{-1} c^1/2 b, with c^1/2 = a * unscale."""
    for k in range(len(br)):
        tr, ti = br[k] * unscale[k], bi[k] * unscale[k]
        br[k] = ar[k] * tr - ai[k] * ti
        bi[k] = ar[k] * ti + ai[k] * tr
    forward(re, im, br, bi)
    backward(re, im, br, bi, xr, xi)


@njit(cache=True, nogil=True, error_model="numpy")
def _residual_norm(vector: Floats, c: Floats, xr: Floats, xi: Floats) -> float:
    """|vector - c^1/2 x|, the part of ``vector`` that a change of R acts on."""
    total = 0.0
    for k in range(len(vector)):
        root = math.sqrt(abs(c[k]))
        tr = root * xr[k] if c[k] >= 0.0 else -root * xi[k]
        ti = root * xi[k] if c[k] >= 0.0 else root * xr[k]
        total += (vector[k] - tr) ** 2 + ti * ti
    return math.sqrt(total)
