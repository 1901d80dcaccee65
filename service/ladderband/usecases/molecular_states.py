"""Two electronic states as a client gives them, brought to one order of atoms and one frame."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from ladderband.numerics.alignment import Alignment, align, better_order, reordered
from ladderband.numerics.errors import DomainError
from ladderband.numerics.isotopes import SYMBOLS
from ladderband.numerics.mode_map import HarmonicState, turned_modes
from ladderband.numerics.molecule import Molecule, atom_name, check_molecule
from ladderband.numerics.normal_modes import (
    NormalModes,
    check_wavenumbers,
    checked_hessian,
    given_modes,
    normal_modes,
)
from ladderband.numerics.transition import Floats

AtomOrder = Literal["check", "match", "given"]

SAME_MASS_U = 1e-4
SAME_GEOMETRY_ANGSTROM = 1e-3
"""A gradient is taken as one at the initial geometry when the two agree this well."""

MIRROR_SLACK_ANGSTROM = 0.1
VECTORS_MENTIONED = 1e-3


@dataclass(frozen=True)
class HessianInput:
    """Second derivatives of the energy, (3N, 3N), hartree/bohr^2, Cartesian."""

    hessian: Floats


@dataclass(frozen=True)
class ModesInput:
    """Normal modes: wavenumbers (n,) in cm^-1 (negative: imaginary), one row of 3N a mode.

    ``mass_weighted``: the rows are orthonormal as they are; else they are Cartesian displacements
    of any length. A complete set, without translations and rotations.
    """

    wavenumbers_cm1: Floats
    vectors: Floats
    mass_weighted: bool = False


@dataclass(frozen=True)
class GradientInput:
    """First derivatives (3N,) of the FINAL energy at the initial geometry, hartree/bohr."""

    gradient: Floats


@dataclass(frozen=True)
class StateInput:
    """One state. ``molecule`` None (gradient only): the initial state's atoms and frame.

    ``masses_given``: the client named masses or isotopes for this state. The energy is that of the
    geometry given: the minimum for a Hessian or modes, the initial geometry for a gradient.
    ``geometry_member`` and ``source_member`` are what a refusal points at, below the state.
    """

    molecule: Molecule | None
    source: HessianInput | ModesInput | GradientInput
    energy_hartree: float | None = None
    masses_given: bool = False
    geometry_member: str = "geometry_angstrom"
    source_member: str = "hessian_hartree_bohr2"

    @property
    def is_gradient(self) -> bool:
        return isinstance(self.source, GradientInput)


@dataclass(frozen=True)
class Placed:
    """The final state in the initial state's atom order and frame.

    ``order[k]`` is the final state's atom in place k. ``gradient`` (3N,) is set and ``state`` None
    for a gradient only.
    """

    state: HarmonicState | None
    gradient: Floats | None
    order: tuple[int, ...]
    alignment: Alignment | None
    warnings: tuple[str, ...]

    @property
    def rotation(self) -> Floats:
        return np.eye(3) if self.alignment is None else self.alignment.rotation


def harmonic_state(state: StateInput, pointer: str) -> tuple[HarmonicState, list[str]]:
    """The normal modes of one state in its own frame, everything about it checked.

    Raises
    ------
    DomainError
        What :mod:`ladderband.numerics.molecule` and ``normal_modes`` refuse; a gradient.
    """
    molecule, source = state.molecule, state.source
    if molecule is None or isinstance(source, GradientInput):
        raise DomainError(
            "The initial state needs a geometry and a Hessian or normal modes; only the final "
            "state may be given by its gradient.",
            pointer,
        )
    warnings = check_molecule(molecule, f"{pointer}/{state.geometry_member}")
    where = f"{pointer}/{state.source_member}"
    if isinstance(source, HessianInput):
        hessian, more = checked_hessian(source.hessian, molecule, where)
        modes = normal_modes(molecule, hessian)
    else:
        modes, more = _from_modes(source, molecule, where)
    return HarmonicState(molecule, modes), [*warnings, *more, *check_wavenumbers(modes, where)]


def _from_modes(
    source: ModesInput, molecule: Molecule, pointer: str
) -> tuple[NormalModes, list[str]]:
    vectors = source.vectors.T
    if not source.mass_weighted and len(vectors) == 3 * molecule.n_atoms:
        vectors = vectors * molecule.root_masses[:, None]
    modes, departure = given_modes(molecule, source.wavenumbers_cm1, vectors, pointer)
    if departure < VECTORS_MENTIONED:
        return modes, []
    return modes, [
        f"{pointer}: the mode vectors were made orthonormal; they departed by {departure:.2g}."
    ]


def placed_final(reference: Molecule, final: StateInput, atom_order: AtomOrder) -> Placed:
    """Bring the final state into the initial state's order of atoms and Eckart frame.

    Raises
    ------
    DomainError
        Atoms or masses that do not match, another order of atoms that fits better (unless
        ``atom_order`` says what to do), a gradient at another geometry, or bad input.
    """
    if final.molecule is None:
        return _placed_gradient(reference, final, tuple(range(reference.n_atoms)), None, [])
    where = f"/final/{final.geometry_member}"
    warnings = check_molecule(final.molecule, where)
    order = _settled_order(reference, final.molecule, atom_order)
    molecule = _with_masses(reference, reordered(final.molecule, order), final.masses_given)
    if order != tuple(range(len(order))):
        warnings.append(f"/final: the atoms were put into the order {_listed(order)}.")
    aligned, alignment = align(reference, molecule)
    if alignment.mirror_distance < alignment.distance - MIRROR_SLACK_ANGSTROM:
        warnings.append(
            f"{where}: its mirror image lies nearer to the initial geometry "
            f"({alignment.mirror_distance:.3g} against {alignment.distance:.3g} angstrom): is one "
            "of the two the other enantiomer, or a left-handed frame?"
        )
    if isinstance(final.source, GradientInput):
        return _placed_gradient(reference, final, order, alignment, warnings)
    own = replace(final, molecule=molecule, source=_reordered_source(final.source, order))
    state, more = harmonic_state(own, "/final")
    more = [text for text in more if text not in warnings]  # the geometry was looked at already
    state = HarmonicState(aligned, turned_modes(state.modes, alignment.rotation))
    return Placed(state, None, order, alignment, (*warnings, *more))


def _placed_gradient(
    reference: Molecule,
    final: StateInput,
    order: tuple[int, ...],
    alignment: Alignment | None,
    warnings: list[str],
) -> Placed:
    if not isinstance(final.source, GradientInput):
        raise DomainError("The final state needs a geometry beside its Hessian or modes.", "/final")
    gradient = final.source.gradient
    if gradient.shape != (3 * reference.n_atoms,):
        raise DomainError(
            f"The gradient has {gradient.size} numbers; {reference.n_atoms} atoms need "
            f"{3 * reference.n_atoms}.",
            f"/final/{final.source_member}",
        )
    if alignment is not None and alignment.distance > SAME_GEOMETRY_ANGSTROM:
        raise DomainError(
            f"The final gradient belongs to another geometry: the atoms lie "
            f"{alignment.distance:.3g} angstrom from the initial ones, at most "
            f"{SAME_GEOMETRY_ANGSTROM:g} is allowed. Compute the final state's gradient at the "
            "initial geometry, or give its Hessian at its own minimum.",
            f"/final/{final.geometry_member}",
        )
    rotation = np.eye(3) if alignment is None else alignment.rotation
    turned = gradient.reshape(-1, 3)[list(order)] @ rotation.T
    return Placed(None, turned.ravel(), order, alignment, tuple(warnings))


def coordinate_index(order: tuple[int, ...]) -> list[int]:
    """Where the 3N Cartesian coordinates of reordered atoms come from."""
    return [3 * atom + axis for atom in order for axis in range(3)]


def _reordered_source(
    source: HessianInput | ModesInput, order: tuple[int, ...]
) -> HessianInput | ModesInput:
    index, identity = coordinate_index(order), tuple(range(len(order)))
    if order == identity:
        return source
    if isinstance(source, ModesInput):
        fits = source.vectors.shape[1] == len(index)  # a wrong size is refused where it is checked
        return replace(source, vectors=source.vectors[:, index]) if fits else source
    fits = source.hessian.shape == (len(index), len(index))
    return HessianInput(source.hessian[np.ix_(index, index)]) if fits else source


def _settled_order(reference: Molecule, final: Molecule, atom_order: AtomOrder) -> tuple[int, ...]:
    """The order of the final atoms to use; refuses what the client has not asked for."""
    if Counter(reference.atomic_numbers) != Counter(final.atomic_numbers):
        raise DomainError(
            f"The states are not of one molecule: {_formula(reference)} in the initial state, "
            f"{_formula(final)} in the final.",
            "/final",
        )
    as_given = tuple(range(final.n_atoms))
    same = reference.atomic_numbers == final.atomic_numbers
    if atom_order == "given" and same:
        return as_given
    better = None if atom_order == "given" else better_order(reference, final)
    if atom_order == "match" or (same and better is None):
        return better or as_given
    first = next((k for k in as_given if reference.atomic_numbers[k] != final.atomic_numbers[k]), 0)
    reason = (
        "the atoms lie clearly nearer to the initial ones in another order"
        if same
        else f"{atom_name(reference, first)} of the initial state meets {atom_name(final, first)}"
    )
    advice = f" The order {_listed(better)} fits." if better else ""
    raise DomainError(
        f"The atoms of the two states do not match: {reason}.{advice} "
        'Reorder them, or send "atom_order": "match" to have it done ("given" keeps the order '
        "where the elements agree).",
        "/final",
    )


def _listed(order: tuple[int, ...]) -> str:
    shown = ", ".join(str(k) for k in order[:40])
    return f"[{shown}{', ...' if len(order) > 40 else ''}]"


def _formula(molecule: Molecule) -> str:
    counts = sorted(Counter(molecule.atomic_numbers).items())
    return " ".join(f"{SYMBOLS[z - 1]}{n if n > 1 else ''}" for z, n in counts)


def _with_masses(reference: Molecule, molecule: Molecule, given: bool) -> Molecule:
    """The final atoms with the initial state's masses; masses that contradict them are refused."""
    gaps = np.abs(reference.masses_u - molecule.masses_u)
    worst = int(np.argmax(gaps))
    if given and gaps[worst] > SAME_MASS_U:
        raise DomainError(
            f"Atom {atom_name(reference, worst)} weighs {reference.masses_u[worst]:.8g} u in the "
            f"initial state and {molecule.masses_u[worst]:.8g} u in the final. Give masses or "
            "isotopes once, in the initial state; the final state takes them over.",
            "/final",
        )
    return replace(molecule, masses_u=reference.masses_u)
