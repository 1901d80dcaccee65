"""One transition between two electronic states of a molecule: what every polyatomic question takes.

Conventions (all modules): *initial* and *final* name the states of the transition whatever its
direction; emission starts in the upper electronic state. The Duschinsky relation is
Q' = J Q + K with Q' the final and Q the initial mass-weighted normal coordinates (Duschinsky, Acta
Physicochim. URSS 7, 551 (1937)); ``mixing[i, j]`` = dQ'_i/dQ_j. The displacement of mode k is
Delta_k = K_k sqrt(f_k / hbar), in units of the length of the FINAL oscillator.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from ladderband.numerics.errors import DomainError

Floats = NDArray[np.float64]
Process = Literal["absorption", "emission", "photoelectron"]

ORTHOGONALITY_TOLERANCE = 1e-6
"""Largest |J J^T - 1| taken as rounding of a printed matrix and repaired without a word."""


@dataclass(frozen=True, slots=True)
class Mode:
    """One pair of oscillators: wavenumbers in cm^-1 (> 0) and the dimensionless displacement."""

    wavenumber_initial_cm1: float
    wavenumber_final_cm1: float
    displacement: float = 0.0
    label: str = ""

    @property
    def huang_rhys(self) -> float:
        """S = Delta^2 / 2, on the final surface."""
        return 0.5 * self.displacement**2


@dataclass(frozen=True, slots=True)
class Moment:
    """Electronic transition moment mu(Q) = constant + sum_k slopes[k] q_k, in debye.

    ``slopes[k]`` is the derivative along the dimensionless coordinate of INITIAL mode k,
    q_k = Q_k sqrt(g_k / hbar). Shapes: constant (3,), slopes (N, 3).
    """

    constant_debye: Floats
    slopes_debye: Floats


@dataclass(frozen=True, slots=True)
class Transition:
    """Modes, mixing, moment, direction and temperature of one transition.

    ``origin_cm1`` is the wavenumber of the 0-0 line. ``mixing`` is None for the identity, else an
    orthogonal (N, N) matrix. ``moment`` is None for a constant (Condon) moment of unit size.
    """

    modes: tuple[Mode, ...]
    process: Process = "absorption"
    origin_cm1: float = 0.0
    temperature_k: float = 0.0
    mixing: Floats | None = field(default=None)
    moment: Moment | None = field(default=None)

    @property
    def wavenumbers_initial(self) -> Floats:
        """g_k in cm^-1, shape (N,)."""
        return np.array([mode.wavenumber_initial_cm1 for mode in self.modes])

    @property
    def wavenumbers_final(self) -> Floats:
        """f_k in cm^-1, shape (N,)."""
        return np.array([mode.wavenumber_final_cm1 for mode in self.modes])

    @property
    def displacements(self) -> Floats:
        """Delta_k, dimensionless, shape (N,)."""
        return np.array([mode.displacement for mode in self.modes])

    @property
    def mixing_matrix(self) -> Floats:
        """J as an (N, N) array, the identity when no mixing was given."""
        return np.eye(len(self.modes)) if self.mixing is None else self.mixing

    @property
    def direction(self) -> float:
        """+1 when a final quantum raises the position (absorption, photoelectron), else -1."""
        return -1.0 if self.process == "emission" else 1.0


def orthogonal_mixing(matrix: Floats, *, repair: bool = False) -> tuple[Floats, float, int]:
    """Return the orthogonal matrix nearest to ``matrix``, its distance, and the worst row.

    Distance is max |J J^T - 1|. A distance up to ``ORTHOGONALITY_TOLERANCE`` is rounding and is
    always repaired; a larger one needs ``repair=True``. The nearest orthogonal matrix in the
    Frobenius norm is the polar factor U V^T of the singular value decomposition (Higham, Functions
    of Matrices, SIAM 2008, Theorem 8.4).

    Raises
    ------
    DomainError
        The distance is above the tolerance and ``repair`` is false, or the matrix is singular to
        the point that no orthogonal matrix is near (distance > 0.5).
    """
    excess = np.abs(matrix @ matrix.T - np.eye(len(matrix)))
    distance = float(excess.max())
    row = int(np.argmax(excess.max(axis=1)))
    if distance > 0.5:
        raise DomainError(
            f"The mixing matrix is far from orthogonal: |J J^T - 1| reaches {distance:.3g} in row "
            f"{row}. Its rows must be orthonormal (row i = final mode i in initial modes).",
            "/mixing",
        )
    if distance > ORTHOGONALITY_TOLERANCE and not repair:
        raise DomainError(
            f"The mixing matrix is not orthogonal: |J J^T - 1| reaches {distance:.3g} in row {row}, "
            f"allowed is {ORTHOGONALITY_TOLERANCE:g}. Give more decimals, or send "
            '"mixing_repair": "nearest-orthogonal" to use the nearest orthogonal matrix.',
            "/mixing",
        )
    left, _, right = np.linalg.svd(matrix)
    return left @ right, distance, row
