"""From two electronic-structure results to a transition: modes, mixing, shifts, energies."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderband.numerics.accuracy import Accuracy, Deadline
from ladderband.numerics.alignment import Alignment
from ladderband.numerics.errors import DomainError
from ladderband.numerics.mode_choices import (
    DifficultMode,
    ModeChoice,
    StateName,
    check_choices,
    difficult_modes,
    with_frozen,
    with_replacements,
)
from ladderband.numerics.mode_map import (
    HarmonicState,
    ModeMap,
    map_gradient,
    map_modes,
    moment_of_modes,
)
from ladderband.numerics.normal_modes import NormalModes
from ladderband.numerics.transition import Floats, Moment, Process, Transition
from ladderband.numerics.units import HARTREE_CM1
from ladderband.usecases.limits import Limits, UseCaseError
from ladderband.usecases.molecular_states import (
    AtomOrder,
    Placed,
    StateInput,
    coordinate_index,
    harmonic_state,
    placed_final,
)

MAX_ATOMS = 130
"""Their 384 modes are within what a transition takes."""

SOFT_CM1 = 100.0
LARGE_MOVE_ANGSTROM = 0.25
LARGE_RATIO = 2.0
"""Marks of a motion for which rectilinear harmonic coordinates are doubtful (common practice)."""

ORTHOGONALITY_MENTIONED = 0.01
OUTSIDE_MENTIONED = 0.01
DRIFT_MENTIONED = 0.05
"""Share of a dipole's derivatives that a shift of the whole molecule may carry before it is told."""


SENT_ON_DISPLACEMENT = 63.25
SENT_ON_RATIO = 50.0
"""What the resources that take a transition accept: S up to 2000, f/g from 1/50 to 50."""


class ModesNeedAChoice(UseCaseError):
    """Modes without an oscillator, and no word from the client on what to do with them."""

    def __init__(self, modes: tuple[DifficultMode, ...]) -> None:
        named = "; ".join(
            f"{m.state} mode {m.mode} at {abs(m.wavenumber_cm1):.4g}"
            f"{'i' if m.wavenumber_cm1 < 0.0 else ''} cm^-1"
            for m in modes
        )
        super().__init__(
            f"These modes have no harmonic oscillator: {named}. Send mode_choices with one entry "
            'for each: {"state": ..., "mode": ..., "action": "freeze"} holds the motion still in '
            'both states, {..., "action": "replace", "wavenumber_cm1": ...} gives it a wavenumber.'
        )
        self.modes = modes


@dataclass(frozen=True)
class MomentInput:
    """Transition dipole (3,) in debye and its derivatives (3N, 3) in debye per angstrom.

    Both at the geometry, in the frame and in the atom order of the state ``at_final`` names.
    """

    constant_debye: Floats
    derivatives: Floats | None = None
    at_final: bool = False


@dataclass(frozen=True)
class ModeMapsQuestion:
    """Two states and what to do where they leave a choice.

    ``origin_cm1`` replaces the 0-0 wavenumber that the energies give. ``vectors``: the client wants
    the modes' vectors as well.
    """

    initial: StateInput
    final: StateInput
    process: Process = "absorption"
    temperature_k: float = 0.0
    origin_cm1: float | None = None
    atom_order: AtomOrder = "check"
    choices: tuple[ModeChoice, ...] = ()
    moment: MomentInput | None = None
    vectors: bool = False


@dataclass(frozen=True)
class Energies:
    """Wavenumbers in cm^-1 of the light (positive in the direction of the process).

    ``adiabatic_cm1`` minimum to minimum, ``vertical_cm1`` at the initial minimum on the harmonic
    final surface, ``origin_cm1`` 0-0; None without energies. Zero points are of the modes kept.
    """

    zero_point_initial_cm1: float
    zero_point_final_cm1: float
    reorganisation_initial_cm1: float
    reorganisation_final_cm1: float
    adiabatic_cm1: float | None
    vertical_cm1: float | None
    origin_cm1: float | None


