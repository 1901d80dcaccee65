"""Sticks of the progressions of one or a few uncoupled modes."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.errors import DomainError
from ladderband.numerics.line_list import LineList
from ladderband.numerics.line_selection import uncoupled_lines
from ladderband.numerics.progression import (
    QUANTA_MAX,
    ModeSticks,
    complete_mode_sticks,
    final_quanta,
    thermal_quanta,
)
from ladderband.numerics.transition import Mode, Transition
from ladderband.usecases.limits import Limits

MAX_MODES = 6


@dataclass(frozen=True)
class ProgressionsQuestion:
    """Lines of a transition without mixing and with a constant moment, 1..MAX_MODES modes.

    ``v_final_max`` / ``v_initial_max``: quanta per mode; None lets the service choose the smallest
    that leave out at most ``tolerance`` of the intensity. Lines weaker than ``threshold`` times the
    strongest are left out; the strongest ``max_lines`` are kept. Sorted by position.
    """

    transition: Transition
    v_initial_max: int | None = None
    v_final_max: int | None = None
    tolerance: float = 1e-6
    threshold: float = 1e-6
    max_lines: int = 1000


def progressions(question: ProgressionsQuestion, limits: Limits, deadline: Deadline) -> LineList:
    """Answer one question; raises as :func:`ladderband.usecases.overlaps.overlaps`.

    Raises
    ------
    DomainError
        More than MAX_MODES modes, mixing, or a moment that varies: those belong to the line list.
    """
    _check_uncoupled(question.transition)
    advice = "Give v_final_max, a lower temperature, a higher threshold or fewer modes."
    limits.admit(estimate_seconds(question), advice)
    sticks = [_mode_sticks(question, mode, deadline) for mode in question.transition.modes]
    limits.admit(joint_seconds(sticks, question.threshold), advice)
    found = uncoupled_lines(
        question.transition, sticks, question.threshold, question.max_lines, deadline
    )
    return replace(found, warnings=_warnings(question, sticks))


def _check_uncoupled(transition: Transition) -> None:
    if len(transition.modes) > MAX_MODES:
        raise DomainError(
            f"A progression takes 1 to {MAX_MODES} modes, {len(transition.modes)} were given. "
            "POST /v1/lines takes more.",
            "/modes",
        )
    if transition.mixing is not None:
        raise DomainError(
            "A progression has no mixing: leave it out, or use POST /v1/lines.", "/mixing"
        )
    if transition.moment is not None:
        raise DomainError(
            "A progression has a constant moment: leave 'moment' out, or use POST /v1/lines.",
            "/moment",
        )


def _mode_sticks(question: ProgressionsQuestion, mode: Mode, deadline: Deadline) -> ModeSticks:
    return complete_mode_sticks(
        mode,
        question.transition.temperature_k,
        question.v_initial_max,
        question.v_final_max,
        question.tolerance / len(question.transition.modes),
        deadline,
    )


def estimate_seconds(question: ProgressionsQuestion) -> float:
    """Estimated seconds for the modes' tables, without doing any work."""
    return sum(
        3e-5 + 5e-11 * rows * columns * 1.4 * max(rows, columns) + 3e-8 * rows * columns
        for rows, columns in (_table_shape(question, mode) for mode in question.transition.modes)
    )


def joint_seconds(sticks: list[ModeSticks], threshold: float) -> float:
    """Estimated seconds for the joint lines, from the finished tables: at most this many products.

    A joint line above the threshold has every one of its sticks above the threshold of its mode.
    """
    counts = [
        int(np.count_nonzero(mode.weights >= threshold * mode.weights.max())) for mode in sticks
    ]
    return 1e-7 * math.prod(counts)


def _table_shape(question: ProgressionsQuestion, mode: Mode) -> tuple[int, int]:
    share = question.tolerance / len(question.transition.modes)
    v_max = question.v_initial_max
    if v_max is None:
        v_max = thermal_quanta(
            mode.wavenumber_initial_cm1, question.transition.temperature_k, 0.5 * share
        )
    n_max = question.v_final_max
    if n_max is None:
        n_max = final_quanta(mode, v_max)
    return v_max + 1, n_max + 1


def _warnings(question: ProgressionsQuestion, sticks: list[ModeSticks]) -> tuple[str, ...]:
    chosen = question.v_final_max is None or question.v_initial_max is None
    short = [
        str(index)
        for index, mode in enumerate(sticks, start=1)
        if chosen and mode.missing_at_most > question.tolerance
    ]
    if not short:
        return ()
    return (
        f"Mode {', '.join(short)}: {QUANTA_MAX} quanta, the most a table holds, or the quanta "
        "given, leave out more than the tolerance; completeness tells how much.",
    )
