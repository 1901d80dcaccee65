"""A molecule in space: atoms, masses, moments of inertia, and the motions that do not vibrate."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ladderband.numerics.errors import DomainError
from ladderband.numerics.isotopes import SYMBOLS
from ladderband.numerics.transition import Floats

LINEAR_RATIO = 1e-4
"""A molecule counts as linear when its largest distance from the axis of smallest inertia, mass
weighted, is below this share of its length. Optimised linear molecules come out near 1e-6."""

COLLAPSED_ANGSTROM = 0.3
"""No two nuclei of a molecule are nearer; the shortest bond, H-H, is 0.74 angstrom."""

CROWDED_ANGSTROM = 0.65
"""Below every bond length of a molecule at rest: the sign of bohr taken for angstrom halved."""

SPARSE_ANGSTROM = 1.6
"""With hydrogen in the molecule some bond is shorter (X-H: 0.9 to 1.6 angstrom)."""


@dataclass(frozen=True)
class Molecule:
    """Atomic numbers (n,), geometry (n, 3) in angstrom, masses (n,) in u."""

    atomic_numbers: tuple[int, ...]
    geometry_angstrom: Floats
    masses_u: Floats

    @property
    def n_atoms(self) -> int:
        return len(self.atomic_numbers)

    @cached_property
    def centred(self) -> Floats:
        """Geometry from the centre of mass, (n, 3)."""
        mass = self.masses_u
        centre: Floats = mass @ self.geometry_angstrom / mass.sum()
        return self.geometry_angstrom - centre

    @cached_property
    def root_masses(self) -> Floats:
        """sqrt(m) for each Cartesian coordinate, (3n,)."""
        return np.repeat(np.sqrt(self.masses_u), 3)

    @cached_property
    def weighted(self) -> Floats:
        """Mass-weighted Cartesian coordinates from the centre of mass, (3n,)."""
        return self.root_masses * self.centred.ravel()

    @cached_property
    def principal_axes(self) -> tuple[Floats, Floats]:
        """Moments of inertia in u angstrom^2, ascending, and the axes as rows."""
        r, mass = self.centred, self.masses_u
        tensor = np.eye(3) * float(mass @ (r**2).sum(axis=1)) - (r.T * mass) @ r
        moments, axes = np.linalg.eigh(tensor)
        return moments, axes.T

    @cached_property
    def linear(self) -> bool:
        """All atoms on one line (every molecule of two atoms)."""
        spread = np.linalg.svd(self.weighted.reshape(-1, 3), compute_uv=False)
        return bool(spread[1] < LINEAR_RATIO * spread[0])

    @property
    def n_vibrations(self) -> int:
        """3N - 5 of a linear molecule, else 3N - 6."""
        return 3 * self.n_atoms - (5 if self.linear else 6)

    @cached_property
    def rigid_motions(self) -> Floats:
        """Orthonormal mass-weighted translations and rotations, (3n, 6) or (3n, 5).

        The rotations are taken about the principal axes; the one about the axis of a linear
        molecule does not exist and is left out.
        """
        _, axes = self.principal_axes
        shifts = [np.tile(axis, self.n_atoms) for axis in np.eye(3)]
        turns = [np.cross(axis, self.centred).ravel() for axis in axes[1 if self.linear else 0 :]]
        basis, _ = np.linalg.qr((np.array(shifts + turns) * self.root_masses).T)
        return np.asarray(basis)


def check_molecule(molecule: Molecule, pointer: str) -> list[str]:
    """Refuse collapsed atoms and lone atoms; return warnings where the unit looks wrong.

    Raises
    ------
    DomainError
        Fewer than two atoms, or two nuclei nearer than COLLAPSED_ANGSTROM.
    """
    if molecule.n_atoms < 2:
        raise DomainError("One atom has no vibrations: give at least two atoms.", pointer)
    distances = np.linalg.norm(
        molecule.geometry_angstrom[:, None] - molecule.geometry_angstrom[None], axis=2
    )
    np.fill_diagonal(distances, np.inf)
    one, other = np.unravel_index(int(np.argmin(distances)), distances.shape)
    nearest = float(distances[one, other])
    names = f"{atom_name(molecule, int(one))} and {atom_name(molecule, int(other))}"
    if nearest < COLLAPSED_ANGSTROM:
        raise DomainError(
            f"Atoms {names} are {nearest:.3g} angstrom apart; nuclei of a molecule are never "
            f"nearer than {COLLAPSED_ANGSTROM} angstrom. Check the unit and the atoms.",
            pointer,
        )
    if nearest < CROWDED_ANGSTROM:
        return [
            f"{pointer}: the nearest atoms, {names}, are {nearest:.3g} angstrom apart, less than "
            "any bond: is the geometry in the unit that was named?"
        ]
    if 1 in molecule.atomic_numbers and nearest > SPARSE_ANGSTROM:
        return [
            f"{pointer}: no atoms are nearer than {nearest:.3g} angstrom although there is "
            "hydrogen: is the geometry in bohr?"
        ]
    return []


def atom_name(molecule: Molecule, index: int) -> str:
    """Symbol and position in the list, counted from 0."""
    return f"{SYMBOLS[molecule.atomic_numbers[index] - 1]} (index {index})"