@dataclass(frozen=True)
class ModeMapsAnswer:
    """The transition and everything it was made from.

    ``all_wavenumbers_*`` are those of the states as given, before any choice; ``alignment`` is
    None for a gradient in the initial frame. ``vectors`` of ``mapped`` are mass-weighted, in the
    initial frame.
    """

    transition: Transition
    mapped: ModeMap
    energies: Energies
    all_wavenumbers_initial: Floats
    all_wavenumbers_final: Floats
    difficult: tuple[DifficultMode, ...]
    alignment: Alignment | None
    atom_order: tuple[int, ...]
    notes: tuple[tuple[str, ...], ...]
    accuracy: Accuracy
    warnings: tuple[str, ...] = ()


def estimate_seconds(question: ModeMapsQuestion) -> float:
    """Estimated seconds of work, without doing any (fitted on 3 to 130 atoms)."""
    molecule = question.initial.molecule
    size = 3 * molecule.n_atoms if molecule else 0
    return 2e-3 + 1.2e-8 * size**3


def mode_maps(question: ModeMapsQuestion, limits: Limits, deadline: Deadline) -> ModeMapsAnswer:
    """Answer one question.

    Raises
    ------
    ModesNeedAChoice
        A mode is imaginary or nearly so and ``choices`` do not settle it.
    DomainError
        The input is wrong, with the pointer of the member.
    CostLimitExceeded, DeadlineExceeded
        As :func:`ladderband.usecases.overlaps.overlaps`.
    """
    limits.admit(estimate_seconds(question), f"At most about {MAX_ATOMS} atoms fit.")
    initial, warnings = harmonic_state(question.initial, "/initial")
    placed = placed_final(initial.molecule, question.final, question.atom_order)
    warnings += placed.warnings
    deadline.check()
    difficult = _difficult(initial, placed)
    mapped = _mapped(question, initial, placed, difficult)
    deadline.check()
    energies = _energies(question, mapped)
    notes = tuple(_notes(mapped, k) for k in range(len(mapped.shift)))
    transition = Transition(
        mapped.modes,
        question.process,
        energies.origin_cm1 or 0.0,
        question.temperature_k,
        None if placed.state is None else mapped.mixing,
        _moment(question, initial, placed, mapped),
    )
    warnings += _warnings(question, mapped, energies, notes)
    final_modes = initial.modes if placed.state is None else placed.state.modes
    return ModeMapsAnswer(
        transition,
        mapped,
        energies,
        initial.modes.wavenumbers_cm1,
        final_modes.wavenumbers_cm1,
        difficult,
        placed.alignment,
        placed.order,
        notes,
        _accuracy(initial.modes, final_modes, mapped),
        tuple(warnings),
    )


def _difficult(initial: HarmonicState, placed: Placed) -> tuple[DifficultMode, ...]:
    found = difficult_modes(initial.modes, "initial")
    if placed.state is not None:
        found += difficult_modes(placed.state.modes, "final")
    return tuple(found)


def _mapped(
    question: ModeMapsQuestion,
    initial: HarmonicState,
    placed: Placed,
    difficult: tuple[DifficultMode, ...],
) -> ModeMap:
    """Apply the choices and relate the states; the displaced model has one set of modes."""
    final = placed.state or initial
    counts: dict[StateName, int] = {
        "initial": len(initial.modes.wavenumbers_cm1),
        "final": len(placed.state.modes.wavenumbers_cm1) if placed.state else 0,
    }
    check_choices(question.choices, counts)
    start = HarmonicState(
        initial.molecule, with_replacements(initial.modes, "initial", question.choices)
    )
    if placed.gradient is not None:
        start, _ = with_frozen(start, start, question.choices)
        _settled(start, start, question.choices, difficult)
        return map_gradient(start, placed.gradient)
    end = HarmonicState(final.molecule, with_replacements(final.modes, "final", question.choices))
    start, end = with_frozen(start, end, question.choices)
    _settled(start, end, question.choices, difficult)
    return map_modes(start, end)


