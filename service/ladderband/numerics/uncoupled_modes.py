r"""Correlation function of modes that mix with no other: closed form, O(N) a time point.

One mode of :mod:`ladderband.numerics.mixed_modes` with omega = g / f, p = exp(-i f t),
q = exp(-beta g + i g t), r = exp(-beta g):

.. math::
   w_1 = \tfrac12[\omega(1-q)(1+p) + (1+q)(1-p)],\quad
   w_2 = \tfrac12[(1-q)(1+p)/\omega + (1+q)(1-p)],

.. math::
   \chi = \frac{1-r}{\sqrt{w_1}\sqrt{w_2}}
      \exp\Bigl\{-\Delta^2 \frac{\omega(1-p)(1-q)}{2 w_1}\Bigr\}.

Equal frequencies give exp{-S[(nbar+1)(1-p) + nbar(1-1/p)]} (Huang and Rhys, Proc. R. Soc. A 204,
406 (1950)). Each w has its argument in (-pi, pi) (proof in mixed_modes), so the product over all
modes is accumulated as one complex number and a count of turns; one logarithm a time point is left.

Phases are products of two tabulated ones (64 fine, one coarse), never a running product. The
rounding bounds are a priori: |1 - e^{..}| terms are absolute to a few u, and |w_1| >= |1 + q|/kappa
with kappa = 2/(1 - alpha) turns that into a relative error.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numba import njit

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.errors import PrecisionNotReached
from ladderband.numerics.mixed_modes import BlockValues
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

FINE = 64
"""Times in one table of fine phases; a multiple of every vector width, small enough for L1."""

CUT = 1e-6
"""Least relative distance of a w from the negative axis; far above any rounding of w."""


@dataclass(frozen=True)
class UncoupledModes:
    """Columns of n modes: wavenumbers, Delta, h c g / (k T) and slopes (n, 3) along Q'."""

    g: Floats
    f: Floats
    displacement: Floats
    exponents: Floats
    slopes: Floats

    @property
    def decay(self) -> Floats:
        """1 - alpha of each mode, without cancellation: alpha is the norm of the 2 x 2 D W D."""
        r, one_less = np.exp(-self.exponents), -np.expm1(-self.exponents)
        size = np.abs(self.g - self.f) / (self.g + self.f)
        rest = 2.0 * np.minimum(self.g, self.f) / (self.g + self.f)  # 1 - |W_yy|
        root = np.sqrt((size * one_less) ** 2 + 4.0 * r)
        decay: Floats = 2.0 * one_less * rest / (2.0 - size * one_less + root)
        return decay * (1.0 - 1e-14)


def uncoupled_values(
    modes: UncoupledModes, step: float, start: int, stop: int, deadline: Deadline
) -> BlockValues:
    """Evaluate all modes together at the times start * step, ..., (stop - 1) * step.

    Cost: about 10 ns a mode and time point; nothing but the phases when g = f.
    """
    count = stop - start
    log = np.empty(count, np.complex128)
    mean, cov = np.zeros((3, count), np.complex128), np.zeros(count, np.complex128)
    factor_scale = float((1.0 / -np.expm1(-modes.exponents)).max())
    if factor_scale * float(np.maximum(modes.g / modes.f, modes.f / modes.g).max()) > 1e10:
        raise PrecisionNotReached(
            "A mode lies too far below k T, or changes its wavenumber too much, for a proven band "
            "in double precision.",
            "1e10",
            f"{factor_scale:.3g}",
        )
    span = 256 * FINE  # a deadline check every few hundred thousand mode points
    for first in range(0, count, span):
        deadline.check()
        part = slice(first, min(first + span, count))
        if not _evaluate(
            modes.g, modes.f, modes.displacement, modes.exponents, step, start + first, log[part]
        ):
            raise PrecisionNotReached(
                "A square root came too close to its branch cut in double precision.", "1", "0"
            )
        if modes.slopes.any():
            _moment(
                modes.g,
                modes.f,
                modes.displacement,
                modes.exponents,
                np.ascontiguousarray(modes.slopes.T / np.sqrt(modes.f)),
                step,
                start + first,
                mean[:, part],
                cov[part],
            )
    times: Floats = step * np.arange(start, stop, dtype=np.float64)
    log_bound, mean_bound, cov_bound = _bounds(modes, times)
    return BlockValues(log, log_bound, mean, mean_bound, cov, cov_bound)


