r"""Line shapes: what each line of the band is replaced by.

A shape is kept as its decay in time, the Fourier transform of a unit-area profile,

.. math::  \ell(t) = e^{-\sigma^2 t^2/2 - \gamma |t|}\; \hat w(t)\; e^{-i\lambda t - g(t)},

sigma = fwhm / sqrt(8 ln 2) of the Gaussian, gamma = fwhm / 2 of the Lorentzian (both together: a
Voigt profile), w an instrument function, and the last factor a low-frequency bath of
reorganisation energy lambda. All widths are full widths at half maximum, in cm^-1.

The profile of the factors without the Lorentzian has light tails, which is what makes sampling in
time exact to a proven bound; the Lorentzian's heavy tails and its kink at t = 0 are dealt with in
:func:`kink_correction`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property, lru_cache

import numpy as np
from scipy import special

from ladderband.numerics.errors import DomainError
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.tangent_kernel import Complexes
from ladderband.numerics.transition import Floats
from ladderband.numerics.units import BOLTZMANN_CM1_K

FWHM_PER_SIGMA = math.sqrt(8.0 * math.log(2.0))

FIT_REACH = 0.42
"""Part of a period on which the corrected Lorentzian is exact, see :func:`kink_correction`."""
FIT_ORDER = 32
FIT_NODES = 256


@dataclass(frozen=True)
class InstrumentFunction:
    """A response given as a table: offsets in cm^-1 (ascending) and weights >= 0.

    Linear between the points, zero outside, scaled to unit area. An offset is where the instrument
    puts light of offset 0, on the wavenumber axis.
    """

    offset_cm1: Floats
    weight: Floats

    def transform(self, times: Floats) -> Complexes:
        """Integral of w(o) exp(-i o t), closed form of each linear piece by spherical Bessels."""
        half = 0.5 * np.diff(self.offset_cm1)
        middle = 0.5 * (self.offset_cm1[1:] + self.offset_cm1[:-1])
        mean = 0.5 * (self.weight[1:] + self.weight[:-1])
        rise = 0.5 * np.diff(self.weight)
        total = np.zeros(len(times), np.complex128)
        for h, m, a, b in zip(half, middle, mean, rise, strict=True):
            x = h * times
            piece = a * special.spherical_jn(0, x) - 1j * b * special.spherical_jn(1, x)
            total += 2.0 * h * piece * np.exp(-1j * m * times)
        return total / self.area

    @property
    def area(self) -> float:
        return float(np.trapezoid(self.weight, self.offset_cm1))

    @property
    def reach(self) -> float:
        """Largest distance from offset 0."""
        return float(np.abs(self.offset_cm1).max())


@dataclass(frozen=True, slots=True)
class Bath:
    """A low-frequency bath that shifts with the transition, of reorganisation energy lambda.

    ``static``: inhomogeneous Gaussian of variance 2 lambda k T, mean + lambda along the direction of
    the transition, so that absorption and emission lie 2 lambda apart (classical limit; Marcus,
    J. Chem. Phys. 24, 966 (1956)).
    ``brownian``: overdamped Brownian oscillator of relaxation rate Lambda in its high-temperature
    form, g(t) = (2 lambda k T / Lambda^2 - i lambda / Lambda)(e^{-Lambda t} + Lambda t - 1)
    (Mukamel, Principles of Nonlinear Optical Spectroscopy, Oxford 1995, ch. 8); holds for
    k T above Lambda, and its far wings fall off as the third power and may dip below zero.
    """

    kind: str
    reorganisation_cm1: float
    relaxation_cm1: float = 0.0


@dataclass(frozen=True)
class Broadening:
    """Everything that turns lines into a band, at one temperature.

    sigma, gamma : Gaussian and Lorentzian parts, cm^-1. shift : bath's mean, along E_n - E_v.
    instrument : None or the table; ``direction`` turns its offsets into the sense of E_n - E_v.
    rate, slow : Lambda and the complex factor a = 2 lambda k T / Lambda^2 - i lambda / Lambda of a
    Brownian bath, 0 when there is none.
    """

    sigma: float
    gamma: float
    shift: float = 0.0
    instrument: InstrumentFunction | None = None
    direction: float = 1.0
    rate: float = 0.0
    slow: complex = 0j

    def smooth_decay(self, times: Floats) -> Complexes:
        """The decay without its Lorentzian factor."""
        decay = np.exp(-0.5 * (self.sigma * times) ** 2 - 1j * self.shift * times)
        if self.rate:
            x = self.rate * times
            decay *= np.exp(-self.slow * (np.expm1(-x) + x))
        if self.instrument is not None:
            transform = self.instrument.transform(times)
            decay *= transform if self.direction > 0.0 else transform.conj()
        return decay

    def size(self, times: Floats) -> Floats:
        """An upper bound of |decay|, falling in t, with an integrable logarithm slope."""
        log = -0.5 * (self.sigma * times) ** 2 - self.gamma * times
        if self.rate:
            x = self.rate * times
            log -= self.slow.real * (np.expm1(-x) + x)
        return np.exp(log)

    def slope(self, time: float) -> float:
        """-d ln size / dt at ``time``; it never falls later on."""
        slope: float = self.sigma**2 * time + self.gamma
        if self.rate:
            slope -= self.slow.real * self.rate * math.expm1(-self.rate * time)
        return slope

    def end(self, allowed: float) -> float:
        """A time T with (1/pi) integral_T^inf |decay| dt <= allowed: size(T)/(pi slope(T))."""
        low, high = 0.0, 1.0 / max(self.sigma, self.gamma, self.rate * math.sqrt(abs(self.slow)))
        while self.beyond(high) > allowed:
            low, high = high, 2.0 * high
        for _ in range(12):  # 1/4000 of the last octave is near enough
            middle = 0.5 * (low + high)
            low, high = (middle, high) if self.beyond(middle) > allowed else (low, middle)
        return high

    def beyond(self, time: float) -> float:
        """Bound of (1/pi) integral_time^inf |decay| dt."""
        log = -0.5 * (self.sigma * time) ** 2 - self.gamma * time
        if self.rate:
            x = self.rate * time
            log -= self.slow.real * (math.expm1(-x) + x)
        return math.exp(log) / (math.pi * max(self.slope(time), 1e-300))

    @cached_property
    def peak(self) -> float:
        """An upper bound of |profile|."""
        bounds = []
        if self.sigma:
            bounds.append(self.mass / (self.sigma * math.sqrt(2.0 * math.pi)))
        if self.gamma:
            bounds.append(self.mass / (math.pi * self.gamma))
        if self.rate:
            bounds.append(self._integrated())
        return min(bounds) * (1.0 + 1e-12)

    def _integrated(self) -> float:
        """(1/pi) integral of |decay|; a falling function, so the left sum is above its integral."""
        grid = np.linspace(0.0, self.end(1e-6), 2001)
        return float(self.size(grid[:-1]).sum() * grid[1]) / math.pi + 1e-6

    @cached_property
    def mass(self) -> float:
        """Integral of |profile|: 1, a little more when a Brownian bath makes negative wings.

        The bath's profile is below its peak p and below C/|u|^3: at most 3 C^(1/3) p^(2/3).
        """
        if not self.rate:
            return 1.0
        alone = replace(self, sigma=0.0, gamma=0.0)._integrated()
        return 3.0 * float(np.cbrt(self.cubic_tail * alone**2))

    @property
    def kernel_top(self) -> float:
        """The largest value of the sampled kernel: the Lorentzian's own peak, or ``peak``."""
        return self.mass / (math.pi * self.gamma) if self.gamma else self.peak

    def light_reach(self, left: float) -> float:
        """A distance w: of the profile without Lorentzian at most ``left`` lies beyond +-w."""
        reach = abs(self.shift) + (self.instrument.reach if self.instrument else 0.0)
        if self.sigma:
            reach += self.sigma * math.sqrt(2.0 * math.log(2.0 / left))
        return reach

    @cached_property
    def cubic_tail(self) -> float:
        r"""C with |profile of the Brownian bath at u| <= C / |u|^3 from its mean, 0 without one.

        Three integrations by parts of (1/pi) Re int_0^inf e^{-g} e^{iut} dt: F' (0) = 0, and
        |u|^3 pi |profile| <= |F''(0)| + int |F'''|. With x = Lambda t and e^{-x} + x - 1 >=
        x^2/(2 + x) (Pade) the last integral is at most Lambda^2 (|a| + 3/2 |a|^2 + |a|^3 K),
        K = min(1/4, 9/(2 A^2)) + (3/A) e^{-A/3}, A = Re a.
        """
        if not self.rate:
            return 0.0
        a, real = abs(self.slow), self.slow.real
        kernel = min(0.25, 4.5 / real**2) + 3.0 / real * math.exp(-real / 3.0)
        return self.rate**2 * (2.0 * a + 1.5 * a * a + a**3 * kernel) / math.pi


