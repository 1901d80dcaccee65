"""Stick spectrum of one uncoupled mode, with what is missing proven."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.hermite import reach
from ladderband.numerics.oscillators import one_pair
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats, Mode
from ladderband.numerics.units import boltzmann_exponent

QUANTA_MAX = 2000
TABLE_TOLERANCE = 1e-12
"""Absolute bound of the overlaps of a progression, tighter where the grid gives it for nothing."""


@dataclass(frozen=True)
class ModeSticks:
    """Boltzmann weight times Franck-Condon factor of one mode, ``weights`` (V + 1, N + 1).

    ``bound``: each weight is within it. ``sum_bound``: the sum of |weight - true| over the table.
    ``missing_at_most``: what the table leaves out of the mode's total of 1, proven.
    """

    mode: Mode
    weights: Floats
    bound: float
    sum_bound: float
    missing_at_most: float
    route: str


def mode_sticks(
    mode: Mode, temperature_k: float, v_max: int, n_max: int, deadline: Deadline
) -> ModeSticks:
    """The sticks v <= v_max, n <= n_max of one mode.

    Notes
    -----
    The sum's error: sum_n |F^ - F| <= 2 B sqrt(N+1) + (N+1) B^2 in each row, B the overlap bound,
    because sum_n |S| <= sqrt(N+1) (Cauchy); populations are within 20 units of 2^-53 each.
    """
    pair = one_pair(mode.wavenumber_initial_cm1, mode.wavenumber_final_cm1, mode.displacement)
    found = certified_tables(pair, v_max, n_max, _tolerance(v_max, n_max), deadline)
    populations = thermal_populations(mode.wavenumber_initial_cm1, temperature_k, v_max)
    weights = populations[:, None] * found.tables[0] ** 2
    overlap = float(found.bounds[0])
    row = 2.0 * overlap * math.sqrt(n_max + 1.0) + (n_max + 1.0) * overlap**2
    sum_bound = 1.01 * row + (22.0 * (v_max + 1) + weights.size) * UNIT_ROUNDOFF
    return ModeSticks(
        mode=mode,
        weights=weights,
        bound=2.0 * overlap + overlap**2 + 24.0 * UNIT_ROUNDOFF,
        sum_bound=sum_bound,
        missing_at_most=max(0.0, 1.0 - float(weights.sum()) + sum_bound),
        route=found.route,
    )


def _tolerance(v_max: int, n_max: int) -> float:
    """1e-12 for everyday tables; the grid's bound grows with the quanta."""
    return max(TABLE_TOLERANCE, 1e-13 * max(v_max, n_max))


def thermal_populations(wavenumber_cm1: float, temperature_k: float, v_max: int) -> Floats:
    """(1 - e^-x) e^(-x v), x = h c nu / (k T), v = 0..v_max; within 20 units of 2^-53.

    x is within 6 units and y e^-y <= 1/e, so the exponential is within 6/e + 4 and the factor
    1 - e^-x, x/(e^x - 1) <= 1, within 10.
    """
    x = boltzmann_exponent(wavenumber_cm1, temperature_k)
    if math.isinf(x):
        cold: Floats = np.zeros(v_max + 1)
        cold[0] = 1.0
        return cold
    with np.errstate(under="ignore"):
        populations: Floats = -math.expm1(-x) * np.exp(-x * np.arange(v_max + 1.0))
    return populations


def thermal_quanta(wavenumber_cm1: float, temperature_k: float, tolerance: float) -> int:
    """Smallest v_max that leaves out at most ``tolerance`` of the population: e^(-x (v+1))."""
    x = boltzmann_exponent(wavenumber_cm1, temperature_k)
    if math.isinf(x):
        return 0
    return math.ceil(min(QUANTA_MAX + 1.0, max(1.0, -math.log(tolerance) / x))) - 1


def final_quanta(mode: Mode, v_max: int) -> int:
    """Final quanta that certainly suffice: the energy of the initial state's farthest corner.

    The initial function of v_max quanta lies within R of its minimum in its own coordinate and
    momentum up to a tail of 1e-8; seen from the final oscillator that is an ellipse, and n is at most
    the energy of its corner. Only a first guess: the sum decides.
    """
    scale = math.sqrt(mode.wavenumber_initial_cm1 / mode.wavenumber_final_cm1)
    radius = reach(v_max, -18.0)
    corner = (abs(mode.displacement) + radius / scale) ** 2 + (radius * scale) ** 2
    return min(QUANTA_MAX, int(0.5 * corner) + 4)


def complete_mode_sticks(
    mode: Mode,
    temperature_k: float,
    v_max: int | None,
    n_max: int | None,
    tolerance: float,
    deadline: Deadline,
) -> ModeSticks:
    """Sticks of one mode with the quanta given, or with as many as ``tolerance`` needs."""
    if v_max is None:
        v_max = thermal_quanta(mode.wavenumber_initial_cm1, temperature_k, 0.5 * tolerance)
    if n_max is not None:
        return mode_sticks(mode, temperature_k, v_max, n_max, deadline)
    sticks = mode_sticks(mode, temperature_k, v_max, final_quanta(mode, v_max), deadline)
    return _trimmed(sticks, tolerance)


def _trimmed(sticks: ModeSticks, tolerance: float) -> ModeSticks:
    """Drop the last columns while what is missing stays within the tolerance."""
    spare = tolerance - sticks.missing_at_most
    dropped = np.cumsum(sticks.weights.sum(axis=0)[::-1])
    count = int(np.searchsorted(dropped, spare, side="right"))
    if spare <= 0.0 or count == 0:
        return sticks
    count = min(count, sticks.weights.shape[1] - 1)
    lost = float(dropped[count - 1])
    return ModeSticks(
        sticks.mode,
        sticks.weights[:, :-count],
        sticks.bound,
        sticks.sum_bound,
        sticks.missing_at_most + lost * (1.0 + 1e-12),
        sticks.route,
    )
