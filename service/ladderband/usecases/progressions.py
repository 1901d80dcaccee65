"""Sticks of the progressions of one or a few uncoupled modes."""

from __future__ import annotations

from dataclasses import dataclass

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.line_list import LineList
from ladderband.numerics.transition import Transition
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
    threshold: float = 0.0
    max_lines: int = 1000


def estimate_seconds(question: ProgressionsQuestion) -> float:
    """Estimated seconds of work, without doing any."""
    raise NotImplementedError


def progressions(question: ProgressionsQuestion, limits: Limits, deadline: Deadline) -> LineList:
    """Answer one question; raises as :func:`ladderband.usecases.overlaps.overlaps`."""
    raise NotImplementedError