def broadening(
    gaussian_fwhm: float,
    lorentzian_fwhm: float,
    bath: Bath | None,
    instrument: InstrumentFunction | None,
    temperature_k: float,
    direction: float,
) -> Broadening:
    """The broadening at one temperature.

    Raises
    ------
    DomainError
        Nothing broadens the lines (a continuous axis then has no finite intensity), or a bath has
        no width at T = 0.
    """
    sigma, gamma = gaussian_fwhm / FWHM_PER_SIGMA, 0.5 * lorentzian_fwhm
    shift, rate, slow = 0.0, 0.0, 0j
    if bath is not None:
        thermal = BOLTZMANN_CM1_K * temperature_k
        shift = bath.reorganisation_cm1
        if bath.kind == "static":
            sigma = math.hypot(sigma, math.sqrt(2.0 * shift * thermal))
        elif thermal > 0.0 and shift > 0.0:
            rate = bath.relaxation_cm1
            slow = complex(2.0 * shift * thermal / rate**2, -shift / rate)
        else:
            raise DomainError(
                "A Brownian bath needs a temperature and a reorganisation energy above zero (its "
                "high-temperature form is used).",
                "/line_shape/bath",
            )
    if not (sigma > 0.0 or gamma > 0.0 or rate > 0.0):
        raise DomainError(
            "A band on an axis needs a line width above zero: give fwhm_cm1 (sticks without width "
            "are what /v1/lines returns).",
            "/line_shape/fwhm_cm1",
        )
    return Broadening(sigma, gamma, shift, instrument, direction, rate, slow)