def _settled(
    initial: HarmonicState,
    final: HarmonicState,
    choices: tuple[ModeChoice, ...],
    difficult: tuple[DifficultMode, ...],
) -> None:
    """Refuse while a mode without an oscillator is left.

    Named are the modes as numbered before any choice; one that only appears once another motion is
    held still keeps its number among those that are left.
    """
    if not difficult_modes(initial.modes, "initial") + difficult_modes(final.modes, "final"):
        return
    chosen = {(choice.state, choice.mode) for choice in choices}
    open_ = tuple(mode for mode in difficult if (mode.state, mode.mode) not in chosen)
    left = difficult_modes(initial.modes, "initial") + difficult_modes(final.modes, "final")
    raise ModesNeedAChoice(open_ or tuple(left))


def _energies(question: ModeMapsQuestion, mapped: ModeMap) -> Energies:
    sign = -1.0 if question.process == "emission" else 1.0
    zero_initial = 0.5 * float(mapped.wavenumbers_initial.sum())
    zero_final = 0.5 * float(mapped.wavenumbers_final.sum())
    on_initial = float(mapped.reorganisation_initial_cm1.sum())
    on_final = float(mapped.reorganisation_final_cm1.sum())
    start, end = question.initial.energy_hartree, question.final.energy_hartree
    adiabatic = vertical = origin = None
    if start is not None and end is not None:
        minimum = (end - start) * HARTREE_CM1
        if question.final.is_gradient:
            minimum -= on_final  # the energy given is the vertical one
        adiabatic, vertical = sign * minimum, sign * (minimum + on_final)
        origin = sign * (minimum + zero_final - zero_initial)
    if question.origin_cm1 is not None:
        origin = question.origin_cm1
    elif origin is not None and origin < 0.0:
        raise DomainError(
            f"The 0-0 wavenumber comes out as {origin:.6g} cm^-1: for {question.process} the "
            f"initial state must lie {'above' if sign < 0 else 'below'} the final. Exchange the "
            "states, change the process, or send origin_cm1.",
            "/process",
        )
    return Energies(zero_initial, zero_final, on_initial, on_final, adiabatic, vertical, origin)


def _moment(
    question: ModeMapsQuestion, initial: HarmonicState, placed: Placed, mapped: ModeMap
) -> Moment | None:
    """The moment in the initial frame and along the initial modes."""
    given, n = question.moment, initial.molecule.n_atoms
    if given is None:
        return None
    constant = given.constant_debye
    derivatives = np.zeros((3 * n, 3)) if given.derivatives is None else given.derivatives
    if derivatives.shape != (3 * n, 3):
        raise DomainError(
            f"The derivatives of the transition dipole have shape "
            f"{' x '.join(map(str, derivatives.shape))}; {n} atoms need {3 * n} x 3 (row: the "
            "coordinate moved, column: component of the dipole).",
            "/transition_dipole/derivatives_debye_angstrom",
        )
    if given.at_final:
        rotation = placed.rotation
        parts = derivatives[coordinate_index(placed.order)].reshape(n, 3, 3)
        derivatives = np.einsum("xy,ayd,ed->axe", rotation, parts, rotation).reshape(3 * n, 3)
        constant = rotation @ constant
    return moment_of_modes(
        mapped, initial.molecule.root_masses, constant, derivatives, at_final=given.at_final
    )


def _notes(mapped: ModeMap, k: int) -> tuple[str, ...]:
    """Why pair k deserves a second look; empty for an ordinary one."""
    notes = []
    g, f = float(mapped.wavenumbers_initial[k]), float(mapped.wavenumbers_final[k])
    if min(g, f) < SOFT_CM1:
        notes.append("soft")
    if mapped.largest_move_angstrom[k] > LARGE_MOVE_ANGSTROM:
        notes.append("large-amplitude")
    if not 1.0 / LARGE_RATIO < f / g < LARGE_RATIO:
        notes.append("wavenumber-changes-much")
    if mapped.pair_overlaps[k] < 0.5:
        notes.append("no-clear-partner")
    return tuple(notes)


