"""Oscillator wavefunctions and potentials sampled for a plot."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ladderband.numerics.accuracy import Accuracy, Deadline
from ladderband.numerics.errors import DomainError
from ladderband.numerics.hermite import PEAK, hermite_functions, reach
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats, Mode
from ladderband.usecases.limits import Limits

VISIBLE_TAIL = -9.2
"""Logarithm of the tail (1e-4) that still shows on a plot: where the default range ends."""


@dataclass(frozen=True)
class WavefunctionsQuestion:
    """Levels 0..v_initial_max and 0..v_final_max of one mode on ``points`` points.

    The coordinate is q' = Q' sqrt(f/hbar): the final minimum is at 0, the initial one at
    +displacement. ``start`` / ``stop`` None: the range of both states' highest levels with tails.
    """

    mode: Mode
    v_initial_max: int = 5
    v_final_max: int = 5
    points: int = 401
    start: float | None = None
    stop: float | None = None


@dataclass(frozen=True)
class WavefunctionsAnswer:
    """Columns for a plot; each state's own minimum is the zero of its energies.

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
    """Estimated seconds of work, without doing any: writing or drawing the numbers is most of it."""
    levels = question.v_initial_max + question.v_final_max + 2
    return 2e-4 + 3e-7 * levels * question.points


def wavefunctions(
    question: WavefunctionsQuestion, limits: Limits, deadline: Deadline
) -> WavefunctionsAnswer:
    """Answer one question.

    Raises
    ------
    CostLimitExceeded
        The estimate is above the limit.
    DomainError
        The range is empty.

    Notes
    -----
    The bound is that of :func:`ladderband.numerics.hermite.hermite_functions` for the points given
    (proven), plus what the rounding of the initial state's coordinate does (|phi'| <= sqrt(2v+2)
    pi^-1/4).
    """
    levels = question.v_initial_max + question.v_final_max + 2
    limits.admit_table(levels * question.points)
    limits.admit(estimate_seconds(question), "Ask for fewer points or levels.")
    deadline.check()
    mode = question.mode
    start, stop = _range(question)
    q = np.linspace(start, stop, question.points)
    scale = math.sqrt(mode.wavenumber_initial_cm1 / mode.wavenumber_final_cm1)
    xi = scale * (q - mode.displacement)
    initial, initial_error = hermite_functions(xi, question.v_initial_max)
    final, final_error = hermite_functions(q, question.v_final_max)
    moved = UNIT_ROUNDOFF * (5.0 * np.abs(xi) + abs(mode.displacement) * scale)
    slope = PEAK * math.sqrt(2.0 * question.v_initial_max + 2.0)
    initial_bound = float(np.max(initial_error + slope * moved))
    initial_bound = math.sqrt(scale) * (initial_bound + 4.0 * UNIT_ROUNDOFF)
    return WavefunctionsAnswer(
        coordinate=q,
        potential_initial_cm1=0.5 * mode.wavenumber_initial_cm1 * xi**2,
        potential_final_cm1=0.5 * mode.wavenumber_final_cm1 * q**2,
        level_initial_cm1=_levels(mode.wavenumber_initial_cm1, question.v_initial_max),
        level_final_cm1=_levels(mode.wavenumber_final_cm1, question.v_final_max),
        wavefunction_initial=math.sqrt(scale) * initial,
        wavefunction_final=final,
        accuracy=Accuracy(
            1.01 * max(initial_bound, float(final_error.max())), "proven", "Hermite recursion"
        ),
    )


def _levels(wavenumber_cm1: float, v_max: int) -> Floats:
    return np.array([wavenumber_cm1 * (v + 0.5) for v in range(v_max + 1)])


def _range(question: WavefunctionsQuestion) -> tuple[float, float]:
    mode = question.mode
    scale = math.sqrt(mode.wavenumber_initial_cm1 / mode.wavenumber_final_cm1)
    initial = reach(question.v_initial_max, VISIBLE_TAIL) / scale
    final = reach(question.v_final_max, VISIBLE_TAIL)
    start = min(-final, mode.displacement - initial) if question.start is None else question.start
    stop = max(final, mode.displacement + initial) if question.stop is None else question.stop
    if not start < stop:
        raise DomainError(
            f"The range is empty: start {start:g} must be below stop {stop:g}.", "/start"
        )
    return float(start), float(stop)
