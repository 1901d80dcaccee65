r"""How much intensity lies beyond an energy: proven tails of the line distribution.

For real theta, <exp(theta (E_n - E_v))> = chi(i theta) is a positive number, and by Chernoff's
inequality the intensity with E_n - E_v > X is at most exp(-theta X) chi(i theta), theta > 0;
likewise below X with theta < 0. At t = i theta the matrices of :mod:`mixed_modes` are real:

.. math::
   \chi(i\theta) = \prod_k \frac{1-e^{-\beta g_k}}{1+q_k}\,\frac{2}{1+p_k}\;
      (\det A_1 \det A_2)^{-1/2} \exp\{h^T\Delta^2 + (h\Delta)^T A_1^{-1} (h\Delta)\},

A_m = R_m - diag(h), h = tanh(f theta / 2), p = exp(f theta), q = exp(-(beta + theta) g), finite as
long as both are positive definite.

Rounding is made one-sided instead of small: det A and b^T A^{-1} b are monotone, so A - delta with
delta above every rounding of forming and factoring A (Higham 2002, Theorem 10.3: |dA|_2 <=
gamma_{n+1} tr A for Cholesky) gives an upper bound of chi(i theta). Only upper bounds leave here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import linalg

from ladderband.numerics.correlation import CoupledModes
from ladderband.numerics.errors import PrecisionNotReached
from ladderband.numerics.mixed_modes import ModeBlock
from ladderband.numerics.rounding import gamma
from ladderband.numerics.transition import Floats
from ladderband.numerics.uncoupled_modes import UncoupledModes


@dataclass(frozen=True, slots=True)
class EnergyRange:
    """All but ``outside`` of the intensity has low <= E_n - E_v <= high (cm^-1), proved."""

    low: float
    high: float
    outside: float


@dataclass(frozen=True)
class _Growth:
    """One block's share of chi(i theta): log, |mean| (3,) and pair term, all upper bounds."""

    log: float
    mean: Floats
    pair: float


def log_growth(modes: CoupledModes, theta: float) -> float:
    """An upper bound of ln <exp(theta (E_n - E_v))>; infinity where none is proved.

    theta <= -1 / (k T) is not tried: q would reach 1.
    """
    columns: list[ModeBlock | UncoupledModes] = [*modes.mixed]
    if modes.uncoupled is not None:
        columns.append(modes.uncoupled)
    if any((part.exponents + theta * part.g).min() <= 0.0 for part in columns):
        return math.inf
    parts = [_matrix_growth(block, theta) for block in modes.mixed]
    if modes.uncoupled is not None:
        parts.append(_column_growth(modes.uncoupled, theta))
    if any(part is None for part in parts):
        return math.inf
    known = [part for part in parts if part is not None]
    mean = np.abs(modes.constant) + np.sum([part.mean for part in known], axis=0)
    factor = float(mean @ mean) + sum(part.pair for part in known)
    if not factor > 0.0:
        return math.inf
    log = sum(part.log for part in known) + math.log(factor / modes.total)
    return log + 1e-11 * (1.0 + sum(abs(part.log) for part in known))


def _head(g: Floats, f: Floats, exponents: Floats, theta: float) -> tuple[Floats, Floats, float]:
    """tau, tanh(f theta / 2) and the logarithm of the prefactor."""
    q = np.exp(-(exponents + theta * g))
    tau = (1.0 - q) / (1.0 + q)
    log = np.log(-np.expm1(-exponents)) - np.log1p(q)
    log += math.log(2.0) - np.logaddexp(0.0, f * theta)
    return tau, np.tanh(0.5 * f * theta), float(log.sum())