def _warnings(
    question: ModeMapsQuestion,
    mapped: ModeMap,
    energies: Energies,
    notes: tuple[tuple[str, ...], ...],
) -> list[str]:
    closure = mapped.closure
    found = [
        f"Mode {k} ({mapped.wavenumbers_initial[k]:.0f} to {mapped.wavenumbers_final[k]:.0f} "
        f"cm^-1) is {' and '.join(marks)}: an atom moves {mapped.largest_move_angstrom[k]:.2f} "
        "angstrom along it; a straight harmonic coordinate may describe it badly."
        for k, note in enumerate(notes)
        if (marks := [mark for mark in note if mark in ("soft", "large-amplitude")])
    ]
    if closure.orthogonality > ORTHOGONALITY_MENTIONED:
        found.append(
            f"The two sets of modes span slightly different spaces: |J J^T - 1| reaches "
            f"{closure.orthogonality:.2g}; the transition takes the nearest orthogonal matrix, "
            f"which moves the mean of the band by {closure.mean_change_cm1:.2g} cm^-1."
        )
    if closure.displacement_outside > OUTSIDE_MENTIONED:
        found.append(
            f"{100 * closure.displacement_outside:.2g} % of the displacement lies outside the "
            "modes that are left and is lost to the band."
        )
    if any(choice.wavenumber_cm1 is None for choice in question.choices):
        found.append("Zero points and reorganisation energies leave out the frozen modes.")
    found += _cannot_be_sent_on(mapped)
    if _drift(question.moment) > DRIFT_MENTIONED:
        found.append(
            "The derivatives of the transition dipole do not cancel when the whole molecule is "
            "shifted; between two states of one molecule they should. Check their order and rows."
        )
    if energies.origin_cm1 is None:
        found.append("No energies were given: the transition has its 0-0 line at 0 cm^-1.")
    return found


def _cannot_be_sent_on(mapped: ModeMap) -> list[str]:
    """Pairs that other resources refuse, which means that something is wrong with the input."""
    ratios = mapped.wavenumbers_final / mapped.wavenumbers_initial
    far = np.maximum(ratios, 1.0 / ratios) > SENT_ON_RATIO
    wrong = np.flatnonzero((np.abs(mapped.displacement) > SENT_ON_DISPLACEMENT) | far)
    return [
        f"Mode {k} has displacement {mapped.displacement[k]:.3g} and wavenumber ratio "
        f"{ratios[k]:.3g}: no line list or band takes this. Check units, frames and atoms."
        for k in wrong
    ]


def _drift(moment: MomentInput | None) -> float:
    """What a shift of the whole molecule does to the dipole, as a share of its derivatives.

    The dipole operator between two orthogonal states does not depend on the origin.
    """
    if moment is None or moment.derivatives is None or not moment.derivatives.any():
        return 0.0
    per_shift = moment.derivatives.reshape(-1, 3, 3).sum(axis=0)
    return float(np.linalg.norm(per_shift) / np.linalg.norm(moment.derivatives))


def _accuracy(initial: NormalModes, final: NormalModes, mapped: ModeMap) -> Accuracy:
    """Rounding and the constants' uncertainty in the wavenumbers; not the Hessian's own error.

    First-order: an eigenvalue of a symmetric matrix of order n moves by about n 2^-53 of its norm
    (Higham, Accuracy and Stability, SIAM 2002, ch. 3 and 19), hence nu by n 2^-53 nu_max^2 / nu.
    The factor is not proved, so the evidence is ``estimated``.
    """
    size = len(initial.vectors)
    highest = max(float(np.abs(m.wavenumbers_cm1).max()) for m in (initial, final))
    lowest = float(min(mapped.wavenumbers_initial.min(), mapped.wavenumbers_final.min()))
    bound = size * 2.0**-53 * highest**2 / lowest + 3e-10 * highest
    return Accuracy(bound, "estimated", "projected normal modes in the Eckart frame")
