r"""The correlation function chi(t) of a transition: all its lines at once, with a proven bound.

.. math::  \chi(t) = \sum_{v,n} I_{vn}\, e^{-i (E_n - E_v) t}, \qquad \chi(0) = 1,

E_n and E_v without zero-point energies, I the intensities of :class:`LineList` (Boltzmann weight
times Franck-Condon factor, or times |mu|^2 / <mu^2> when the moment varies). chi(-t) is the
conjugate, so only t >= 0 is evaluated.

The Duschinsky matrix falls into connected blocks; their correlation functions multiply, and the
linear transition moment only adds over them. Blocks of one mode are answered in closed form.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.errors import DomainError
from ladderband.numerics.mixed_modes import BlockValues, ModeBlock, block_values
from ladderband.numerics.mode_blocks import BlockIndices, mode_blocks
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.tangent_kernel import Complexes
from ladderband.numerics.transition import Floats, Transition
from ladderband.numerics.uncoupled_modes import UncoupledModes, uncoupled_values
from ladderband.numerics.units import boltzmann_exponent


@dataclass(frozen=True)
class CoupledModes:
    """A transition sorted into what mixes and what does not.

    uncoupled : the modes of blocks of one; mixed : the larger blocks.
    constant : (3,) moment at the initial minimum; total : <mu^2>, 1 for a constant unit moment.
    """

    uncoupled: UncoupledModes | None
    mixed: tuple[ModeBlock, ...]
    constant: Floats
    total: float

    @property
    def thermal_rounding(self) -> float:
        """Change of chi by the rounded Boltzmann exponents x = h c g / (k T), 4 u each.

        |d chi| <= sum_v |d p_v| <= sum_k dx_k E|v_k - nbar_k| <= 4 u sum_k x_k sqrt(nbar(nbar+1)),
        and x sqrt(nbar(nbar+1)) = x / (2 sinh(x/2)) <= 1. A linear moment weighs level v by v + 1/2
        over nbar + 1/2, which by Cauchy and Schwarz adds a factor sqrt2, and <mu^2> itself moves by
        as much as 1: 4 (sqrt2 + 1) < 24.
        """
        count = sum(len(block) for block in self.mixed)
        count += 0 if self.uncoupled is None else len(self.uncoupled.g)
        return 24.0 * UNIT_ROUNDOFF * count


@dataclass(frozen=True)
class CorrelationFunction:
    """chi at t = 0, step, 2 step, ...: value (T,) complex, error <= bound (T,), proved.

    ``step`` is in cm (hbar = 1), with at most 24 significant bits so that all times are exact.
    """

    step: float
    value: Complexes
    bound: Floats

    def extended(self, more: CorrelationFunction) -> CorrelationFunction:
        """This one followed by later times."""
        return CorrelationFunction(
            self.step,
            np.concatenate([self.value, more.value]),
            np.concatenate([self.bound, more.bound]),
        )


def exact_step(step: float) -> float:
    """The largest number <= step with 24 significant bits: n * step is then exact to n = 2^29."""
    rounded = float(np.float32(step))
    return rounded if rounded <= step else float(np.nextafter(np.float32(step), np.float32(0)))


def coupled_modes(transition: Transition) -> CoupledModes:
    """Sort the modes into blocks.

    Raises
    ------
    DomainError
        The transition moment vanishes identically.
    """
    g, f = transition.wavenumbers_initial, transition.wavenumbers_final
    exponents = np.array([boltzmann_exponent(x, transition.temperature_k) for x in g])
    constant, slopes = np.array([0.0, 0.0, 1.0]), np.zeros((len(g), 3))
    if transition.moment is not None:
        constant = transition.moment.constant_debye
        slopes = transition.moment.slopes_debye * np.sqrt(g)[:, None]
    hot = 1.0 / np.tanh(0.5 * exponents)
    total = float(constant @ constant + 0.5 * ((slopes**2).sum(axis=1) / g) @ hot)
    if total == 0.0:
        raise DomainError("The transition moment is zero: give a constant or a slope.", "/moment")
    blocks = mode_blocks(transition.mixing, len(g))
    alone = _single_modes(transition, blocks)
    displacements = transition.displacements
    uncoupled = None
    if len(alone[0]):
        final, initial, sign = alone
        uncoupled = UncoupledModes(
            g[initial],
            f[final],
            displacements[final],
            exponents[initial],
            sign[:, None] * slopes[initial],
        )
    mixed = tuple(
        ModeBlock(
            g[columns],
            f[rows],
            np.ascontiguousarray(transition.mixing_matrix[np.ix_(rows, columns)]),
            displacements[rows],
            exponents[columns],
            slopes[columns],
        )
        for rows, columns in ((list(b.final), list(b.initial)) for b in blocks if len(b.final) > 1)
    )
    return CoupledModes(uncoupled, mixed, constant, total)


def _single_modes(
    transition: Transition, blocks: list[BlockIndices]
) -> tuple[NDArray[np.int64], NDArray[np.int64], Floats]:
    """(final mode, initial mode, sign of J) of the modes that mix with none."""
    pairs = [(block.final[0], block.initial[0]) for block in blocks if len(block.final) == 1]
    final = np.array([pair[0] for pair in pairs], dtype=np.int64)
    initial = np.array([pair[1] for pair in pairs], dtype=np.int64)
    if transition.mixing is None:
        return final, initial, np.ones(len(pairs))
    return final, initial, np.sign(transition.mixing[final, initial])


def correlation_function(
    modes: CoupledModes, step: float, start: int, stop: int, deadline: Deadline
) -> CorrelationFunction:
    """Evaluate chi at the times start * step, ..., (stop - 1) * step.

    The bound covers every rounding from the given wavenumbers, displacements and orthogonal matrix
    on: ln chi adds its blocks' bounds, exp turns the sum into a relative one, the moment's factor
    adds its own.
    """
    parts = [block_values(block, step, start, stop, deadline) for block in modes.mixed]
    if modes.uncoupled is not None:
        parts.append(uncoupled_values(modes.uncoupled, step, start, stop, deadline))
    log = np.sum([part.log for part in parts], axis=0)
    log_bound = np.sum([part.log_bound for part in parts], axis=0)
    log_bound = log_bound + len(parts) * UNIT_ROUNDOFF * np.abs(log)
    overlap = np.exp(log)
    factor, factor_bound = _moment_factor(modes, parts)
    size = np.abs(overlap)
    value = overlap * factor / modes.total
    log_bound = np.minimum(log_bound, 30.0)  # chi <= 1 is the better bound long before
    error = np.abs(value) * (np.expm1(log_bound) + 16.0 * UNIT_ROUNDOFF)
    error += size * np.exp(log_bound) * factor_bound / modes.total
    error += modes.thermal_rounding
    # |chi| <= 1: nothing is further away than this, whatever the rounding
    bound = np.minimum(error * (1.0 + 1e-9), 1.0 + np.abs(value))
    return CorrelationFunction(step, value, bound)


def _moment_factor(
    modes: CoupledModes, parts: list[BlockValues]
) -> tuple[Complexes | float, Floats | float]:
    """sum_c (mu_c + mean_c)^2 + pair terms, and its bound; exact for a constant moment."""
    if not any(part.mean.any() or part.covariance.any() for part in parts):
        return modes.total, 0.0
    mean = modes.constant[:, None] + np.sum([part.mean for part in parts], axis=0)
    pair = np.sum([part.covariance for part in parts], axis=0)
    factor = (mean**2).sum(axis=0) + pair
    off = np.sum([part.mean_bound for part in parts], axis=0)
    size = np.abs(mean).sum(axis=0)
    bound = 2.0 * size * off + 3.0 * off**2
    bound += np.sum([part.covariance_bound for part in parts], axis=0)
    sizes = size**2 + np.sum([np.abs(part.covariance) for part in parts], axis=0)
    return factor, bound + (8.0 + len(parts)) * UNIT_ROUNDOFF * sizes
