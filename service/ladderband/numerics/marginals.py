r"""Distribution of the quanta of one final mode, whatever the others do: exact marginals.

The thermal initial state is Gaussian, so the state of one final mode alone is Gaussian in its
dimensionless coordinate q' = Q' sqrt(f) and momentum p', without correlation between them:

.. math::
   \bar q'_i = \Delta_i,\quad
   V_q = f_i \sum_k J_{ik}^2 \frac{\coth(x_k/2)}{2 g_k},\quad
   V_p = \frac1{f_i} \sum_k J_{ik}^2 \frac{g_k \coth(x_k/2)}{2},\qquad x_k = \frac{hc g_k}{kT}.

The Weyl symbol of s^n is 2/(1+s) exp(-(1-s)/(1+s) (q^2+p^2)) (the Laguerre generating function, NIST
DLMF 18.12.13, applied to the Wigner functions of the levels); its Gaussian average is

.. math::
   G_i(s) = \sum_n P_i(n) s^n = \prod_{j=q,p} \Bigl[\frac{a_j}{2}\Bigr]^{-1/2}
       \exp\Bigl(-\frac{(1-s)\,\bar j^2}{a_j}\Bigr),\qquad a_j = (1+s) + 2(1-s)V_j .

On the unit circle Re a_j > 0, so the principal root is right. For s > 1 Chernoff's inequality
P_i(n >= M) <= s^-M G_i(s) caps the quanta with a proven loss.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats, Transition
from ladderband.numerics.units import boltzmann_exponent

LENGTH_MAX = 1 << 14
"""Longest distribution; 2000 quanta of the hottest mode end far below it."""

_TRIALS = np.geomspace(1e-4, 0.999, 200)
"""Where the Chernoff bound is tried, as shares of the largest s - 1 allowed."""


@dataclass(frozen=True, slots=True)
class GaussianMode:
    """Mean and variances of one final mode's q' and p' in the initial thermal state."""

    mean: float
    variance_q: float
    variance_p: float

    @property
    def mean_quanta(self) -> float:
        """<n> = (V_q + V_p + mean^2 - 1) / 2."""
        return 0.5 * (self.variance_q + self.variance_p + self.mean**2 - 1.0)

    def generating(self, s: NDArray[np.complex128]) -> NDArray[np.complex128]:
        """G(s) on or inside the unit circle."""
        a_q = (1.0 + s) + 2.0 * (1.0 - s) * self.variance_q
        a_p = (1.0 + s) + 2.0 * (1.0 - s) * self.variance_p
        exponent = -(1.0 - s) * self.mean**2 / a_q
        roots = np.sqrt(0.5 * a_q) * np.sqrt(0.5 * a_p)
        return np.asarray(np.exp(exponent) / roots, dtype=np.complex128)

    def tail(self, count: int) -> float:
        """Proven upper bound of P(n >= count), the best of 200 Chernoff bounds."""
        if count <= 0:
            return 1.0
        limit = 60.0
        for variance in (self.variance_q, self.variance_p):
            if variance > 0.5 + 1e-12:
                limit = min(limit, (2.0 * variance + 1.0) / (2.0 * variance - 1.0) - 1.0)
        t = limit * _TRIALS  # s = 1 + t
        slope_q, slope_p = 1.0 - 2.0 * self.variance_q, 1.0 - 2.0 * self.variance_p
        a_q = 2.0 + t * slope_q
        a_p = 2.0 + t * slope_p
        with np.errstate(invalid="ignore", divide="ignore"):
            logarithm = t * self.mean**2 / a_q - 0.5 * np.log(0.25 * a_q * a_p)
            logarithm -= count * np.log1p(t)
        usable = np.isfinite(logarithm) & (a_q > 0) & (a_p > 0)
        # 1e-9: rounding of the logarithm, at most a few thousand in size
        return min(1.0, float(np.exp(np.min(logarithm[usable], initial=0.0) + 1e-9)))


@dataclass(frozen=True)
class Marginal:
    """P(n), n = 0..len-1, each within ``bound`` (proven), and the tail beyond."""

    probabilities: Floats
    mean_quanta: float
    bound: float
    beyond: float


def gaussian_modes(transition: Transition) -> list[GaussianMode]:
    """One Gaussian per final mode. Cost: one product of N x N."""
    g, f = transition.wavenumbers_initial, transition.wavenumbers_final
    exponents = np.array([boltzmann_exponent(x, transition.temperature_k) for x in g])
    thermal = 0.5 / np.tanh(0.5 * exponents)
    squared = transition.mixing_matrix**2
    variance_q = f * (squared @ (thermal / g))
    variance_p = (squared @ (thermal * g)) / f
    return [
        GaussianMode(float(mean), float(q), float(p))
        for mean, q, p in zip(transition.displacements, variance_q, variance_p, strict=True)
    ]


@lru_cache(maxsize=512)
def marginal(mode: GaussianMode, tolerance: float = 1e-12) -> Marginal:
    """Distribution of the quanta of one mode; kept, because estimate, enumeration and report ask.

    Notes
    -----
    P(n) is read off M values of G on the unit circle by one FFT. Aliasing adds sum_m P(n + m M),
    m >= 1, at most the Chernoff tail beyond M. Rounding: |G| <= 1, each value is within
    8u (4 + |exponent|) of itself with |exponent| <= 2 mean^2 / min |a|, and the FFT adds at most
    8 u log2 M (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., Theorem 24.2).
    """
    length = 16
    while mode.tail(length) > 0.1 * tolerance and length < LENGTH_MAX:
        length *= 2
    s = np.exp(2j * np.pi * np.arange(length) / length)
    values = mode.generating(s)
    probabilities: Floats = np.fft.fft(values).real / length
    probabilities.flags.writeable = False
    smallest = min(2.0, 4.0 * mode.variance_q)  # |a_q| on the circle
    exponent = 2.0 * mode.mean**2 / smallest
    rounding = 8.0 * UNIT_ROUNDOFF * (4.0 + exponent + math.log2(length))
    beyond = mode.tail(length)
    return Marginal(probabilities, mode.mean_quanta, beyond + rounding, beyond)
