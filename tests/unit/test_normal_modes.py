"""Normal modes: rigid motions, independent diagonalisation, isotopes, refusals."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import constants, linalg

from ladderband.numerics.errors import DomainError
from ladderband.numerics.isotopes import isotope_mass_u
from ladderband.numerics.molecule import Molecule, check_molecule
from ladderband.numerics.normal_modes import (
    FORCE_CONSTANT_CM1,
    NormalModes,
    check_wavenumbers,
    checked_hessian,
    given_modes,
    normal_modes,
)
from spring_molecules import BENT, LINEAR, committed_state, random_molecule, spring_hessian

RNG = np.random.default_rng(5)


def hessian_of(molecule):
    return spring_hessian(molecule, np.random.default_rng(3))


def independent_wavenumbers(molecule, hessian):
    """scipy on the generalised problem H x = lambda M x with SI constants of scipy (CODATA)."""
    hartree, bohr = (constants.physical_constants[k][0] for k in ("Hartree energy", "Bohr radius"))
    masses = np.diag(np.repeat(molecule.masses_u, 3)) * constants.atomic_mass
    values = linalg.eigh(hessian * hartree / bohr**2, masses, eigvals_only=True)
    frequencies = np.sign(values) * np.sqrt(np.abs(values)) / (2 * math.pi)
    return frequencies / (constants.c * 100)


@pytest.mark.parametrize("molecule", [BENT, LINEAR, random_molecule(RNG, 9)], ids=["3", "lin", "9"])
def test_wavenumbers_equal_an_independent_diagonalisation_to_1e_6(molecule):
    hessian = hessian_of(molecule)
    expected = independent_wavenumbers(molecule, hessian)[-molecule.n_vibrations :]
    ours = normal_modes(molecule, hessian).wavenumbers_cm1
    # scipy may carry another CODATA year: the conversion is compared apart, 3e-10 is its own error
    factor = (
        FORCE_CONSTANT_CM1
        / independent_wavenumbers(
            Molecule((1, 1), np.eye(3)[:2], np.array([1.0, 1.0])), np.eye(6)
        ).max()
    )
    assert factor == pytest.approx(1.0, abs=2e-9)
    assert ours == pytest.approx(expected * factor, abs=1e-6)


@pytest.mark.parametrize(
    "name", ["water_neutral", "ammonia_neutral", "ammonia_cation", "formaldehyde_neutral"]
)
def test_computed_hessians_match_a_projection_by_an_explicit_projector(name):
    state = committed_state(name)
    molecule, hessian = state.molecule, state.source.hessian
    roots = molecule.root_masses
    motions = [np.tile(axis, molecule.n_atoms) * roots for axis in np.eye(3)]
    motions += [np.cross(axis, molecule.centred).ravel() * roots for axis in np.eye(3)]
    rigid = linalg.orth(np.array(motions).T)
    projector = np.eye(len(roots)) - rigid @ rigid.T
    values = linalg.eigvalsh(projector @ (hessian / np.outer(roots, roots)) @ projector)
    expected = np.sqrt(values[-molecule.n_vibrations :]) * FORCE_CONSTANT_CM1
    assert normal_modes(molecule, hessian).wavenumbers_cm1 == pytest.approx(expected, abs=1e-6)


def test_diatomic_molecule_has_one_mode_at_the_textbook_wavenumber():
    hydrogen_chloride = Molecule(
        (1, 17), np.array([[0.0, 0, 0], [0, 0, 1.27]]), np.array([1.0, 35])
    )
    k, hessian = 0.3, np.zeros((6, 6))
    hessian[2, 2] = hessian[5, 5] = k
    hessian[2, 5] = hessian[5, 2] = -k
    modes = normal_modes(hydrogen_chloride, hessian)
    assert hydrogen_chloride.n_vibrations == 1
    assert modes.wavenumbers_cm1 == pytest.approx([FORCE_CONSTANT_CM1 * math.sqrt(k * 36 / 35)])


@pytest.mark.parametrize("molecule", [BENT, LINEAR, random_molecule(RNG, 5)], ids=["3", "lin", "5"])
def test_modes_are_orthonormal_and_carry_no_rigid_motion(molecule):
    vectors = normal_modes(molecule, hessian_of(molecule)).vectors
    assert np.abs(vectors.T @ vectors - np.eye(molecule.n_vibrations)).max() < 1e-14
    assert np.abs(molecule.rigid_motions.T @ vectors).max() < 1e-14


def test_a_hessian_that_moves_as_a_whole_still_has_exactly_zero_rigid_motion_in_its_modes():
    noisy = hessian_of(BENT) + 0.01 * np.eye(9)
    modes = normal_modes(BENT, noisy)
    assert modes.rigid_residual_cm1 > 100.0
    assert np.abs(BENT.rigid_motions.T @ modes.vectors).max() < 1e-14
    assert "stationary" in check_wavenumbers(modes, "/initial/hessian")[0]


def product_rule(molecule, hessian, masses):
    """log of the Teller-Redlich ratio of the products of wavenumbers, ours and the masses'."""
    heavy = replace(molecule, masses_u=masses)
    products = [np.log(normal_modes(m, hessian).wavenumbers_cm1).sum() for m in (molecule, heavy)]
    expected = 0.0
    for m, sign in ((heavy, 1.0), (molecule, -1.0)):
        moments = m.principal_axes[0][1:] if m.linear else m.principal_axes[0]
        rotations = np.log(moments).sum()
        expected += (
            sign * 0.5 * (rotations + 3 * math.log(m.masses_u.sum()) - 3 * np.log(m.masses_u).sum())
        )
    return products[1] - products[0], expected


