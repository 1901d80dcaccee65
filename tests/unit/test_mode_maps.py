"""The use case: energies, choices, atom order, and every refusal."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from mpmath import MPContext

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.alignment import reordered
from ladderband.numerics.errors import DeadlineExceeded, DomainError
from ladderband.numerics.mode_choices import ModeChoice
from ladderband.numerics.normal_modes import FORCE_CONSTANT_CM1, normal_modes
from ladderband.numerics.transition import ORTHOGONALITY_TOLERANCE
from ladderband.numerics.units import HARTREE_CM1
from ladderband.usecases.limits import CostLimitExceeded, Limits
from ladderband.usecases.mode_maps import (
    ModeMapsQuestion,
    ModesNeedAChoice,
    MomentInput,
    mode_maps,
)
from ladderband.usecases.molecular_states import (
    GradientInput,
    HessianInput,
    ModesInput,
    StateInput,
)
from spring_molecules import BENT, LINEAR, committed_state, random_molecule, spring_hessian


def answer(initial, final, **members):
    question = ModeMapsQuestion(initial, final, **members)
    return mode_maps(question, Limits(), Deadline.none())


def springs(molecule=BENT, seed=1, energy=None, soften=()):
    """A state held by springs; ``soften``: (mode, squared wavenumber in cm^-2) to put in."""
    rng = np.random.default_rng(seed)
    hessian = spring_hessian(molecule, rng)
    if not soften:
        return StateInput(molecule, HessianInput(hessian), energy)
    modes = normal_modes(molecule, hessian)
    wavenumbers = modes.wavenumbers_cm1.copy()
    for mode, value in soften:
        wavenumbers[mode] = value
    source = ModesInput(wavenumbers, modes.vectors.T, mass_weighted=True)
    return StateInput(molecule, source, energy)


WATER = committed_state("water_neutral")
WATER_ION = committed_state("water_cation")


def test_water_energies_are_those_of_the_two_calculations():
    found = answer(WATER, WATER_ION, process="photoelectron")
    adiabatic = (WATER_ION.energy_hartree - WATER.energy_hartree) * HARTREE_CM1
    zero_points = 0.5 * (
        found.mapped.wavenumbers_final.sum() - found.mapped.wavenumbers_initial.sum()
    )
    assert found.energies.adiabatic_cm1 == pytest.approx(adiabatic)
    assert found.energies.origin_cm1 == pytest.approx(adiabatic + zero_points)
    assert found.transition.origin_cm1 == found.energies.origin_cm1
    assert found.transition.process == "photoelectron"


def test_emission_exchanges_the_states_and_keeps_the_0_0_wavenumber():
    up = answer(WATER, WATER_ION)
    down = answer(WATER_ION, WATER, process="emission")
    assert down.energies.origin_cm1 == pytest.approx(up.energies.origin_cm1)
    assert down.energies.adiabatic_cm1 == pytest.approx(up.energies.adiabatic_cm1)
    assert down.energies.vertical_cm1 < down.energies.adiabatic_cm1 < up.energies.vertical_cm1


def test_the_mixing_of_the_transition_is_orthogonal_and_its_cost_is_told():
    found = answer(committed_state("ammonia_neutral"), committed_state("ammonia_cation"))
    mixing, closure = found.transition.mixing, found.mapped.closure
    assert np.abs(mixing @ mixing.T - np.eye(6)).max() < ORTHOGONALITY_TOLERANCE
    raw = found.mapped.duschinsky
    assert closure.orthogonality == pytest.approx(np.abs(raw @ raw.T - np.eye(6)).max())
    assert closure.orthogonality > 0.05
    assert any("slightly different spaces" in warning for warning in found.warnings)


def test_large_amplitude_motion_is_warned_about():
    found = answer(committed_state("ammonia_neutral"), committed_state("ammonia_cation"))
    assert "large-amplitude" in found.notes[0]
    assert found.warnings[0].startswith("Mode 0 (1025 to 875 cm^-1) is large-amplitude")
    assert answer(WATER, WATER_ION).notes == ((), (), ())


def test_the_vertical_energy_of_the_displaced_model_is_the_computed_one():
    gradient = committed_state("water_cation_gradient")
    found = answer(WATER, gradient)
    computed = (gradient.energy_hartree - WATER.energy_hartree) * HARTREE_CM1
    assert found.energies.vertical_cm1 == pytest.approx(computed)
    assert found.energies.adiabatic_cm1 == pytest.approx(
        computed - found.energies.reorganisation_final_cm1
    )
    assert found.transition.mixing is None


def test_a_gradient_without_a_geometry_is_in_the_initial_frame():
    gradient = committed_state("water_cation_gradient")
    bare = replace(gradient, molecule=None)
    assert answer(WATER, bare).mapped.shift == pytest.approx(answer(WATER, gradient).mapped.shift)


@pytest.mark.parametrize("state", ["initial", "final"])
def test_an_imaginary_mode_is_refused_by_name_with_the_choices(state):
    odd = springs(soften=[(0, -412.0)])
    states = (odd, springs(seed=2)) if state == "initial" else (springs(seed=2), odd)
    with pytest.raises(ModesNeedAChoice, match=rf"{state} mode 0 at 412i cm\^-1") as refusal:
        answer(*states)
    assert [(m.state, m.mode) for m in refusal.value.modes] == [(state, 0)]
    assert "freeze" in str(refusal.value)
    assert "replace" in str(refusal.value)


def test_a_replaced_wavenumber_keeps_the_direction_and_the_shift():
    start, moved = springs(), replace(BENT, geometry_angstrom=BENT.geometry_angstrom * 1.02)
    odd = springs(moved, soften=[(0, -412.0)])
    found = answer(start, odd, choices=(ModeChoice("final", 0, 150.0),))
    plain = answer(start, springs(moved, soften=[(0, 300.0)]))
    k = found.mapped.final_numbers.index(0)
    assert found.mapped.wavenumbers_final[k] == 150.0
    assert found.mapped.shift == pytest.approx(plain.mapped.shift)
    assert found.all_wavenumbers_final[0] == pytest.approx(-412.0)
    assert [(m.state, m.mode) for m in found.difficult] == [("final", 0)]


def test_a_frozen_mode_is_gone_from_the_transition_and_told():
    moved = replace(BENT, geometry_angstrom=BENT.geometry_angstrom * 1.02)
    odd = springs(moved, soften=[(0, -412.0)])
    found = answer(springs(), odd, choices=(ModeChoice("final", 0),))
    assert len(found.transition.modes) == 2
    assert any("frozen" in warning for warning in found.warnings)
    assert len(found.difficult) == 1


def test_one_of_two_difficult_modes_settled_leaves_the_other_named():
    odd = springs(soften=[(0, -412.0), (1, 3.0)])
    with pytest.raises(ModesNeedAChoice) as refusal:
        answer(springs(seed=2), odd, choices=(ModeChoice("final", 0, 90.0),))
    assert [(m.state, m.mode) for m in refusal.value.modes] == [("final", 1)]


def test_choices_for_the_displaced_model_name_initial_modes():
    odd = springs(soften=[(0, -412.0)])
    gradient = StateInput(None, GradientInput(np.full(9, 1e-3)))
    with pytest.raises(ModesNeedAChoice, match="initial mode 0"):
        answer(odd, gradient)
    assert len(answer(odd, gradient, choices=(ModeChoice("initial", 0),)).transition.modes) == 2
    with pytest.raises(DomainError, match="The final state has no modes of its own"):
        answer(odd, gradient, choices=(ModeChoice("final", 0),))


def test_masses_make_an_isotopologue_from_one_hessian():
    heavy = replace(
        WATER,
        molecule=replace(WATER.molecule, masses_u=np.array([15.9949146, 2.0141018, 2.0141018])),
    )
    light, found = answer(WATER, WATER_ION), answer(heavy, WATER_ION)
    ratios = found.all_wavenumbers_final / light.all_wavenumbers_final
    assert (ratios > 0.70).all()  # between sqrt(1/2) and 1: the final state took the masses over
    assert (ratios < 0.76).all()


def swapped(state, order):
    index = [3 * a + x for a in order for x in range(3)]
    hessian = state.source.hessian[np.ix_(index, index)]
    return replace(state, molecule=reordered(state.molecule, order), source=HessianInput(hessian))


def test_another_order_of_elements_is_refused_and_matched_on_request():
    other = swapped(WATER_ION, (1, 2, 0))
    with pytest.raises(
        DomainError, match=r"O \(index 0\) of the initial state meets H \(index 0\)"
    ):
        answer(WATER, other)
    with pytest.raises(DomainError, match="do not match"):
        answer(WATER, other, atom_order="given")
    found = answer(WATER, other, atom_order="match")
    assert found.atom_order in {(2, 0, 1), (2, 1, 0)}
    assert "were put into the order" in found.warnings[0]


def test_exchanged_atoms_of_one_element_are_seen_and_kept_on_request():
    # formaldehyde's hydrogens may be exchanged by a half turn; methanal-like chain: no symmetry
    chain = replace(
        BENT,
        atomic_numbers=(1, 6, 6, 1),
        geometry_angstrom=np.array([[0, 0.9, 0], [0.0, 0, 0], [1.3, 0, 0], [2.2, 0.3, 0.9]]),
        masses_u=np.array([1.0, 12.0, 12.0, 1.0]),
    )
    initial, final = springs(chain), swapped(springs(chain), (0, 1, 2, 3))
    crossed = swapped(final, (0, 2, 1, 3))
    with pytest.raises(DomainError, match=r"in another order. The order \[0, 2, 1, 3\] fits"):
        answer(initial, crossed)
    found = answer(initial, crossed, atom_order="match")
    assert found.mapped.huang_rhys == pytest.approx(0.0, abs=1e-12)


def test_a_mirrored_geometry_is_warned_about():
    chain = replace(
        BENT,
        atomic_numbers=(1, 8, 7, 9),
        geometry_angstrom=np.array([[0, 0.9, 0], [0.0, 0, 0], [1.3, 0, 0], [1.6, 0.3, 0.9]]),
        masses_u=np.array([1.0, 16.0, 14.0, 19.0]),
    )
    mirrored = replace(chain, geometry_angstrom=chain.geometry_angstrom * [1, 1, -1])
    found = answer(springs(chain), springs(mirrored))
    assert any("mirror image" in warning for warning in found.warnings)


BAD = {
    "not one molecule": (
        springs(), springs(LINEAR), {}, r"O H2 in the initial|H2 O in the initial"),
    "gradient as initial": (
        replace(springs(), source=GradientInput(np.ones(9))), springs(), {}, "initial state needs"),
    "gradient of another size": (
        springs(), StateInput(None, GradientInput(np.ones(6))), {}, "6 numbers; 3 atoms need 9"),
    "gradient at another geometry": (
        springs(),
        StateInput(replace(BENT, geometry_angstrom=BENT.geometry_angstrom * 1.05),
                   GradientInput(np.ones(9))),
        {}, "another geometry"),
    "no final geometry": (
        springs(), replace(springs(), molecule=None), {}, "needs a geometry"),
    "masses that differ": (
        springs(),
        replace(springs(), masses_given=True,
                molecule=replace(BENT, masses_u=BENT.masses_u * [1, 2, 1])),
        {}, r"H \(index 1\) weighs"),
    "final below initial": (
        springs(energy=0.0), springs(energy=-0.1), {}, "must lie below the final"),
    "moment of another size": (
        springs(), springs(),
        {"moment": MomentInput(np.zeros(3), np.zeros((6, 3)))}, "need 9 x 3"),
    "linear and bent": (springs(LINEAR), springs(
        replace(LINEAR, geometry_angstrom=LINEAR.geometry_angstrom + np.eye(3) * [0.2, 0, 0])),
        {}, "a linear and a bent geometry"),
    "Hessian of the wrong size": (
        springs(), replace(springs(), source=HessianInput(np.eye(6))), {}, "need 9 x 9"),
}  # fmt: skip


@pytest.mark.parametrize("case", BAD)
def test_bad_input_is_refused_with_a_sentence(case):
    initial, final, members, says = BAD[case]
    with pytest.raises(DomainError, match=says) as refusal:
        answer(initial, final, **members)
    assert refusal.value.pointer.startswith("/")


def test_dipole_derivatives_that_do_not_cancel_are_asked_about():
    drifting = MomentInput(np.array([0.0, 0.0, 1.0]), np.eye(9)[:, :3])
    cancelling = np.vstack([np.eye(3), -np.eye(3), np.zeros((3, 3))])
    assert any("shifted" in text for text in answer(springs(), springs(), moment=drifting).warnings)
    fine = answer(springs(), springs(), moment=MomentInput(np.ones(3), cancelling))
    assert not any("shifted" in text for text in fine.warnings)


def test_a_displacement_no_band_can_take_is_told():
    pull = StateInput(None, GradientInput(np.array([0.0, 0, 0, 0, 0, 9, 0, 0, -9])))
    assert any(
        "no line list or band takes this" in text for text in answer(springs(), pull).warnings
    )


def test_the_origin_can_be_sent_instead_of_energies():
    found = answer(springs(), springs(seed=2), origin_cm1=12345.0)
    assert found.transition.origin_cm1 == 12345.0
    bare = answer(springs(), springs(seed=2))
    assert bare.transition.origin_cm1 == 0.0
    assert any("No energies" in warning for warning in bare.warnings)


def test_limits_are_asked_before_the_work():
    question = ModeMapsQuestion(springs(), springs())
    with pytest.raises(CostLimitExceeded):
        mode_maps(question, Limits(work_s=1e-6), Deadline.none())
    with pytest.raises(DeadlineExceeded):
        mode_maps(question, Limits(), Deadline(0.0))


def test_the_accuracy_is_an_estimate_and_says_so():
    accuracy = answer(WATER, WATER_ION).accuracy
    assert accuracy.evidence == "estimated"
    assert 0.0 < accuracy.bound < 1e-4


def fifty_digit_wavenumbers(molecule, hessian):
    """The same modes by mpmath with 50 digits: explicit projector, then eigsy."""
    ctx = MPContext()  # private: mpmath's own precision is shared by the whole process
    ctx.dps = 50
    n = molecule.n_atoms
    masses = [ctx.mpf(m) for m in molecule.masses_u]
    place = [[ctx.mpf(x) for x in row] for row in molecule.geometry_angstrom]
    total = sum(masses)
    centre = [sum(masses[a] * place[a][x] for a in range(n)) / total for x in range(3)]
    motions = []
    for x in range(3):
        motions.append([ctx.sqrt(masses[a]) * (y == x) for a in range(n) for y in range(3)])
        p, q = (x + 1) % 3, (x + 2) % 3
        turn = []
        for a in range(n):
            r = [place[a][y] - centre[y] for y in range(3)]
            moved = [ctx.mpf(0)] * 3
            moved[p], moved[q] = -r[q], r[p]
            turn += [ctx.sqrt(masses[a]) * y for y in moved]
        motions.append(turn)
    basis = []
    for vector in motions:
        for other in basis:
            along = ctx.fdot(vector, other)
            vector = [v - along * o for v, o in zip(vector, other, strict=True)]
        length = ctx.sqrt(ctx.fdot(vector, vector))
        basis.append([v / length for v in vector])
    size = 3 * n
    projector = ctx.eye(size) - sum(
        (ctx.matrix(b) * ctx.matrix(b).T for b in basis), ctx.zeros(size)
    )
    weighted = ctx.matrix(size, size)
    for i in range(size):
        for j in range(size):
            weighted[i, j] = ctx.mpf(hessian[i, j]) / ctx.sqrt(masses[i // 3] * masses[j // 3])
    values = ctx.eigsy(projector * weighted * projector, eigvals_only=True)
    kept = sorted(values)[6:] if min(values) > -1e-30 else sorted(values, key=abs)[6:]
    return np.sort([float(FORCE_CONSTANT_CM1 * ctx.sqrt(v)) for v in kept])


@pytest.mark.parametrize("stiffening", [1.0, 1e-3], ids=["ordinary", "soft"])
def test_the_stated_accuracy_holds_against_fifty_digits(stiffening):
    molecule = random_molecule(np.random.default_rng(3), 5)
    hessian = spring_hessian(molecule, np.random.default_rng(4))
    rigid = replace(molecule, masses_u=np.ones(5)).rigid_motions
    hessian -= (1.0 - stiffening) * 0.03 * (np.eye(15) - rigid @ rigid.T)
    hessian = 0.5 * (hessian + hessian.T)
    state = StateInput(molecule, HessianInput(hessian))
    found = answer(state, state)
    exact = fifty_digit_wavenumbers(molecule, hessian)
    error = np.abs(found.all_wavenumbers_initial - exact).max()
    assert error < found.accuracy.bound - 3e-10 * exact.max()  # its rounding part alone