@lru_cache(maxsize=64)
def kink_correction(g: float) -> tuple[tuple[float, ...], float, float]:
    r"""Cosines that turn a periodic Lorentzian into the plain one, with a proven error.

    Sampling exp(-gamma t) in time gives the Lorentzian plus all its images, in units of the period

    .. math::
       \Lambda(v) = \frac{\sinh 2\pi g}{2(\sinh^2 \pi g + \sin^2 \pi v)}
          = \frac{g/\pi}{v^2+g^2} + R(v).

    R is smooth: on |v| <= FIT_REACH it is fitted by sum_k q_k cos(2 pi k v), k = 0..FIT_ORDER, and
    subtracting q_k/2 from the k-th sample removes it. Returns q, the bound of |R - fit| on
    |v| <= FIT_REACH and the bound of |Lambda| + |fit| anywhere.

    Proof. With E = R - fit and its interpolant p at n = 256 Chebyshev points,
    |p| <= (1 + (2/pi) ln n) max |E(points)|, and |E - p| <= 4 M rho^-n/(rho - 1) with M >= |E| on
    the Bernstein ellipse (Trefethen, Approximation Theory and Approximation Practice, Theorems 8.2
    and 15.2). For rho = 1.5 the ellipse stays 0.5 away from the poles +-1 +- ig, M <= 6 g +
    sum |q_k| cosh(2 pi k 0.176), and rho^-256 = 8e-46 makes that term < 1e-25.
    """
    angles = math.pi * (np.arange(FIT_NODES // 2) + 0.5) / FIT_NODES
    v = FIT_REACH * np.cos(angles)  # R is even: half of the points
    whole = math.sinh(2.0 * math.pi * g) / (
        2.0 * (math.sinh(math.pi * g) ** 2 + np.sin(math.pi * v) ** 2)
    )
    images = whole - (g / math.pi) / (v * v + g * g)
    cosines = np.cos(2.0 * math.pi * np.outer(v, np.arange(FIT_ORDER + 1)))
    q = np.linalg.lstsq(cosines, images, rcond=1e-14)[0]
    total = float(np.abs(q).sum())
    rounding = 16.0 * UNIT_ROUNDOFF * (2.0 * float(whole.max()) + (FIT_ORDER + 8.0) * 2.0 * total)
    lebesgue = 1.0 + 2.0 / math.pi * math.log(FIT_NODES)
    error = lebesgue * (float(np.abs(cosines @ q - images).max()) + rounding) + 1e-25
    return tuple(q.tolist()), error, 1.0 / math.tanh(math.pi * g) + total
