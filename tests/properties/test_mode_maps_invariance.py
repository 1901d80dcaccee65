"""What must not change an intensity: the frame, the order of atoms, signs of modes.

Two observables are compared: the correlation function of the cold band at complex times, which
holds every line's position and weight at once and does not depend on how degenerate modes are
chosen, and the list of single lines up to two quanta. Both are evaluated here from the agreed
formulas (Gaussian integral; Mehler kernel), not by the service.
"""

from __future__ import annotations

from dataclasses import replace
from itertools import permutations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.alignment import align, distance, reordered
from ladderband.numerics.generator import transition_generator
from ladderband.numerics.normal_modes import normal_modes
from ladderband.usecases.limits import Limits
from ladderband.usecases.mode_maps import ModeMapsQuestion, MomentInput, mode_maps
from ladderband.usecases.molecular_states import HessianInput, ModesInput, StateInput
from spring_molecules import committed_state, random_molecule, spring_hessian

PAIRS = {
    "water": ("water_neutral", "water_cation"),
    "ammonia": ("ammonia_neutral", "ammonia_cation"),
}
TIMES = np.array([2e-5, 3e-4, 1e-3 - 1e-3j, 4e-3])  # cm; hbar = 1


def answer(initial, final, **members):
    return mode_maps(ModeMapsQuestion(initial, final, **members), Limits(), Deadline.none())


def correlation(transition):
    """sum over n of |S(0, n)|^2 exp(-i t sum n f) at TIMES."""
    generator = transition_generator(transition)
    n = generator.n_modes
    W, w, f = generator.W[n:, n:], generator.w[n:], transition.wavenumbers_final
    values = []
    for t in TIMES:
        e = np.exp(-1j * f * t)
        A, B, a, b = W, W * np.outer(e, e), w, w * e
        z = np.linalg.solve(np.eye(n) - A @ B, A @ b + a)
        zbar = np.linalg.solve(np.eye(n) - B @ A, B @ a + b)
        roots = np.prod(np.sqrt(np.linalg.eigvals(np.eye(n) - A @ B)))
        values.append(np.exp(2 * generator.log_c + 0.5 * (a @ zbar + b @ z)) / roots)
    return np.array(values)


def lines(transition):
    """(positions, intensities) of final levels with 0, 1 and 2 quanta, sorted."""
    generator = transition_generator(transition)
    n = generator.n_modes
    W, w, f = generator.W[n:, n:], generator.w[n:], transition.wavenumbers_final
    c2 = np.exp(2.0 * generator.log_c)
    found = [(0.0, c2)]
    found += [(f[i], c2 * w[i] ** 2) for i in range(n)]
    for i in range(n):
        for j in range(i + 1):
            amplitude = w[i] * w[j] + W[i, j]
            found.append((f[i] + f[j], c2 * amplitude**2 / (2.0 if i == j else 1.0)))
    return np.array(sorted(found))


def same_band(one, other, tolerance=1e-10):
    """Both observables agree, relative to the whole intensity of 1."""
    assert correlation(other) == pytest.approx(correlation(one), abs=tolerance)


def moved(state, rng):
    """The state in another frame: turned, shifted."""
    turn = Rotation.random(random_state=rng).as_matrix()
    geometry = state.molecule.geometry_angstrom @ turn.T + rng.normal(size=3)
    blocks = np.kron(np.eye(state.molecule.n_atoms), turn)
    return replace(
        state,
        molecule=replace(state.molecule, geometry_angstrom=geometry),
        source=HessianInput(blocks @ state.source.hessian @ blocks.T),
    ), turn


def shuffled(state, order):
    index = [3 * a + x for a in order for x in range(3)]
    hessian = state.source.hessian[np.ix_(index, index)]
    return replace(state, molecule=reordered(state.molecule, order), source=HessianInput(hessian))


def only_order_that_fits(reference, moving):
    """Every other order of equal atoms lies farther by 0.15 angstrom: nothing to choose between."""
    numbers, as_given = moving.atomic_numbers, tuple(range(moving.n_atoms))
    best = distance(reference, align(reference, moving)[0])
    return all(
        distance(reference, align(reference, reordered(moving, order))[0]) > best + 0.15
        for order in permutations(as_given)
        if order != as_given and tuple(numbers[k] for k in order) == numbers
    )


