r"""The band on any axis: the sum over all lines, done in time, with one proven bound.

.. math::
   D(x) = \sum_{vn} I_{vn} L(x - E_n + E_v)
     \approx \frac1\Omega \Bigl[c_0 + 2\,\mathrm{Re} \sum_{n=1}^{N} c_n e^{i x n h}\Bigr],\quad
   c_n = \chi(nh)\,\ell(nh),\quad \Omega = 2\pi/h .

Parts of the bound (Poisson's sum: the full series is D plus its images at distance Omega):

aliasing    lines inside the proven energy range: images are at least the gap Omega - |x - E| away;
            lines outside: at most ``outside`` of the intensity, each at most the kernel's maximum
time        2/Omega sum_{n>N} |ell| <= (1/pi) integral_T^inf |ell| dt, as |chi| <= 1
chi         2/Omega sum |ell_n| bound_n
transform   8 u log2(M) sqrt(M) |c|_2 (Higham 2002, Theorem 24.2, M the length of the FFT)
axis        16-point Lagrange interpolation on a grid at least four times finer than needed: the
            error of a wave of phase step a is at most a^16 (15!!/2^8)^2 / 16!, summed over |c_n|
rounding    of the energies: 8 u (|x| + origin) times the largest slope, 2/Omega sum |c_n| n h
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numba import njit

from ladderband.numerics.correlation import CorrelationFunction, exact_step
from ladderband.numerics.energy_tails import EnergyRange
from ladderband.numerics.errors import PrecisionNotReached
from ladderband.numerics.line_shape import FIT_ORDER, FIT_REACH, Broadening, kink_correction
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

LAGRANGE = 16
_INVERSE = np.array(
    [
        (-1.0) ** (LAGRANGE - 1 - j) / (math.factorial(j) * math.factorial(LAGRANGE - 1 - j))
        for j in range(LAGRANGE)
    ]
)
"""1 / prod_{i != j} (j - i)."""
_WAVE_ERROR = (2027025.0 / 256.0) ** 2 / math.factorial(LAGRANGE)

STEPS_AN_OCTAVE = 4
"""Time steps are powers of 2^(1/4), so that requests with other widths or axes share them."""


@dataclass(frozen=True, slots=True)
class Sampling:
    """Time step (cm), number of times, the energies treated (others are zero) and fixed errors."""

    step: float
    count: int
    low: float
    high: float
    error: float


@dataclass(frozen=True)
class Density:
    """Intensity per cm^-1 at each energy, area 1 over all energies; |error| <= bound everywhere."""

    value: Floats
    bound: float


def reference_density(energies: EnergyRange, shape: Broadening) -> float:
    """A density the band's maximum is certain to reach: what tolerances are relative to."""
    width = energies.high - energies.low + 2.0 * shape.light_reach(0.01) + 40.0 * shape.gamma
    if shape.rate:
        width += 2.0 * math.sqrt(100.0 * shape.cubic_tail)  # all but a hundredth on either side
    return 0.9 / width


def plan_sampling(
    energies: EnergyRange, shape: Broadening, axis_low: float, axis_high: float, allowed: float
) -> Sampling:
    """Choose the time step and the number of times for axis energies axis_low..axis_high.

    ``allowed`` is the density the sampling may be wrong by; the error really reached is returned.
    """
    left = min(0.01, max(0.03 * allowed / shape.kernel_top, 1e-300))
    light = shape.light_reach(left)
    low, high = axis_low, axis_high
    cubic = shape.cubic_tail
    if not shape.gamma and not cubic:
        low = max(low, energies.low - light)
        high = min(high, energies.high + light)
    if low > high:  # nothing of the axis is inside
        low = high = energies.low
    furthest = max(high - energies.low, energies.high - low, 0.0)
    period = furthest + light
    if shape.gamma:
        period = max(period / FIT_REACH, 12.0 * shape.gamma)
    heavy = math.sqrt(10.0 * cubic * shape.peak / allowed) if cubic and shape.gamma else 0.0
    if cubic and not shape.gamma:
        heavy = (10.0 * cubic / allowed) ** (1.0 / 3.0)
    period = max(period + heavy, 1e-3 * light, 1e-6)
    exponent = math.ceil(STEPS_AN_OCTAVE * math.log2(period * (1.0 + 1e-6)))
    step = exact_step(2.0 * math.pi * 2.0 ** (-exponent / STEPS_AN_OCTAVE))
    period = 2.0 * math.pi / step
    end = shape.end(0.1 * allowed)
    count = max(math.ceil(end / step) + 1, FIT_ORDER + 1 if shape.gamma else 2)
    error = shape.beyond((count - 1) * step) + _alias(energies, shape, furthest, light, left, step)
    return Sampling(step, count, low, high, error)


