"""Oscillator wavefunctions and potentials sampled for a plot."""

from __future__ import annotations

from dataclasses import dataclass

from ladderband.numerics.accuracy import Accuracy, Deadline
from ladderband.numerics.transition import Floats, Mode
from ladderband.usecases.limits import Limits


@dataclass(frozen=True)
class WavefunctionsQuestion:
    """Levels 0..v_initial_max and 0..v_final_max of one mode on ``points`` points.

    The coordinate is q' = Q' sqrt(f/hbar): the final minimum is at 0, the initial one at
    +displacement. ``start`` / ``stop`` None: the classically allowed range of the highest levels
    plus their tails.
    """

    mode: Mode
    v_initial_max: int = 5
    v_final_max: int = 5
    points: int = 401
    start: float | None = None
    stop: float | None = None


@dataclass(frozen=True)
class WavefunctionsAnswer:
    """Columns for a plot; the initial state's minimum is the zero of its energies, likewise final.

    coordinate (P,); potential_*_cm1 (P,); level_*_cm1 (v_max + 1,) energies above the own minimum;
    wavefunction_* (v_max + 1, P), normalised in q', positive at large positive q'.
    """

    coordinate: Floats
    potential_initial_cm1: Floats
    potential_final_cm1: Floats
    level_initial_cm1: Floats
    level_final_cm1: Floats
    wavefunction_initial: Floats
    wavefunction_final: Floats
    accuracy: Accuracy
    warnings: tuple[str, ...] = ()


def estimate_seconds(question: WavefunctionsQuestion) -> float:
    """Estimated seconds of work, without doing any."""
    raise NotImplementedError


def wavefunctions(
    question: WavefunctionsQuestion, limits: Limits, deadline: Deadline
) -> WavefunctionsAnswer:
    """Answer one question; raises as :func:`ladderband.usecases.overlaps.overlaps`."""
    raise NotImplementedError
