"""Modes that a harmonic answer cannot hold, and what the client chose to do with each.

A mode with an imaginary or nearly vanishing wavenumber has no oscillator. It is never dropped by
itself: the client freezes it or gives it a wavenumber.

*Freeze* holds the motion still in both states: its direction joins the translations and rotations,
and what is left of either Hessian is diagonalised again. *Replace* keeps the direction and gives
the mode another wavenumber in the state that was named.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from scipy import linalg
from scipy.optimize import linear_sum_assignment

from ladderband.numerics.errors import DomainError
from ladderband.numerics.mode_map import HarmonicState
from ladderband.numerics.normal_modes import NormalModes, modes_of_weighted
from ladderband.numerics.transition import Floats

StateName = Literal["initial", "final"]

SOFTEST_CM1 = 10.0
"""Below this a computed wavenumber is the noise of its Hessian (common practice)."""

SAME_MOTION = 0.5
"""Two frozen modes, one a state, whose squared overlap exceeds this are one motion."""


@dataclass(frozen=True, slots=True)
class ModeChoice:
    """What to do with mode ``mode`` (from 0, ascending wavenumber) of one state.

    ``wavenumber_cm1`` None freezes the mode, a value > 0 replaces its wavenumber.
    """

    state: StateName
    mode: int
    wavenumber_cm1: float | None = None


@dataclass(frozen=True, slots=True)
class DifficultMode:
    """A mode without an oscillator: its state, number and wavenumber (negative: imaginary)."""

    state: StateName
    mode: int
    wavenumber_cm1: float


def difficult_modes(modes: NormalModes, state: StateName) -> list[DifficultMode]:
    """The modes below SOFTEST_CM1, imaginary ones included."""
    return [
        DifficultMode(state, k, float(value))
        for k, value in enumerate(modes.wavenumbers_cm1)
        if value < SOFTEST_CM1
    ]


def check_choices(choices: tuple[ModeChoice, ...], counts: dict[StateName, int]) -> None:
    """Refuse a mode that does not exist or is named twice.

    Raises
    ------
    DomainError
        With the pointer of the choice.
    """
    seen: set[tuple[str, int]] = set()
    for index, choice in enumerate(choices):
        pointer = f"/mode_choices/{index}"
        if counts[choice.state] == 0:
            raise DomainError(
                f"The {choice.state} state has no modes of its own: a gradient takes over those of "
                "the initial state. Name that mode.",
                f"{pointer}/state",
            )
        if choice.mode >= counts[choice.state]:
            raise DomainError(
                f"The {choice.state} state has modes 0 to {counts[choice.state] - 1}; there is no "
                f"mode {choice.mode}.",
                f"{pointer}/mode",
            )
        if (choice.state, choice.mode) in seen:
            raise DomainError(
                f"Mode {choice.mode} of the {choice.state} state is named twice.", pointer
            )
        seen.add((choice.state, choice.mode))


def with_replacements(
    modes: NormalModes, state: StateName, choices: tuple[ModeChoice, ...]
) -> NormalModes:
    """The modes with the chosen wavenumbers in place, in their old order."""
    wavenumbers = modes.wavenumbers_cm1.copy()
    for choice in choices:
        if choice.state == state and choice.wavenumber_cm1 is not None:
            wavenumbers[choice.mode] = choice.wavenumber_cm1
    return replace(modes, wavenumbers_cm1=wavenumbers)


def with_frozen(
    initial: HarmonicState, final: HarmonicState, choices: tuple[ModeChoice, ...]
) -> tuple[HarmonicState, HarmonicState]:
    """Both states without the frozen motions, in the common frame.

    A motion frozen in one state only is taken out of the other as well; modes frozen in both
    states that are the same motion (SAME_MOTION) are taken out once.
    """
    own = {
        state: [c.mode for c in choices if c.state == state and c.wavenumber_cm1 is None]
        for state in ("initial", "final")
    }
    if not any(own.values()):
        return initial, final
    first = initial.modes.vectors[:, own["initial"]]
    second = final.modes.vectors[:, own["final"]]
    only_first, only_second = _unmatched(first, second)
    return _without(initial, first, only_second), _without(final, second, only_first)


def _unmatched(first: Floats, second: Floats) -> tuple[Floats, Floats]:
    """The columns of each that are no motion of the other."""
    overlap = (first.T @ second) ** 2
    rows, columns = linear_sum_assignment(-overlap)
    same = overlap[rows, columns] > SAME_MOTION
    return np.delete(first, rows[same], axis=1), np.delete(second, columns[same], axis=1)


def _without(state: HarmonicState, own: Floats, others: Floats) -> HarmonicState:
    """Hold the state's ``own`` modes and those ``others`` that are vibrations of it.

    A bend of a linear molecule that turns the bent one as a whole has nothing to hold there.
    """
    vectors = state.modes.vectors
    parts = vectors @ (vectors.T @ others)
    parts = parts[:, (parts**2).sum(axis=0) > SAME_MOTION]
    held = linalg.qr(np.hstack([own, parts]), mode="economic")[0]
    if vectors.shape[1] <= held.shape[1]:
        raise DomainError("Every mode is frozen: nothing is left to vibrate.", "/mode_choices")
    modes = modes_of_weighted(state.molecule, state.modes.weighted_hessian, held)
    return replace(state, modes=replace(modes, rigid_residual_cm1=state.modes.rigid_residual_cm1))
