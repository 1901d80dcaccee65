"""J, K, Huang-Rhys factors, moments and mode choices, against closed forms and the definition."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from ladderband.numerics.errors import DomainError
from ladderband.numerics.mode_choices import ModeChoice, check_choices, difficult_modes, with_frozen
from ladderband.numerics.mode_map import (
    HarmonicState,
    displacements,
    map_gradient,
    map_modes,
    moment_of_modes,
)
from ladderband.numerics.normal_modes import FORCE_CONSTANT_CM1, normal_modes
from ladderband.numerics.units import BOHR_ANGSTROM, HARTREE_CM1
from spring_molecules import BENT, LINEAR, random_molecule, spring_hessian

SEED = 17


def state(molecule, seed=SEED, scale=1.0):
    rng = np.random.default_rng(seed)
    return HarmonicState(molecule, normal_modes(molecule, scale * spring_hessian(molecule, rng)))


def displaced(molecule, along):
    """The molecule moved by mass-weighted ``along`` (3N,) in angstrom sqrt(u)."""
    step = (along / molecule.root_masses).reshape(-1, 3)
    return replace(molecule, geometry_angstrom=molecule.geometry_angstrom + step)


@pytest.mark.parametrize("molecule", [BENT, LINEAR, random_molecule(np.random.default_rng(2), 6)],
                         ids=["3", "linear", "6"])  # fmt: skip
def test_a_state_with_itself_gives_the_identity_and_no_shift(molecule):
    mapped = map_modes(state(molecule), state(molecule))
    assert mapped.duschinsky == pytest.approx(np.eye(molecule.n_vibrations), abs=1e-12)
    assert mapped.shift == pytest.approx(0.0, abs=1e-12)
    assert mapped.closure.orthogonality < 1e-12


def test_a_geometry_moved_along_one_mode_gives_that_shift_with_its_sign():
    # final minimum at Q = +0.2 along mode 1: Q' = Q - 0.2, so K = -0.2 (agreed sign of K)
    start = state(BENT)
    moved = displaced(BENT, 0.2 * start.modes.vectors[:, 1])
    mapped = map_modes(start, replace(start, molecule=moved))
    assert mapped.shift == pytest.approx([0.0, -0.2, 0.0], abs=1e-12)
    assert mapped.displacement == pytest.approx(
        displacements(mapped.shift, mapped.wavenumbers_final)
    )


@pytest.mark.parametrize("seed", range(3))
def test_j_and_k_carry_a_cartesian_point_from_one_state_to_the_other(seed):
    rng = np.random.default_rng(seed)
    molecule = random_molecule(rng, 5)
    start = state(molecule)
    end = state(displaced(molecule, 0.05 * start.modes.vectors @ rng.normal(size=9)), seed + 50)
    mapped = map_modes(start, end)
    q = rng.normal(size=9)
    point = molecule.weighted + start.modes.vectors @ q
    expected = mapped.vectors_final.T @ (point - end.molecule.weighted)
    assert mapped.duschinsky @ q + mapped.shift == pytest.approx(expected, abs=1e-10)
    assert (np.diag(mapped.duschinsky) >= 0.0).all()
    assert sorted(mapped.final_numbers) == list(range(9))


def test_reorganisation_is_the_final_surface_at_the_initial_geometry():
    start = state(BENT)
    moved = displaced(BENT, start.modes.vectors @ np.array([0.1, -0.05, 0.02]))
    rng = np.random.default_rng(8)
    hessian = spring_hessian(moved, rng)
    mapped = map_modes(start, HarmonicState(moved, normal_modes(moved, hessian)))
    # the difference in bohr, without its rigid part (this test moves the atoms along pure modes of
    # the initial geometry, whose rigid part at the final one is not quite zero)
    difference = BENT.weighted - moved.weighted
    rigid = moved.rigid_motions
    difference = (difference - rigid @ (rigid.T @ difference)) / BENT.root_masses
    difference /= float(BOHR_ANGSTROM)
    expected = 0.5 * float(difference @ hessian @ difference) * HARTREE_CM1
    assert mapped.reorganisation_final_cm1.sum() == pytest.approx(expected, rel=1e-8)


def test_the_gradient_of_a_shifted_surface_gives_its_shift():
    rng = np.random.default_rng(SEED)
    hessian = spring_hessian(BENT, rng)
    start = HarmonicState(BENT, normal_modes(BENT, hessian))
    shift = np.array([0.1, -0.07, 0.03])
    minimum = start.modes.vectors @ -shift / BENT.root_masses / float(BOHR_ANGSTROM)
    mapped = map_gradient(start, hessian @ -minimum)  # H (x_i - x_f), x_i at 0
    assert mapped.shift == pytest.approx(shift, abs=1e-10)
    assert mapped.closure.displacement_outside < 1e-12
    moved = displaced(BENT, start.modes.vectors @ -shift)
    assert map_modes(start, replace(start, molecule=moved)).shift == pytest.approx(shift)


def test_a_gradient_that_pulls_the_molecule_along_is_counted_as_outside():
    start = state(BENT)
    pull = BENT.root_masses * BENT.rigid_motions[:, 0]
    assert map_gradient(start, 0.01 * pull).closure.displacement_outside == pytest.approx(1.0)


def test_the_initial_side_reorganisation_is_that_of_the_exchanged_pair_for_orthogonal_j():
    start = state(BENT)
    end = HarmonicState(displaced(BENT, 0.1 * start.modes.vectors[:, 0]), state(BENT, 4).modes)
    there, back = map_modes(start, end), map_modes(end, start)
    assert there.reorganisation_initial_cm1.sum() == pytest.approx(
        back.reorganisation_final_cm1.sum(), rel=1e-9
    )


def test_states_with_another_number_of_vibrations_are_refused():
    shift = np.eye(3) * [0.5, 0.0, 0.0]
    bent = replace(LINEAR, geometry_angstrom=LINEAR.geometry_angstrom + shift)
    with pytest.raises(DomainError, match="initial state has 4 vibrations, the final state 3"):
        map_modes(state(LINEAR), state(bent))


def test_moment_slopes_equal_finite_differences_along_the_dimensionless_coordinates():
    start = state(BENT)
    end = state(displaced(BENT, 0.05 * start.modes.vectors[:, 0]), 9)
    mapped = map_modes(start, end)
    rng = np.random.default_rng(1)
    constant, slopes = rng.normal(size=3), rng.normal(size=(9, 3))
    moment = moment_of_modes(mapped, BENT.root_masses, constant, slopes)
    for k in range(3):
        length = 1.0 / displacements(np.ones(1), mapped.wavenumbers_initial[k : k + 1])[0]
        step = length * start.modes.vectors[:, k] / BENT.root_masses  # angstrom for q_k = 1
        assert moment.slopes_debye[k] == pytest.approx(step @ slopes)
    assert moment.constant_debye == pytest.approx(constant)


def test_a_moment_given_at_the_final_geometry_is_the_same_function():
    # a linear moment without rigid part, written at either geometry, is one function of position
    start = state(BENT)
    mapped = map_modes(
        start, replace(start, molecule=displaced(BENT, 0.1 * start.modes.vectors[:, 1]))
    )
    rng = np.random.default_rng(2)
    per_mode = rng.normal(size=(3, 3))
    slopes = BENT.root_masses[:, None] * (start.modes.vectors @ per_mode)
    at_initial = np.array([0.3, 0.0, -1.0])
    at_final = at_initial - mapped.shift @ per_mode  # Q = -K at the final minimum
    one = moment_of_modes(mapped, BENT.root_masses, at_initial, slopes)
    other = moment_of_modes(mapped, BENT.root_masses, at_final, slopes, at_final=True)
    assert other.constant_debye == pytest.approx(one.constant_debye)
    assert other.slopes_debye == pytest.approx(one.slopes_debye)


def test_freezing_takes_the_motion_out_of_both_states():
    start, end = state(BENT), state(BENT, 4)
    first, second = with_frozen(start, end, (ModeChoice("initial", 0),))
    held = start.modes.vectors[:, 0]
    assert first.modes.wavenumbers_cm1 == pytest.approx(start.modes.wavenumbers_cm1[1:])
    assert np.abs(held @ second.modes.vectors).max() < 1e-12
    # held by hand: scipy-free diagonalisation in the complement
    weighted = end.modes.weighted_hessian
    free = np.eye(9) - np.outer(held, held)
    values = np.linalg.eigvalsh(free @ weighted @ free)[-2:]
    assert second.modes.wavenumbers_cm1 == pytest.approx(np.sqrt(values))
    assert map_modes(first, second).closure.orthogonality < 1e-10


def test_freezing_one_motion_in_both_states_takes_out_one_motion():
    start, end = state(BENT), state(BENT, SEED, 0.7)
    choices = (ModeChoice("initial", 0), ModeChoice("final", 0))
    first, second = with_frozen(start, end, choices)
    assert first.modes.vectors.shape == second.modes.vectors.shape == (9, 2)


def test_bends_frozen_in_a_linear_state_join_it_to_a_bent_one():
    bent = replace(LINEAR, geometry_angstrom=LINEAR.geometry_angstrom + np.eye(3) * [0.3, 0.0, 0.0])
    start, end = state(bent), state(LINEAR)
    bend = int(np.argmin(start.modes.wavenumbers_cm1))
    bends = [k for k in range(4) if np.abs(end.modes.vectors[[2, 5, 8], k]).max() < 1e-6]
    assert len(bends) == 2
    choices = (ModeChoice("initial", bend), *(ModeChoice("final", k) for k in bends))
    first, second = with_frozen(start, end, choices)
    assert map_modes(first, second).shift.shape == (2,)


def test_difficult_modes_are_named_by_state_and_number():
    modes = state(BENT).modes
    odd = replace(modes, wavenumbers_cm1=np.array([-300.0, 4.0, 1500.0]))
    assert [(m.state, m.mode, m.wavenumber_cm1) for m in difficult_modes(odd, "final")] == [
        ("final", 0, -300.0),
        ("final", 1, 4.0),
    ]


@pytest.mark.parametrize(
    ("choices", "says"),
    [
        ((ModeChoice("final", 3),), "modes 0 to 2; there is no mode 3"),
        ((ModeChoice("final", 1), ModeChoice("final", 1, 100.0)), "named twice"),
    ],
    ids=["no such mode", "twice"],
)
def test_choices_for_modes_that_are_not_there_are_refused(choices, says):
    with pytest.raises(DomainError, match=says):
        check_choices(choices, {"initial": 3, "final": 3})


def test_freezing_everything_is_refused():
    choices = tuple(ModeChoice("initial", k) for k in range(3))
    with pytest.raises(DomainError, match="nothing is left"):
        with_frozen(state(BENT), state(BENT), choices)


def test_force_constant_unit_is_that_of_the_constants():
    # sqrt(hartree / u) / bohr / (2 pi c) from memory: 5140.487 cm^-1 (CODATA)
    assert pytest.approx(5140.4871, abs=1e-3) == FORCE_CONSTANT_CM1
