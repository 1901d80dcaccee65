r"""Mean, width and skewness of a band's lines, in closed form.

V = H_f - H_i is a quadratic polynomial of Q because both states share the kinetic energy:
V = Q^T B Q / 2 + d^T Q + const with B = J^T F^2 J - G^2, d = J^T F^2 K. Q is Gaussian with
covariance C = coth(beta g / 2) / (2 g), and with C B the cumulants of E_n - E_v for a constant
moment are (Lax, J. Chem. Phys. 20, 1752 (1952); traces worked out in DEVELOPERS.md)

.. math::
   \kappa_2 = \tfrac12 \mathrm{Tr}(CB)^2 + d^T C d,\qquad
   \kappa_3 = \mathrm{Tr}(CB)^3 + 3 d^T C B C d + \tfrac12(\mathrm{Tr}\,B^2 C + d^T d),

the last term of kappa_3 from [V, [H_i, V]] = |grad V|^2. A linear moment multiplies chi by
M(t) = sum_c (mu_c + m_c(t))^2 + pair(t); its derivatives at t = 0 come from the power series of
the matrices in :mod:`mixed_modes` to third order.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ladderband.numerics.transition import Floats, Transition
from ladderband.numerics.units import boltzmann_exponent

ORDER = 4
"""Terms of the power series: t^0 .. t^3."""
Series = list[np.ndarray]


@dataclass(frozen=True, slots=True)
class LineMoments:
    """Moments of E_n - E_v (cm^-1, without zero points) over all lines, weighted by intensity.

    ``third`` is the third central moment. Rounding only, some 1e-12 relative; no bound is proved.
    """

    mean: float
    variance: float
    third: float

    @property
    def standard_deviation(self) -> float:
        return math.sqrt(max(self.variance, 0.0))

    @property
    def skewness(self) -> float:
        """third / variance^(3/2); 0 for a single line."""
        return skewness(self.third, self.standard_deviation)


def skewness(third: float, deviation: float) -> float:
    """third / deviation^3; 0 below 1e-6 cm^-1, where both are rounding."""
    return third / deviation**3 if deviation > 1e-6 else 0.0


def line_moments(transition: Transition) -> LineMoments:
    """The moments of a transition at its temperature; cost: a few products of order N."""
    g, f = transition.wavenumbers_initial, transition.wavenumbers_final
    mixing = transition.mixing_matrix
    shift = transition.displacements / np.sqrt(f)
    exponents = np.array([boltzmann_exponent(x, transition.temperature_k) for x in g])
    coth = 1.0 / np.tanh(0.5 * exponents)
    spread = coth / (2.0 * g)
    curvature = (mixing.T * f**2) @ mixing - np.diag(g**2)
    force = mixing.T @ (f**2 * shift)
    product = spread[:, None] * curvature
    square = product @ product
    mean = 0.5 * float(np.trace(product)) + 0.5 * float(f @ (f * shift**2))
    mean += 0.5 * float((g - f).sum())
    pull = spread * force
    variance = 0.5 * float(np.trace(square)) + float(force @ pull)
    third = float(np.trace(square @ product)) + 3.0 * float(pull @ curvature @ pull)
    third += 0.5 * (float((curvature**2).sum(axis=0) @ spread) + float(force @ force))
    if transition.moment is None or not transition.moment.slopes_debye.any():
        return LineMoments(mean, variance, third)
    return _with_slopes(transition, mean, variance, third, exponents)


def _with_slopes(
    transition: Transition, mean: float, variance: float, third: float, exponents: Floats
) -> LineMoments:
    """Multiply chi's series by that of the moment's factor and read the moments off."""
    factor = _moment_series(transition, exponents)
    # chi = sum_k (-i t)^k m_k / k!, around the mean of the constant-moment band
    raw = [1.0, 0.0, variance, third]
    own = [float((factor[k] * 1j**k).real) * math.factorial(k) for k in range(ORDER)]
    total = own[0]
    m = [
        sum(math.comb(k, j) * raw[j] * own[k - j] for j in range(k + 1)) / total
        for k in range(ORDER)
    ]
    variance = m[2] - m[1] ** 2
    return LineMoments(mean + m[1], variance, m[3] - 3.0 * m[1] * m[2] + 2.0 * m[1] ** 3)


def _moment_series(transition: Transition, exponents: Floats) -> list[complex]:
    """Coefficients of t^k of sum_c (mu_c + m_c)^2 + pair."""
    moment = transition.moment
    assert moment is not None
    g, f, mixing = (
        transition.wavenumbers_initial,
        transition.wavenumbers_final,
        transition.mixing_matrix,
    )
    slopes = (moment.slopes_debye * np.sqrt(g)[:, None]).astype(complex)
    shift = transition.displacements / np.sqrt(f)
    tau = _tau_series(g, exponents)
    tangent: Series = [0j * f, 0.5j * f, 0j * f, 1j * (0.5 * f) ** 3 / 3.0]
    initial = [np.diag(g * term) for term in tau]
    final = [(mixing.T * (f * term)) @ mixing for term in tangent]
    pull = [mixing.T @ (f * term * shift) for term in tangent]
    inverse = _inverse([a + b for a, b in zip(initial, final, strict=True)])
    means = [-slopes.T @ term for term in _product(inverse, pull)]
    means[0] = means[0] + moment.constant_debye
    pair = [0.5 * np.einsum("kc,kl,lc->", slopes, term, slopes) for term in inverse]
    light = [(mixing.T * (term / f)) @ mixing for term in tangent]
    other = _inverse([np.diag(a / g) + b for a, b in zip(tau, light, strict=True)])
    parallel = _product(light, _product(other, light))
    for k in range(ORDER):
        pair[k] -= 0.5 * np.einsum("kc,kl,lc->", slopes, light[k] - parallel[k], slopes)
    squares = [sum((means[j] @ means[k - j] for j in range(k + 1)), start=0j) for k in range(ORDER)]
    return [complex(a + b) for a, b in zip(squares, pair, strict=True)]


def _tau_series(g: Floats, exponents: Floats) -> Series:
    """tanh((beta g - i g t) / 2) = tau: derivatives of tanh at beta g / 2."""
    t = np.tanh(0.5 * exponents)
    step = -0.5j * g
    first = 1.0 - t**2
    return [t + 0j, first * step, -t * first * step**2, -first * (1.0 - 3.0 * t**2) / 3.0 * step**3]


def _product(left: Series, right: Series) -> Series:
    return [np.sum([left[j] @ right[k - j] for j in range(k + 1)], axis=0) for k in range(ORDER)]


def _inverse(series: Series) -> Series:
    """Power series of the inverse matrix: B_k = -B_0 sum_{j>=1} A_j B_{k-j}."""
    first = np.linalg.inv(series[0])
    out = [first]
    for k in range(1, ORDER):
        out.append(-first @ sum(series[j] @ out[k - j] for j in range(1, k + 1)))
    return out


def vertical_energy(transition: Transition) -> float:
    """Final minus initial potential at the initial minimum, K^T F^2 K / 2, above the final one."""
    f = transition.wavenumbers_final
    return 0.5 * float(f @ transition.displacements**2)