def _bounds(modes: UncoupledModes, times: Floats) -> tuple[Floats, Floats, Floats]:
    """Proved errors: constant parts plus parts that grow with t through the rounded phases.

    det: relative error of w is 12 u kappa (T omega + 1), T = coth(beta g / 2) >= |tau|, and phases
    move ln chi by at most alpha / (1 - alpha) each. Exponent: H = omega (1-p)(1-q)/(2 w_1) has
    |H| <= kappa; phases move w^T E (1 - W E)^{-1} w by at most |w|^2 / (1 - alpha)^2 each.
    """
    u = UNIT_ROUNDOFF
    r, one_less = np.exp(-modes.exponents), -np.expm1(-modes.exponents)
    kappa = 2.0 / modes.decay
    hot = (1.0 + r) / one_less
    omega = modes.g / modes.f
    unequal = modes.g != modes.f
    relative = 12.0 * u * kappa * (hot * omega + 1.0)
    other = 12.0 * u * kappa * (hot / omega + 1.0)
    shift2 = modes.displacement**2
    overlap = 2.0 * shift2 * (1.0 + r / omega) / (1.0 + 1.0 / omega) ** 2  # |D w|^2
    turn = unequal * (1.0 / modes.decay) + overlap / modes.decay**2
    form = kappa * (relative + 12.0 * u) + 2.0 * u * (1.0 + omega) * kappa / one_less
    constant = unequal * (0.5 * (relative + other) + 12.0 * u) + shift2 * form
    rate = 2.0 * u * float(((modes.g + modes.f) * turn).sum())
    phases = rate * times + 20.0 * u * float(turn.sum())
    n = len(omega)
    log_bound = 1.05 * (float(constant.sum()) + phases) + 16.0 * u * (n + 8.0)
    log_bound = log_bound + 4.0 * u * (n + 8.0) * (1.0 + float((kappa * shift2).sum()))
    m2 = (modes.slopes**2).sum(axis=-1) / modes.f
    pair = np.maximum(relative, other) + 20.0 * u + 2.0 * u * (2.0 + omega + 1.0 / omega) / one_less
    swing = kappa**2 * (1.0 + np.maximum(omega, 1.0 / omega) * 0.5 * (1.0 + hot**2))
    each = kappa * pair + 4.0 * u * (n + 4.0) * kappa
    moving = swing * 2.0 * u * np.maximum(modes.g, modes.f)
    first = np.sqrt(m2 * shift2)
    mean_bound = 1.05 * (
        float((first * (each + 20.0 * u * swing)).sum()) + float((first * moving).sum()) * times
    )
    cov_bound = 1.05 * (
        float((m2 * (each + 20.0 * u * swing)).sum()) + float((m2 * moving).sum()) * times
    )
    return log_bound, mean_bound, cov_bound


@njit(cache=True, nogil=True, error_model="numpy")
def _times(ar: float, ai: float, br: float, bi: float) -> tuple[float, float]:
    """(a_r + i a_i)(b_r + i b_i)."""
    return ar * br - ai * bi, ar * bi + ai * br


@njit(cache=True, nogil=True, inline="always")
def _turn(old: bool, by: bool, new: bool) -> float:
    """Turns gained when an argument of sign ``old`` is raised by one of sign ``by``."""
    return (1.0 if (old & by & (not new)) else 0.0) - (1.0 if (new & (not (old | by))) else 0.0)


