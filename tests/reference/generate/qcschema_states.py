"""Compute the electronic states under tests/reference/data/qcschema with PySCF.

A test-data script: PySCF and geomeTRIC are no dependency of the service. Run it in an environment
of its own (pip install pyscf geometric), from the repository's root:

    python tests/reference/generate/qcschema_states.py [molecule ...]

Level of theory: Kohn-Sham (restricted for neutral molecules, unrestricted for cations), PySCF's
functional "b3lyp", def2-TZVP for the molecules of three and four atoms, def2-SVP for phenol;
analytic Hessians at geometries optimised to a largest gradient of 5e-5 hartree/bohr; dipole
derivatives by central differences of 0.005 bohr. The second state of the water cation (2A1) is held
by the occupation of the irreducible representations and computed at the neutral molecule's geometry
only: its own minimum is linear. The first excited singlet of formaldehyde is a Tamm-Dancoff state;
its transition dipole is followed along the displacements with the sign that makes the transition
densities overlap.

A document that is there already is kept: delete it to have it computed again. Each says which
integration grid was used. Every document follows QCSchema (MolSSI; molecule version 2, output
version 1), in atomic units. Numbers are rounded: geometry and Hessian 1e-8, derivatives 1e-6. About
an hour on one core, most of it for phenol.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path

import geometric
import numpy as np
import pyscf
from pyscf import dft, gto, lib, tdscf
from pyscf.geomopt.geometric_solver import optimize

DATA = Path(__file__).parents[1] / "data" / "qcschema"
STEP_BOHR = 0.005
TIGHT = {  # below this the integration grid's noise moves the gradient
    "convergence_energy": 1e-7,
    "convergence_grms": 3e-5,
    "convergence_gmax": 5e-5,
    "convergence_drms": 1e-4,
    "convergence_dmax": 2e-4,
    "maxsteps": 60,
}

# Invented starting geometries (angstrom): ordinary bond lengths and angles.
START = {
    "water": "O 0 0 0.12; H 0 0.76 -0.47; H 0 -0.76 -0.47",
    "ammonia": "N 0 0 0.11; H 0 0.94 -0.26; H 0.814 -0.47 -0.26; H -0.814 -0.47 -0.26",
    "formaldehyde": "O 0 0 0.68; C 0 0 -0.53; H 0 0.94 -1.11; H 0 -0.94 -1.11",
    "sulfur_dioxide": "S 0 0 0.36; O 0 1.24 -0.36; O 0 -1.24 -0.36",
    "phenol": (
        "C 0 0.94 0; C 1.21 0.24 0; C 1.20 -1.15 0; C 0 -1.86 0; C -1.20 -1.16 0; C -1.21 0.23 0;"
        "O 0.06 2.31 0; H 2.15 0.79 0; H 2.14 -1.69 0; H -0.02 -2.94 0; H -2.14 -1.71 0;"
        "H -2.15 0.77 0; H -0.83 2.66 0"
    ),
}
BASIS = {"phenol": "def2-svp"}
GRID_LEVEL = 4


def molecule(name: str, charge: int, coordinates_bohr=None, symmetry=False) -> gto.Mole:
    mol = gto.M(
        atom=START[name],
        basis=BASIS.get(name, "def2-tzvp"),
        charge=charge,
        spin=charge,
        symmetry=symmetry,
        verbose=3,
    )
    if coordinates_bohr is not None:
        mol.set_geom_(coordinates_bohr, unit="Bohr")
    return mol


def grid_level(mol: gto.Mole) -> int:
    """6 for the molecules done first, 4 since: the energies differ by less than 1e-5 hartree."""
    return 3 if mol.natm > 6 else GRID_LEVEL


def kohn_sham(mol: gto.Mole, density=None):
    method = dft.UKS(mol) if mol.spin else dft.RKS(mol)
    method.xc = "b3lyp"
    method.grids.level = grid_level(mol)
    method.conv_tol = 1e-11
    method.conv_tol_grad = 1e-7
    method.max_cycle = 200
    method.kernel(density)
    assert method.converged
    return method


def optimised(name: str, charge: int, start_bohr=None) -> gto.Mole:
    mol = molecule(name, charge, start_bohr)
    method = dft.UKS(mol) if charge else dft.RKS(mol)
    method.xc, method.grids.level, method.conv_tol = "b3lyp", grid_level(mol), 1e-11
    relaxed = optimize(method, **TIGHT)
    return molecule(name, charge, relaxed.atom_coords())


def dipole_atomic_units(method) -> np.ndarray:
    return method.dip_moment(unit="AU", verbose=0)


def central_differences(name: str, charge: int, coordinates, value) -> np.ndarray:
    """(3N, 3) derivatives of a vector ``value(mol)`` at ``coordinates`` in bohr."""
    slopes = np.empty((coordinates.size, 3))
    for k in range(coordinates.size):
        sides = []
        for sign in (1.0, -1.0):
            moved = coordinates.ravel().copy()
            moved[k] += sign * STEP_BOHR
            sides.append(value(molecule(name, charge, moved.reshape(-1, 3))))
        slopes[k] = (sides[0] - sides[1]) / (2.0 * STEP_BOHR)
    return slopes


def rounded(values, digits: int) -> list[float]:
    return [float(v) + 0.0 for v in np.round(np.asarray(values).ravel(), digits)]


def document(method, driver: str, result, keywords: dict, energy=None, **extras) -> dict:
    mol = method.mol
    energy = method.e_tot if energy is None else energy
    properties = {
        "calcinfo_natom": mol.natm,
        "calcinfo_nbasis": mol.nao,
        "calcinfo_nalpha": mol.nelec[0],
        "calcinfo_nbeta": mol.nelec[1],
        "nuclear_repulsion_energy": round(mol.energy_nuc(), 9),
        "return_energy": round(energy, 9),
        "scf_dipole_moment": rounded(dipole_atomic_units(method), 6),
    }
    provenance = {"creator": "PySCF", "version": pyscf.__version__, "routine": "qcschema_states.py"}
    return {
        "schema_name": "qcschema_output",
        "schema_version": 1,
        "molecule": {
            "schema_name": "qcschema_molecule",
            "schema_version": 2,
            "symbols": [mol.atom_pure_symbol(i) for i in range(mol.natm)],
            "geometry": rounded(mol.atom_coords(), 8),
            "molecular_charge": float(mol.charge),
            "molecular_multiplicity": mol.spin + 1,
            "fix_com": True,
            "fix_orientation": True,
            "provenance": provenance,
        },
        "driver": driver,
        "model": {"method": "b3lyp", "basis": mol.basis},
        "keywords": {
            "grid_level": method.grids.level,
            "optimiser": f"geomeTRIC {geometric.__version__}",
            **keywords,
        },
        "properties": properties,
        "return_result": rounded(result, 8),
        "success": True,
        "provenance": provenance,
        "extras": {key: rounded(value, 6) for key, value in extras.items()},
    }


def write(name: str, content: dict) -> None:
    DATA.mkdir(parents=True, exist_ok=True)
    (DATA / f"{name}.json").write_text(json.dumps(content, indent=None) + "\n")
    print("wrote", name, flush=True)


def hessian_document(name: str, mol: gto.Mole, dipoles: bool) -> dict:
    method = kohn_sham(mol)
    n = 3 * mol.natm
    hessian = method.Hessian().kernel().transpose(0, 2, 1, 3).reshape(n, n)
    extras = {}
    if dipoles:
        density = method.make_rdm1()
        extras["dipole_derivatives"] = central_differences(
            name,
            mol.charge,
            mol.atom_coords(),
            lambda m: dipole_atomic_units(kohn_sham(m, density)),
        )
    return document(method, "hessian", 0.5 * (hessian + hessian.T), {}, **extras)


def gradient_document(method, keywords: dict) -> dict:
    return document(method, "gradient", method.nuc_grad_method().kernel(), keywords)


def water_second_cation(coordinates) -> dict:
    """2A1: the electron leaves the second highest orbital (3a1), held by symmetry."""
    mol = molecule("water", 1, coordinates, symmetry="C2v")
    assert np.allclose(mol.atom_coords(), coordinates, atol=1e-7), "the frame was turned"
    method = dft.UKS(mol)
    method.xc, method.grids.level, method.conv_tol = "b3lyp", grid_level(mol), 1e-11
    method.irrep_nelec = {"A1": (3, 2), "B1": (1, 1), "B2": (1, 1)}
    method.kernel()
    assert method.converged
    return gradient_document(method, {"state": "2A1, by irrep_nelec"})


def formaldehyde_excited(coordinates) -> dict:
    """First singlet (1A2) at the ground state's geometry: gradient, transition dipole, slopes."""
    ground = kohn_sham(molecule("formaldehyde", 0, coordinates))
    reference = tamm_dancoff(ground)
    slopes = central_differences(
        "formaldehyde", 0, coordinates, lambda mol: signed_dipole(mol, ground, reference)
    )
    gradient = reference.nuc_grad_method().kernel(state=1)
    return document(
        ground,
        "gradient",
        gradient,
        {"state": "first singlet, Tamm-Dancoff"},
        energy=ground.e_tot + reference.e[0],
        transition_dipole=reference.transition_dipole()[0],
        transition_dipole_derivatives=slopes,
    )