@pytest.mark.parametrize("molecule", [BENT, LINEAR, random_molecule(RNG, 8)], ids=["3", "lin", "8"])
def test_teller_redlich_product_rule_to_1e_8(molecule):
    # Redlich, Z. Phys. Chem. B 28, 371 (1935); linear: one rotation about the axis less
    if molecule.linear:
        moments = molecule.principal_axes[0]
        assert moments[0] < 1e-9 * moments[1]
    heavier = molecule.masses_u * np.linspace(1.0, 2.0, molecule.n_atoms)
    ours, expected = product_rule(molecule, hessian_of(molecule), heavier)
    assert ours == pytest.approx(expected, abs=1e-8)


def test_teller_redlich_on_a_computed_hessian_freed_of_its_noise():
    state = committed_state("formaldehyde_neutral")
    molecule = state.molecule
    unweighted = replace(molecule, masses_u=np.ones(4)).rigid_motions
    projector = np.eye(12) - unweighted @ unweighted.T
    hessian = projector @ state.source.hessian @ projector
    masses = np.array([isotope_mass_u(8, 18), isotope_mass_u(6), *[isotope_mass_u(1, 2)] * 2])
    ours, expected = product_rule(molecule, hessian, masses)
    assert ours == pytest.approx(expected, abs=1e-8)


def test_given_modes_reproduce_the_modes_they_were_printed_from():
    exact = normal_modes(BENT, hessian_of(BENT))
    printed = np.round(exact.vectors[:, ::-1], 4)
    modes, departure = given_modes(
        BENT, exact.wavenumbers_cm1[::-1], printed, "/initial/normal_modes"
    )
    assert departure < 1e-3
    assert modes.wavenumbers_cm1 == pytest.approx(exact.wavenumbers_cm1)
    assert modes.vectors == pytest.approx(exact.vectors, abs=2e-4)
    assert np.abs(modes.vectors.T @ modes.vectors - np.eye(3)).max() < 1e-14


@pytest.mark.parametrize(
    ("wavenumbers", "vectors", "says"),
    [
        ([1.0, 2.0], np.ones((9, 2)), "has 3 vibrations of 9 components"),
        ([1.0, 2.0, 3.0], np.ones((9, 3)), "zero"),
        ([1.0, 2.0, 3.0], RNG.normal(size=(9, 3)), "vectors_kind"),
    ],
    ids=["incomplete", "zero vector", "not orthonormal"],
)
def test_mode_lists_that_cannot_be_are_refused(wavenumbers, vectors, says):
    if says == "zero":
        vectors = vectors * np.array([1.0, 0.0, 1.0])
    with pytest.raises(DomainError, match=says):
        given_modes(BENT, np.array(wavenumbers), vectors, "/initial/normal_modes")


def test_an_asymmetric_hessian_is_refused_with_how_much():
    hessian = hessian_of(BENT)
    hessian[2, 5] += 0.03
    with pytest.raises(DomainError, match=r"rows 2 and 5 .* by 0.03 hartree/bohr\^2"):
        checked_hessian(hessian, BENT, "/initial/hessian")


def test_a_slightly_asymmetric_hessian_is_averaged_and_told():
    hessian = hessian_of(BENT)
    hessian[2, 5] += 1e-5
    symmetric, warnings = checked_hessian(hessian, BENT, "/initial/hessian")
    assert np.array_equal(symmetric, symmetric.T)
    assert "symmetrised" in warnings[0]


def test_a_hessian_of_the_wrong_size_is_refused():
    with pytest.raises(DomainError, match="need 9 x 9"):
        checked_hessian(np.eye(6), BENT, "/initial/hessian")


def test_a_hessian_in_another_unit_is_asked_about():
    modes = normal_modes(BENT, hessian_of(BENT) * 97.1736)
    with pytest.raises(DomainError, match="hartree/bohr"):
        check_wavenumbers(modes, "/initial/hessian")


def test_collapsed_atoms_are_refused_by_name():
    twice = replace(BENT, geometry_angstrom=BENT.geometry_angstrom * [0.1, 1.0, 1.0])
    with pytest.raises(DomainError, match=r"H .index 1. and H .index 2."):
        check_molecule(twice, "/initial")


@pytest.mark.parametrize(("scale", "says"), [(0.529, "in the unit"), (1.89, "in bohr")])
def test_a_geometry_in_the_wrong_unit_is_asked_about(scale, says):
    scaled = replace(BENT, geometry_angstrom=BENT.geometry_angstrom * scale)
    assert says in check_molecule(scaled, "/initial")[0]
    assert check_molecule(BENT, "/initial") == []


def test_one_atom_is_refused():
    with pytest.raises(DomainError, match="at least two atoms"):
        check_molecule(Molecule((2,), np.zeros((1, 3)), np.array([4.0])), "/initial")


def test_imaginary_modes_come_out_negative():
    modes = normal_modes(BENT, -hessian_of(BENT))
    assert isinstance(modes, NormalModes)
    assert (modes.wavenumbers_cm1 < 0.0).all()
    weighted = modes.weighted_hessian / FORCE_CONSTANT_CM1**2
    roots = BENT.root_masses
    assert weighted * np.outer(roots, roots) == pytest.approx(-hessian_of(BENT), abs=1e-12)