def _column_growth(modes: UncoupledModes, theta: float) -> _Growth | None:
    tau, h, log = _head(modes.g, modes.f, modes.exponents, theta)
    omega = modes.g / modes.f
    delta = gamma(80.0) * (np.abs(tau) * (omega + 1.0 / omega) + 2.0)
    one, two = omega * tau - h - delta, tau / omega - h - delta
    if not (one.min() > 0.0 and two.min() > 0.0 and tau.min() > -1.0):
        return None
    shift = modes.displacement
    log -= 0.5 * float(np.log(one).sum() + np.log(two).sum())
    log += float((h * shift**2 + (h * shift) ** 2 / one).sum())
    m2 = (modes.slopes**2).T / modes.f
    mean = (np.sqrt(m2) * np.abs(shift * h) / one).sum(axis=1)
    pair = 0.5 * m2 @ (1.0 / one + h + h**2 / two)
    return _Growth(log, mean, float(pair.sum()))


def _matrix_growth(block: ModeBlock, theta: float) -> _Growth | None:
    n = len(block)
    tau, h, log = _head(block.g, block.f, block.exponents, theta)
    root = np.sqrt(block.f)
    factors = []
    for weight, scale in ((block.g * tau, 1.0 / root), (tau / block.g, root)):
        rotated = scale[:, None] * block.mixing
        size = float(np.abs(weight) @ (rotated**2).sum(axis=0)) + n
        matrix = (rotated * weight) @ rotated.T - np.diag(h)
        matrix[np.diag_indices(n)] -= gamma(8.0 * n + 80.0) * size
        try:
            factors.append(linalg.cholesky(matrix, lower=True))
        except linalg.LinAlgError:
            return None
    shift = block.displacement
    log -= sum(float(np.log(np.diag(factor)).sum()) for factor in factors)
    moved = linalg.solve_triangular(factors[0], h * shift, lower=True)
    log += float(h @ shift**2 + moved @ moved)
    slopes = (block.mixing @ block.slopes) / root[:, None]
    first = linalg.solve_triangular(factors[0], slopes, lower=True)
    second = linalg.solve_triangular(factors[1], h[:, None] * slopes, lower=True)
    pair = 0.5 * ((first**2).sum() + (h[:, None] * slopes**2).sum() + (second**2).sum())
    mean = np.sqrt((first**2).sum(axis=0) * float(moved @ moved))
    return _Growth(log, mean, float(pair))


def energy_range(modes: CoupledModes, outside: float, scale: float) -> EnergyRange:
    """The energies that hold all but ``outside`` of the intensity.

    ``scale`` is a guess of the band's standard deviation in cm^-1; any guess gives a true range, a
    good one gives a narrow range. The exponent theta is searched on a grid of factors sqrt2, then
    refined; every theta tried gives a valid bound.

    Raises
    ------
    PrecisionNotReached
        No theta proves anything.
    """
    cold = all(bool(np.isinf(block.exponents).all()) for block in modes.mixed)
    cold = cold and (modes.uncoupled is None or bool(np.isinf(modes.uncoupled.exponents).all()))
    share = math.log(1.0 / (0.5 * outside))
    guess = math.sqrt(2.0 * share) / scale
    high = _edge(modes, share, guess)
    low = 0.0 if cold else -_edge(modes, share, -guess)
    if not math.isfinite(high - low):
        raise PrecisionNotReached(
            "No range of energies could be proved to hold the band in double precision: the "
            "displacements, the changes of the wavenumbers or the temperature are too large.",
            "finite",
            "infinite",
        )
    return EnergyRange(float(low - 1e-12 * abs(low)), float(high + 1e-12 * abs(high)), outside)


def _edge(modes: CoupledModes, share: float, guess: float) -> float:
    """Least X found with exp(-|theta| X) chi(i theta) <= exp(-share); the sign of guess is kept."""
    found: dict[int, float] = {}

    def edge(step: int) -> float:
        if step not in found:
            theta = guess * 2.0 ** (step / 8.0)
            found[step] = (log_growth(modes, theta) + share) / abs(theta)
        return found[step]

    step, stride = 0, 8
    while math.isinf(edge(step)) and step > -200:
        step -= stride
    while stride:
        best = min((step - stride, step, step + stride), key=edge)
        if best == step or abs(best) > 400:
            stride //= 2
        step = best
    return edge(step)