def tamm_dancoff(ground):
    response = tdscf.TDA(ground)
    response.nstates, response.conv_tol = 1, 1e-7
    response.kernel()
    assert all(response.converged)
    return response


def transition_density(ground, response) -> np.ndarray:
    occupied = ground.mo_coeff[:, ground.mo_occ > 0]
    empty = ground.mo_coeff[:, ground.mo_occ == 0]
    return occupied @ response.xy[0][0] @ empty.T


def signed_dipole(mol: gto.Mole, ground, reference) -> np.ndarray:
    """Transition dipole at ``mol`` with the phase of the reference's transition density."""
    moved = kohn_sham(mol, ground.make_rdm1())
    response = tamm_dancoff(moved)
    cross = gto.intor_cross("int1e_ovlp", ground.mol, mol)
    here, there = transition_density(moved, response), transition_density(ground, reference)
    overlap = np.einsum("ij,ik,kl,jl->", there, cross, here, cross)
    return float(np.sign(overlap)) * response.transition_dipole()[0]


def make(name: str) -> None:
    """Write the documents of one molecule that are not there yet."""
    there = DATA / f"{name}_neutral.json"
    if not there.exists():
        neutral = optimised(name, 0)
        write(there.stem, hessian_document(name, neutral, dipoles=neutral.natm <= 6))
    coordinates = np.array(json.loads(there.read_text())["molecule"]["geometry"]).reshape(-1, 3)
    for suffix, calculation in calculations(name, coordinates).items():
        if not (DATA / f"{name}_{suffix}.json").exists():
            write(f"{name}_{suffix}", calculation())


def calculations(name: str, coordinates) -> dict:
    """What is computed beside the neutral molecule, from its geometry in bohr."""

    def vertical():
        method = kohn_sham(molecule(name, 1, coordinates))
        return gradient_document(method, {"state": "lowest doublet"})

    def relaxed():
        cation = optimised(name, 1, coordinates)
        return hessian_document(name, cation, dipoles=cation.natm <= 6)

    found = {"cation_gradient": vertical, "cation": relaxed}
    if name == "water":
        found["cation_2a1_gradient"] = lambda: water_second_cation(coordinates)
    if name == "formaldehyde":
        found["excited_gradient"] = lambda: formaldehyde_excited(coordinates)
    return found


if __name__ == "__main__":
    lib.num_threads(1)
    for chosen in sys.argv[1:] or START:
        make(chosen)