@st.composite
def invented_pairs(draw):
    """Two spring states of one invented molecule of 3 to 5 atoms, slightly apart."""
    seed = draw(st.integers(0, 10_000))
    rng = np.random.default_rng(seed)
    molecule = random_molecule(rng, draw(st.integers(3, 5)))
    initial = StateInput(molecule, HessianInput(spring_hessian(molecule, rng)), 0.0)
    geometry = molecule.geometry_angstrom + 0.03 * rng.normal(size=molecule.geometry_angstrom.shape)
    other = replace(molecule, geometry_angstrom=geometry)
    return initial, StateInput(other, HessianInput(spring_hessian(other, rng)), 0.1), rng


@pytest.mark.parametrize("pair", PAIRS)
@pytest.mark.parametrize("which", ["initial", "final"])
def test_turning_and_shifting_a_computed_state_changes_nothing(pair, which):
    states = [committed_state(name) for name in PAIRS[pair]]
    plain = answer(*states).transition
    index = ("initial", "final").index(which)
    states[index], _ = moved(states[index], np.random.default_rng(4))
    same_band(plain, answer(*states).transition)


@given(invented_pairs())
@settings(max_examples=25, deadline=None)
def test_turning_and_shifting_both_states_changes_no_line(pair):
    initial, final, rng = pair
    plain = answer(initial, final).transition
    other = answer(moved(initial, rng)[0], moved(final, rng)[0]).transition
    same_band(plain, other)
    assert lines(other) == pytest.approx(lines(plain), abs=1e-9)


@given(invented_pairs())
@settings(max_examples=25, deadline=None)
def test_reordering_the_final_atoms_changes_no_line(pair):
    initial, final, rng = pair
    assume(only_order_that_fits(initial.molecule, final.molecule))
    plain = answer(initial, final, atom_order="match").transition
    order = tuple(int(k) for k in rng.permutation(final.molecule.n_atoms))
    other = answer(initial, shuffled(final, order), atom_order="match").transition
    same_band(plain, other)
    assert lines(other) == pytest.approx(lines(plain), abs=1e-9)


@given(invented_pairs())
@settings(max_examples=25, deadline=None)
def test_signs_and_order_of_given_modes_change_no_line(pair):
    initial, final, rng = pair
    plain = answer(initial, final).transition
    given_as_modes = []
    for state in (initial, final):
        modes = normal_modes(state.molecule, state.source.hessian)
        order = rng.permutation(len(modes.wavenumbers_cm1))
        lengths = rng.choice([-2.0, -1.0, 1.0, 3.0], len(order))
        cartesian = modes.vectors / state.molecule.root_masses[:, None] * lengths
        source = ModesInput(modes.wavenumbers_cm1[order], cartesian.T[order])
        given_as_modes.append(replace(state, source=source))
    other = answer(*given_as_modes).transition
    same_band(plain, other)
    assert lines(other) == pytest.approx(lines(plain), abs=1e-9)


@given(invented_pairs())
@settings(max_examples=15, deadline=None)
def test_a_moment_turns_with_its_frame(pair):
    initial, final, rng = pair
    size = 3 * initial.molecule.n_atoms
    constant, slopes = rng.normal(size=3), rng.normal(size=(size, 3))
    plain = answer(initial, final, moment=MomentInput(constant, slopes)).transition.moment
    turned, turn = moved(initial, rng)
    blocks = np.kron(np.eye(initial.molecule.n_atoms), turn)
    moment = MomentInput(turn @ constant, blocks @ slopes @ turn.T)
    other = answer(turned, final, moment=moment).transition.moment
    lengths = [np.linalg.norm(m.slopes_debye, axis=1) for m in (plain, other)]
    assert lengths[1] == pytest.approx(lengths[0], abs=1e-10)
    along = [m.slopes_debye @ m.constant_debye for m in (plain, other)]
    assert np.abs(along[1]) == pytest.approx(np.abs(along[0]), abs=1e-10)


@pytest.mark.parametrize("pair", PAIRS)
def test_heavier_atoms_do_change_the_band(pair):
    initial, final = (committed_state(name) for name in PAIRS[pair])
    masses = initial.molecule.masses_u * 1.5
    heavy = replace(initial, molecule=replace(initial.molecule, masses_u=masses))
    difference = correlation(answer(heavy, final).transition) - correlation(
        answer(initial, final).transition
    )
    assert np.abs(difference).max() > 1e-3
