r"""Harmonic normal modes of a molecule from its force constants.

With M the atomic masses and H the Hessian, the mass-weighted Hessian M^{-1/2} H M^{-1/2} is
restricted to the exact orthogonal complement of the translations and rotations (Eckart, Phys. Rev.
47, 552 (1935); Wilson, Decius and Cross, Molecular Vibrations, McGraw-Hill 1955, ch. 2) and
diagonalised there, so that no rigid motion is left in any mode: 3N - 6 modes, 3N - 5 for a linear
molecule. An eigenvalue lambda is the square of an angular frequency; a negative one is reported as
a negative wavenumber (an imaginary frequency; common practice).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import linalg

from ladderband.numerics.errors import DomainError
from ladderband.numerics.molecule import Molecule
from ladderband.numerics.transition import Floats
from ladderband.numerics.units import (
    ATOMIC_MASS_KG,
    BOHR_ANGSTROM,
    HARTREE_J,
    SPEED_OF_LIGHT_M_S,
)

_BOHR_M = BOHR_ANGSTROM / 10**10
FORCE_CONSTANT_CM1 = math.sqrt(float(HARTREE_J / (_BOHR_M**2 * ATOMIC_MASS_KG))) / (
    2.0 * math.pi * float(SPEED_OF_LIGHT_M_S * 100)
)
"""Wavenumber of 1 hartree/bohr^2 on 1 u: 5140.487... cm^-1 (relative uncertainty 3e-10)."""

ASYMMETRY_REFUSED = 1e-3
"""Largest |H - H^T| / max |H| that is taken as numerical noise and averaged."""

ASYMMETRY_MENTIONED = 1e-5

HIGHEST_WAVENUMBER_CM1 = 6000.0
"""No molecule vibrates faster (H2: 4401 cm^-1; NIST Chemistry WebBook, from memory)."""

RIGID_RESIDUAL_CM1 = 60.0
"""Wavenumber left in the rigid motions above which a Hessian is worth a warning."""

VECTORS_REFUSED = 0.05
"""Largest departure of given mode vectors from orthonormal ones that is taken as rounding."""


@dataclass(frozen=True)
class NormalModes:
    """n modes: ``wavenumbers_cm1`` (n,) ascending, negative for imaginary; ``vectors`` (3N, n).

    The columns of ``vectors`` are orthonormal in mass-weighted Cartesian coordinates; the largest
    component of each is positive. ``rigid_residual_cm1`` is the largest wavenumber the Hessian
    gives to a translation or rotation (0 for a perfect one).
    """

    wavenumbers_cm1: Floats
    vectors: Floats
    rigid_residual_cm1: float = 0.0

    @property
    def force_constants(self) -> Floats:
        """Signed squares of the wavenumbers, (n,)."""
        return self.wavenumbers_cm1 * np.abs(self.wavenumbers_cm1)

    @property
    def weighted_hessian(self) -> Floats:
        """The mass-weighted Hessian these modes stand for, (3N, 3N), in cm^-2."""
        return (self.vectors * self.force_constants) @ self.vectors.T


def normal_modes(
    molecule: Molecule, hessian: Floats, *, without: Floats | None = None
) -> NormalModes:
    """Normal modes from a Cartesian Hessian in hartree/bohr^2, shape (3N, 3N), symmetric.

    ``without`` (3N, k): orthonormal mass-weighted directions to hold fixed besides the rigid ones.
    Cost: two dense factorisations of order 3N (0.05 s for 100 atoms). Error: backward stable; a
    wavenumber nu_k is off by about 1e-16 N nu_max^2 / nu_k.
    """
    roots = molecule.root_masses
    weighted = hessian / np.outer(roots, roots) * FORCE_CONSTANT_CM1**2
    return modes_of_weighted(molecule, weighted, without)


def modes_of_weighted(molecule: Molecule, weighted: Floats, without: Floats | None) -> NormalModes:
    """As :func:`normal_modes`, from a mass-weighted Hessian in cm^-2."""
    rigid = molecule.rigid_motions
    fixed = rigid if without is None else np.hstack([rigid, without])
    complement = linalg.qr(fixed)[0][:, fixed.shape[1] :]
    values, vectors = np.linalg.eigh(complement.T @ weighted @ complement)
    residual = np.linalg.norm(rigid.T @ weighted @ rigid, 2)
    return NormalModes(
        np.sign(values) * np.sqrt(np.abs(values)),
        with_positive_peaks(complement @ vectors),
        math.sqrt(float(residual)),
    )


def with_positive_peaks(vectors: Floats) -> Floats:
    """The columns with their largest component positive, so that a sign is not left to chance."""
    peaks = vectors[np.argmax(np.abs(vectors), axis=0), np.arange(vectors.shape[1])]
    return vectors * np.where(peaks < 0.0, -1.0, 1.0)


def checked_hessian(hessian: Floats, molecule: Molecule, pointer: str) -> tuple[Floats, list[str]]:
    """The symmetric part of a Hessian that has the right size, with warnings.

    Raises
    ------
    DomainError
        Wrong size, or more asymmetric than numerical noise explains (the sentence says how much).
    """
    size = 3 * molecule.n_atoms
    if hessian.shape != (size, size):
        raise DomainError(
            f"The Hessian has shape {' x '.join(map(str, hessian.shape))}; {molecule.n_atoms} "
            f"atoms need {size} x {size} (x, y, z of atom 0, then x, y, z of atom 1, ...).",
            pointer,
        )
    asymmetry = np.abs(hessian - hessian.T)
    share = float(asymmetry.max() / max(float(np.abs(hessian).max()), 1e-300))
    row, column = (int(i) for i in np.unravel_index(int(np.argmax(asymmetry)), asymmetry.shape))
    told = (
        f"rows {row} and {column} differ from their mirror elements by "
        f"{asymmetry.max():.3g} hartree/bohr^2, {share:.2g} of the largest element"
    )
    if share > ASYMMETRY_REFUSED:
        raise DomainError(
            f"The Hessian is not symmetric: {told}; up to {ASYMMETRY_REFUSED:g} is taken as noise "
            "and averaged. Check the order of rows and the number of elements.",
            pointer,
        )
    warnings = [f"{pointer}: the Hessian was symmetrised; {told}."]
    return 0.5 * (hessian + hessian.T), warnings if share > ASYMMETRY_MENTIONED else []


def check_wavenumbers(modes: NormalModes, pointer: str) -> list[str]:
    """Refuse wavenumbers no molecule has; warn when the rigid motions are far from zero.

    Raises
    ------
    DomainError
        The highest wavenumber is above HIGHEST_WAVENUMBER_CM1: the unit is likely wrong.
    """
    highest = float(np.abs(modes.wavenumbers_cm1).max())
    if highest > HIGHEST_WAVENUMBER_CM1:
        raise DomainError(
            f"The highest wavenumber comes out as {highest:.4g} cm^-1; no molecule has more than "
            f"{HIGHEST_WAVENUMBER_CM1:g}. Is this Hessian in hartree/bohr^2, Cartesian and not "
            "mass-weighted? (1 hartree/bohr^2 = 97.1736 eV/angstrom^2 = 15.5689 mdyn/angstrom.)",
            pointer,
        )
    if modes.rigid_residual_cm1 > RIGID_RESIDUAL_CM1:
        return [
            f"{pointer}: translations and rotations come out at up to "
            f"{modes.rigid_residual_cm1:.3g} cm^-1 before they are removed: is the geometry a "
            "stationary point, and do Hessian and geometry share one frame?"
        ]
    return []


def given_modes(
    molecule: Molecule, wavenumbers_cm1: Floats, vectors: Floats, pointer: str
) -> tuple[NormalModes, float]:
    """Normal modes from a client's own list, made exactly orthonormal and free of rigid motion.

    ``vectors`` (3N, n): Cartesian displacements times sqrt(mass) up to a factor, in any order.
    Returns the modes and the largest departure from orthonormality that was repaired (the nearest
    orthonormal set; Higham, Functions of Matrices, SIAM 2008, Theorem 8.4).

    Raises
    ------
    DomainError
        Not all vibrations are there, or the vectors are not near an orthonormal set.
    """
    size, n = 3 * molecule.n_atoms, molecule.n_vibrations
    if vectors.shape != (size, n) or wavenumbers_cm1.shape != (n,):
        raise DomainError(
            f"{len(wavenumbers_cm1)} wavenumbers and {vectors.shape[1]} vectors of "
            f"{vectors.shape[0]} components were given; this "
            f"{'linear ' if molecule.linear else ''}molecule has {n} vibrations of {size} "
            "components. Leave translations and rotations out, and give every vibration.",
            pointer,
        )
    lengths = np.linalg.norm(vectors, axis=0)
    if not np.all(lengths > 0.0):
        raise DomainError(f"Vector {int(np.argmin(lengths))} is zero.", f"{pointer}/vectors")
    unit = vectors / lengths
    rigid = molecule.rigid_motions
    unit = unit - rigid @ (rigid.T @ unit)
    departure = float(np.abs(unit.T @ unit - np.eye(n)).max())
    if departure > VECTORS_REFUSED:
        raise DomainError(
            f"The mode vectors are not orthonormal after mass weighting: the departure is "
            f"{departure:.3g}, at most {VECTORS_REFUSED:g} is taken as rounding. Are they "
            "Cartesian displacements or already mass-weighted (vectors_kind), in the geometry's "
            "frame?",
            f"{pointer}/vectors",
        )
    left, _, right = np.linalg.svd(unit, full_matrices=False)
    order = np.argsort(wavenumbers_cm1, kind="stable")
    nearest = with_positive_peaks((left @ right)[:, order])
    return NormalModes(wavenumbers_cm1[order], nearest), departure