@njit(cache=True, nogil=True, error_model="numpy")
def _evaluate(
    g: Floats,
    f: Floats,
    shift: Floats,
    exponents: Floats,
    step: float,
    first: int,
    log: Floats,
) -> bool:
    """Fill ln chi; False when a w came too close to the cut."""
    n, count = len(g), len(log)
    tables = np.empty((n, 4, FINE))
    for k in range(n):
        r = math.exp(-exponents[k])
        for m in range(FINE):
            tables[k, 0, m] = math.cos(f[k] * (m * step))
            tables[k, 1, m] = -math.sin(f[k] * (m * step))
            tables[k, 2, m] = r * math.cos(g[k] * (m * step))
            tables[k, 3, m] = r * math.sin(g[k] * (m * step))
    # one array of constant shape: the compiler then knows that its rows do not overlap
    work = np.empty((7, FINE))
    cut = CUT * CUT
    for start in range(0, count, FINE):
        t0 = (first + start) * step
        work[:] = 0.0
        work[0, :] = 1.0
        for k in range(n):
            bpr, bpi = math.cos(f[k] * t0), -math.sin(f[k] * t0)
            bqr, bqi = math.cos(g[k] * t0), math.sin(g[k] * t0)
            norm = 1.0 / -math.expm1(-exponents[k])
            square = 0.5 * shift[k] * shift[k]
            omega = g[k] / f[k]
            if omega == 1.0:
                square *= norm
                for m in range(FINE):
                    pr, pi = (
                        bpr * tables[k, 0, m] - bpi * tables[k, 1, m],
                        bpr * tables[k, 1, m] + bpi * tables[k, 0, m],
                    )
                    qr, qi = (
                        bqr * tables[k, 2, m] - bqi * tables[k, 3, m],
                        bqr * tables[k, 3, m] + bqi * tables[k, 2, m],
                    )
                    work[2, m] -= square * ((1.0 - pr) * (1.0 - qr) - pi * qi)
                    work[3, m] += square * ((1.0 - pr) * qi + pi * (1.0 - qr))
                continue
            square *= omega
            half, inverse = 0.5 * norm, 1.0 / omega
            for m in range(FINE):
                pr, pi = (
                    bpr * tables[k, 0, m] - bpi * tables[k, 1, m],
                    bpr * tables[k, 1, m] + bpi * tables[k, 0, m],
                )
                qr, qi = (
                    bqr * tables[k, 2, m] - bqi * tables[k, 3, m],
                    bqr * tables[k, 3, m] + bqi * tables[k, 2, m],
                )
                ar = (1.0 - qr) * (1.0 + pr) + qi * pi
                ai = (1.0 - qr) * pi - qi * (1.0 + pr)
                br = (1.0 + qr) * (1.0 - pr) + qi * pi
                bi = qi * (1.0 - pr) - (1.0 + qr) * pi
                hr, hi = (1.0 - pr) * (1.0 - qr) - pi * qi, -(1.0 - pr) * qi - pi * (1.0 - qr)
                wr, wi = omega * ar + br, omega * ai + bi
                vr, vi = inverse * ar + br, inverse * ai + bi
                size = wr * wr + wi * wi
                near = (wr < 0.0) & (wi * wi < cut * size)
                near |= (vr < 0.0) & (vi * vi < cut * (vr * vr + vi * vi))
                work[6, m] += 1.0 if near else 0.0
                scale = 2.0 * square / size
                work[2, m] -= scale * (hr * wr + hi * wi)
                work[3, m] -= scale * (hi * wr - hr * wi)
                xr, xi = (
                    half * (work[0, m] * wr - work[1, m] * wi),
                    half * (work[0, m] * wi + work[1, m] * wr),
                )
                up, up_w = work[1, m] >= 0.0, wi >= 0.0
                work[4, m] += _turn(up, up_w, xi >= 0.0)
                yr, yi = _times(half * xr, half * xi, vr, vi)
                work[4, m] += _turn(xi >= 0.0, vi >= 0.0, yi >= 0.0)
                work[0, m], work[1, m] = yr, yi
            if k % 4 == 3:
                for m in range(FINE):
                    large = abs(work[0, m]) + abs(work[1, m]) > 1e100
                    shrink = 1e-100 if large else 1.0
                    work[0, m] *= shrink
                    work[1, m] *= shrink
                    work[5, m] += 1.0 if large else 0.0
        if work[6].any():
            return False
        for m in range(min(FINE, count - start)):
            modulus = (
                math.log(math.hypot(work[0, m], work[1, m])) + 100.0 * math.log(10.0) * work[5, m]
            )
            angle = math.atan2(work[1, m], work[0, m]) + 2.0 * math.pi * work[4, m]
            log[start + m] = complex(work[2, m] - 0.5 * modulus, work[3, m] - 0.5 * angle)
    return True


@njit(cache=True, nogil=True, error_model="numpy")
def _moment(
    g: Floats,
    f: Floats,
    shift: Floats,
    exponents: Floats,
    slopes: Floats,
    step: float,
    first: int,
    mean: Floats,
    cov: Floats,
) -> None:
    """Add the moment's shift and pair term of every mode; slopes (3, n) are in units of Q' lengths.

    mean = -Delta (1-p)(1+q)/(2 w_1), pair = [(1+p)(1+q)/w_1 - (f/g)(1-p)(1-q)/w_2] / 4.
    """
    for k in range(len(g)):
        r = math.exp(-exponents[k])
        omega = g[k] / f[k]
        weight = slopes[0, k] ** 2 + slopes[1, k] ** 2 + slopes[2, k] ** 2
        if weight == 0.0:
            continue
        for m in range(len(cov)):
            t = (first + m) * step
            p = complex(math.cos(f[k] * t), -math.sin(f[k] * t))
            q = complex(r * math.cos(g[k] * t), r * math.sin(g[k] * t))
            one = 0.5 * (omega * (1.0 - q) * (1.0 + p) + (1.0 + q) * (1.0 - p))
            two = 0.5 * ((1.0 - q) * (1.0 + p) / omega + (1.0 + q) * (1.0 - p))
            moved = -0.5 * shift[k] * (1.0 - p) * (1.0 + q) / one
            for axis in range(3):
                mean[axis, m] += slopes[axis, k] * moved
            cov[m] += (
                0.25
                * weight
                * ((1.0 + p) * (1.0 + q) / one - (1.0 - p) * (1.0 - q) / (omega * two))
            )
