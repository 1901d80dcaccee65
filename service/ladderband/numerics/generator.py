r"""The overlap generator (W, w, c): the one object all harmonic answers follow from.

Two sets of N harmonic oscillators are linked by Q' = J Q + K. With g, f the initial and final
angular frequencies (hbar = 1) and P = (G + J^T F J)^{-1}, the overlap integrals S(v, n) = <v|n> are
the Taylor coefficients of a Gaussian,

.. math::
   \sum_{v,n} S(v,n) \frac{y^v z^n}{\sqrt{v!\,n!}}
     = c\, \exp\!\left(\tfrac12 \zeta^T W \zeta + w^T \zeta\right), \qquad \zeta = (y, z),

derived by inserting the generating function of the Hermite functions for both states and doing the
N-dimensional Gaussian integral (Sharp and Rosenstock, J. Chem. Phys. 41, 3453 (1964); Doktorov,
Malkin and Man'ko, J. Mol. Spectrosc. 64, 302 (1977)). W is symmetric with W W = 1 and W w = -w:
both state that the change of basis is unitary, and both are tested. Phase convention: every
oscillator function is positive at large positive coordinate.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy import linalg

from ladderband.numerics.transition import Floats, Transition
from ladderband.numerics.units import boltzmann_exponent


@dataclass(frozen=True)
class OverlapGenerator:
    """W (2N, 2N), w (2N,) and log c of one pair of oscillator sets; y (initial) comes first.

    ``log_c`` is kept as a logarithm because c underflows float64 from S of about 1400 on.
    """

    W: Floats
    w: Floats
    log_c: float

    @property
    def n_modes(self) -> int:
        return len(self.w) // 2

    @cached_property
    def identity_residual(self) -> float:
        """max(|W W - 1|, |W w + w|): rounding only, unless built from a non-orthogonal J.

        Not meaningful after :meth:`thermal`.
        """
        square = np.abs(self.W @ self.W - np.eye(len(self.w))).max()
        return float(max(square, np.abs(self.W @ self.w + self.w).max()))

    def thermal(self, exponents: Floats) -> OverlapGenerator:
        """Return the generator whose squared amplitudes carry the Boltzmann weights.

        ``exponents`` is h c g_k / (k T), shape (N,), infinity for T = 0. Multiplying the y rows and
        columns by d_k = exp(-exponent / 2) and c by prod (1 - d_k^2)^(1/2) makes |S(v, n)|^2 the
        Boltzmann weight times the Franck-Condon factor: a thermal problem is a zero-temperature
        one (thermofield doubling; Takahashi and Umezawa, Collect. Phenom. 2, 55 (1975)).
        """
        d = np.concatenate([np.exp(-0.5 * exponents), np.ones(self.n_modes)])
        weight = 0.5 * float(np.sum(np.log1p(-np.exp(-exponents))))
        return OverlapGenerator(self.W * np.outer(d, d), self.w * d, self.log_c + weight)


def overlap_generator(g: Floats, f: Floats, mixing: Floats, shift: Floats) -> OverlapGenerator:
    """Build the generator from frequencies, Duschinsky matrix and shift.

    Parameters
    ----------
    g, f : (N,) arrays
        Initial and final angular frequencies, > 0, in one unit (here cm^-1, hbar = 1).
    mixing : (N, N) array
        Orthogonal J, row i = final mode i.
    shift : (N,) array
        K in units of (1/frequency unit)^(1/2): K_k = Delta_k / sqrt(f_k).

    Notes
    -----
    Cost: one Cholesky factorisation of order N and two products. Error: backward stable,
    ``identity_residual`` measures it; no bound is proved here, the routes that prove one take the
    rounding of W, w into account themselves.
    """
    n = len(g)
    sqrt_g, sqrt_f = np.sqrt(g), np.sqrt(f)
    rotated_f = (mixing.T * f) @ mixing
    factor = linalg.cho_factor(np.diag(g) + rotated_f, lower=True)
    inverse = linalg.cho_solve(factor, np.eye(n))  # P
    inverse = 0.5 * (inverse + inverse.T)
    to_final = mixing @ inverse  # J P
    W = np.empty((2 * n, 2 * n))
    W[:n, :n] = 2.0 * np.outer(sqrt_g, sqrt_g) * inverse - np.eye(n)
    W[n:, n:] = 2.0 * np.outer(sqrt_f, sqrt_f) * (to_final @ mixing.T) - np.eye(n)
    W[n:, :n] = 2.0 * np.outer(sqrt_f, sqrt_g) * to_final
    W[:n, n:] = W[n:, :n].T
    # 1 - J P J^T F = J P G J^T, which keeps digits when F is large against G
    force = f * shift
    w = np.concatenate(
        [
            -np.sqrt(2.0) * sqrt_g * (to_final.T @ force),
            np.sqrt(2.0) * sqrt_f * (to_final @ (g * (mixing.T @ shift))),
        ]
    )
    exponent = -0.5 * float(force @ (to_final @ (g * (mixing.T @ shift))))
    log_det = -2.0 * float(np.sum(np.log(np.diag(factor[0]))))
    log_c = 0.25 * float(np.sum(np.log(g) + np.log(f))) + 0.5 * n * np.log(2.0) + 0.5 * log_det
    return OverlapGenerator(W, w, float(log_c) + exponent)


def transition_generator(transition: Transition) -> OverlapGenerator:
    """The cold generator of a transition (see :meth:`OverlapGenerator.thermal` for T > 0)."""
    f = transition.wavenumbers_final
    shift = transition.displacements / np.sqrt(f)
    return overlap_generator(transition.wavenumbers_initial, f, transition.mixing_matrix, shift)


def thermal_generator(transition: Transition) -> OverlapGenerator:
    """The generator of a transition at its own temperature."""
    exponents = np.array(
        [
            boltzmann_exponent(mode.wavenumber_initial_cm1, transition.temperature_k)
            for mode in transition.modes
        ]
    )
    return transition_generator(transition).thermal(exponents)