def _alias(
    energies: EnergyRange,
    shape: Broadening,
    furthest: float,
    light: float,
    left: float,
    step: float,
) -> float:
    """Bound of what the images of all lines add on the axis."""
    period = 2.0 * math.pi / step * (1.0 - 1e-15)
    cubic = shape.cubic_tail
    if shape.gamma:
        _, error, largest = kink_correction(shape.gamma / period)
        free = FIT_REACH * period - furthest - light
        beyond = cubic / free**2 if cubic else 0.0
        return shape.mass * (error + largest * (energies.outside + left + beyond)) / period
    gap = period - furthest - light
    largest = 2.0 * shape.peak + 1.0 / period
    images = 2.2 * shape.peak * left
    if cubic:
        images += 2.5 * cubic / gap**3
        largest += 2.0 * shape.peak * (cubic / shape.peak) ** (1.0 / 3.0) / period
        largest += 3.0 * cubic / period**3
    return images + largest * energies.outside


def density(
    chi: Callable[[float, int], CorrelationFunction],
    shape: Broadening,
    sampling: Sampling,
    energies: Floats,
    origin: float = 0.0,
) -> Density:
    """Evaluate the band at the given energies (any order).

    ``chi(step, count)`` supplies the correlation function, so that a caller can keep it. ``origin``
    is the largest number the energies are differences of: its rounding moves them.
    """
    step, count = sampling.step, sampling.count
    correlation = chi(step, count)
    period = 2.0 * math.pi / step
    times: Floats = step * np.arange(count, dtype=np.float64)
    decay = shape.smooth_decay(times)
    plain = np.exp(-shape.gamma * times)
    if shape.gamma:
        fit = np.array(kink_correction(shape.gamma / period)[0])
        fit[1:] *= 0.5
        plain[: FIT_ORDER + 1] -= fit
    decay = decay * plain
    c = correlation.value * decay
    size = np.abs(decay)
    weights = np.full(count, 2.0)
    weights[0] = 1.0
    length = 1 << math.ceil(math.log2(8 * count))
    grid = np.fft.irfft(c, length) * (length / period)
    inside = (energies >= sampling.low) & (energies <= sampling.high)
    value = np.zeros(len(energies))
    place = energies[inside] * (length / period)
    value[inside], lebesgue = interpolated(grid, place)
    amount = weights * np.abs(c) / period
    wave = float(amount @ (2.0 * math.pi * np.arange(count) / length) ** LAGRANGE) * _WAVE_ERROR
    rounding = float((weights * size) @ (correlation.bound + 64.0 * UNIT_ROUNDOFF)) / period
    norm = math.sqrt(2.0 * length) * float(np.linalg.norm(c)) / period
    transform = lebesgue * (8.0 * UNIT_ROUNDOFF * math.log2(length) + 40.0 * UNIT_ROUNDOFF) * norm
    top = max(abs(sampling.low), abs(sampling.high), period) + abs(origin)
    slope = float(amount @ times) * 8.0 * UNIT_ROUNDOFF * top
    bound = sampling.error + wave + rounding + transform + slope
    if not math.isfinite(bound):
        raise PrecisionNotReached("The band could not be bounded.", "finite", "infinite")
    return Density(value, bound * (1.0 + 1e-9))


def interpolated(grid: Floats, place: Floats) -> tuple[Floats, float]:
    """16-point Lagrange interpolation of a periodic grid; also the largest sum of |weights|."""
    value = np.empty(len(place))
    return value, float(_lagrange(grid, place, _INVERSE, value))


@njit(cache=True, nogil=True, error_model="numpy")
def _lagrange(grid: Floats, place: Floats, inverse: Floats, value: Floats) -> float:
    """Weights as products of the distances before and after each node over a constant."""
    before, after = np.empty(LAGRANGE), np.empty(LAGRANGE)
    largest = 1.0
    for p in range(len(place)):
        whole = math.floor(place[p])
        first = int(whole) - (LAGRANGE // 2 - 1)
        distance = place[p] - whole + (LAGRANGE // 2 - 1)
        before[0], after[LAGRANGE - 1] = 1.0, 1.0
        for j in range(1, LAGRANGE):
            before[j] = before[j - 1] * (distance - (j - 1))
            after[LAGRANGE - 1 - j] = after[LAGRANGE - j] * (distance - (LAGRANGE - j))
        total, size = 0.0, 0.0
        for j in range(LAGRANGE):
            weight = before[j] * after[j] * inverse[j]
            total += weight * grid[(first + j) % len(grid)]
            size += abs(weight)
        value[p] = total
        largest = max(largest, size)
    return largest
