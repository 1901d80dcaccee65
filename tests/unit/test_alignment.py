"""Eckart alignment and the order of the atoms."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from ladderband.numerics.alignment import align, better_order, distance, reordered, turned
from spring_molecules import BENT, LINEAR, random_molecule

RNG = np.random.default_rng(11)
MOLECULES = [BENT, random_molecule(RNG, 7), random_molecule(RNG, 30)]
IDS = ["bent", "7 atoms", "30 atoms"]


def moved(molecule, rng, shake=0.0):
    """The molecule turned, shifted and shaken."""
    geometry = molecule.geometry_angstrom + shake * rng.normal(
        size=molecule.geometry_angstrom.shape
    )
    rotation = Rotation.random(random_state=rng).as_matrix()
    return replace(molecule, geometry_angstrom=geometry @ rotation.T + rng.normal(size=3)), rotation


@pytest.mark.parametrize("molecule", MOLECULES, ids=IDS)
def test_a_turned_molecule_is_turned_back(molecule):
    other, rotation = moved(molecule, RNG)
    aligned, alignment = align(molecule, other)
    assert aligned.centred == pytest.approx(molecule.centred, abs=1e-12)
    assert alignment.rotation == pytest.approx(rotation.T, abs=1e-12)
    assert alignment.angle_deg == pytest.approx(
        np.degrees(Rotation.from_matrix(rotation).magnitude())
    )


@pytest.mark.parametrize("molecule", MOLECULES, ids=IDS)
def test_the_eckart_condition_holds_for_different_geometries(molecule):
    other, _ = moved(molecule, RNG, shake=0.1)
    aligned, alignment = align(molecule, other)
    assert alignment.eckart_residual < 1e-14
    assert np.linalg.det(alignment.rotation) == pytest.approx(1.0)
    # a displacement between Eckart frames has no rigid part, seen from either geometry
    difference = molecule.weighted - aligned.weighted
    for basis in (molecule.rigid_motions, aligned.rigid_motions):
        assert np.abs(basis.T @ difference).max() < 1e-12


def test_the_rotation_is_the_best_of_scipys():
    other, _ = moved(MOLECULES[1], RNG, shake=0.2)
    best, root_sum = Rotation.align_vectors(
        MOLECULES[1].centred, other.centred, weights=other.masses_u
    )
    alignment = align(MOLECULES[1], other)[1]
    assert alignment.rotation == pytest.approx(best.as_matrix(), abs=1e-10)
    assert alignment.distance == pytest.approx(root_sum / np.sqrt(other.masses_u.sum()))


def test_linear_molecules_in_one_frame_are_left_alone():
    stretched = replace(LINEAR, geometry_angstrom=LINEAR.geometry_angstrom * 1.05)
    assert align(LINEAR, stretched)[1].rotation == pytest.approx(np.eye(3), abs=1e-12)


@pytest.mark.parametrize("degrees", [40.0, 180.0])
def test_a_turned_linear_molecule_is_turned_back(degrees):
    rotation = Rotation.from_euler("y", degrees, degrees=True).as_matrix()
    aligned, alignment = align(LINEAR, turned(LINEAR, rotation))
    assert aligned.centred == pytest.approx(LINEAR.centred, abs=1e-12)
    assert alignment.angle_deg == pytest.approx(degrees)


def test_axis_switching_of_a_sheared_molecule_is_the_turn_of_its_principal_axes():
    bent = replace(BENT, geometry_angstrom=BENT.geometry_angstrom * [1.0, 1.0, 0.8])
    lopsided = bent.geometry_angstrom.copy()
    lopsided[1] *= 1.2
    angle = align(bent, replace(bent, geometry_angstrom=lopsided))[1].axis_switching_deg
    assert angle is not None
    assert 0.5 < angle < 45.0


def test_axis_switching_is_left_open_where_two_moments_coincide():
    assert align(LINEAR, LINEAR)[1].axis_switching_deg is None


@pytest.mark.parametrize("molecule", MOLECULES, ids=IDS)
def test_a_shuffled_order_is_found(molecule):
    shaken, _ = moved(molecule, RNG, shake=0.03)
    shuffle = tuple(int(k) for k in RNG.permutation(molecule.n_atoms))
    shuffled = reordered(shaken, shuffle)
    order = better_order(molecule, shuffled)
    found = shuffled if order is None else reordered(shuffled, order)
    assert found.atomic_numbers == molecule.atomic_numbers
    reached = distance(molecule, align(molecule, found)[0])
    assert reached <= distance(molecule, align(molecule, shaken)[0]) + 1e-12


def test_an_order_that_fits_is_not_questioned():
    assert better_order(BENT, moved(BENT, RNG, shake=0.05)[0]) is None


def test_a_mirror_image_is_seen():
    chiral = random_molecule(RNG, 6)
    mirrored = replace(chiral, geometry_angstrom=chiral.geometry_angstrom * [1.0, 1.0, -1.0])
    alignment = align(chiral, mirrored)[1]
    assert alignment.mirror_distance < 1e-7 < alignment.distance
