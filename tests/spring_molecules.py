"""Invented molecules held together by springs, and the committed QCSchema states.

A harmonic spring between every pair of atoms at rest gives a Hessian that is exactly invariant
under translation and rotation, for any masses: what identities like the product rule need.
"""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from ladderband.numerics.isotopes import atomic_number, isotope_mass_u
from ladderband.numerics.molecule import Molecule
from ladderband.numerics.units import BOHR_ANGSTROM
from ladderband.usecases.molecular_states import GradientInput, HessianInput, StateInput

DATA = Path(__file__).parent / "reference" / "data" / "qcschema"

BENT = Molecule((8, 1, 1), np.array([[0.0, 0.0, 0.07], [0.76, 0.0, -0.52], [-0.76, 0.1, -0.52]]),
                np.array([15.9949, 1.0078, 1.0078]))  # fmt: skip
LINEAR = Molecule((8, 6, 16), np.array([[0.0, 0.0, -1.6], [0.0, 0.0, 0.0], [0.0, 0.0, 1.2]]),
                  np.array([15.9949, 12.0, 31.972]))  # fmt: skip


def random_molecule(rng: np.random.Generator, n_atoms: int) -> Molecule:
    """Atoms on a shaken grid, 1.2 angstrom and more apart."""
    side = int(np.ceil(n_atoms ** (1 / 3)))
    grid = np.array(list(np.ndindex(side, side, side)), dtype=float)[:n_atoms]
    places = 1.5 * grid + 0.15 * rng.uniform(-1.0, 1.0, grid.shape)
    numbers = tuple(int(z) for z in rng.choice([1, 6, 7, 8], n_atoms))
    return Molecule(numbers, places, np.array([isotope_mass_u(z) for z in numbers]))


def spring_hessian(molecule: Molecule, rng: np.random.Generator) -> Any:
    """(3N, 3N) in hartree/bohr^2: springs of 0.05 to 0.4, weaker with distance, and 0.03 on every
    motion that is not rigid, so that no mode is soft.
    """
    n = molecule.n_atoms
    rigid = replace(molecule, masses_u=np.ones(n)).rigid_motions
    hessian = 0.03 * (np.eye(3 * n) - rigid @ rigid.T)
    for a in range(n):
        for b in range(a):
            line = molecule.geometry_angstrom[a] - molecule.geometry_angstrom[b]
            length = float(np.linalg.norm(line))
            stretch = np.zeros(3 * n)
            stretch[3 * a : 3 * a + 3], stretch[3 * b : 3 * b + 3] = line / length, -line / length
            strength = rng.uniform(0.05, 0.4) * np.exp(-2.0 * (length - 1.0))
            hessian += strength * np.outer(stretch, stretch)
    return hessian


def document(name: str) -> dict[str, Any]:
    """A committed QCSchema document (tests/reference/generate/qcschema_states.py)."""
    content: dict[str, Any] = json.loads((DATA / f"{name}.json").read_text())
    return content


def committed_state(name: str) -> StateInput:
    """The state of a committed document, default isotopes."""
    content = document(name)
    numbers = tuple(atomic_number(symbol) for symbol in content["molecule"]["symbols"])
    geometry = np.array(content["molecule"]["geometry"]).reshape(-1, 3) * float(BOHR_ANGSTROM)
    molecule = Molecule(numbers, geometry, np.array([isotope_mass_u(z) for z in numbers]))
    result, size = np.array(content["return_result"]), 3 * len(numbers)
    source = (
        HessianInput(result.reshape(size, size))
        if content["driver"] == "hessian"
        else GradientInput(result)
    )
    return StateInput(molecule, source, content["properties"]["return_energy"])
