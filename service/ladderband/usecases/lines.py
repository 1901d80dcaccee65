"""Every line of a polyatomic band, with what is missing stated and proven."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ladderband.numerics.accuracy import Completeness, Deadline
from ladderband.numerics.enumeration import coupled_problem, predict
from ladderband.numerics.line_list import LineList
from ladderband.numerics.line_selection import (
    EnumeratedLines,
    Selection,
    transition_blocks,
    transition_lines,
)
from ladderband.numerics.marginals import GaussianMode, gaussian_modes, marginal
from ladderband.numerics.mode_blocks import block_transition
from ladderband.numerics.transition import Floats, Transition
from ladderband.usecases.limits import CostLimitExceeded, Limits

DEFAULT_TOLERANCE = 1e-2
SMALLEST_TOLERANCE = 1e-12
"""What is missing can be proved down to the rounding of the sums, about this."""

SECONDS_PER_AMPLITUDE = 1e-7
"""Enumeration, enlargements, bounds and the choice together, measured on one core."""

MOST_AMPLITUDES = 10_000_000
"""What fits into the memory of a compute process, a moment that varies included (some 1.5 GB)."""


@dataclass(frozen=True)
class LinesQuestion:
    """Lines until at most ``tolerance`` is missing; kept: at least ``threshold`` of the strongest.

    With a threshold and no tolerance the enumeration goes on until no line above the threshold can be
    missing. ``by``: sorted by falling intensity or rising position.
    """

    transition: Transition
    tolerance: float | None = None
    threshold: float | None = None
    max_lines: int = 10_000
    low_cm1: float = -math.inf
    high_cm1: float = math.inf
    by: str = "intensity"


@dataclass(frozen=True)
class ModeReport:
    """One final mode at a glance.

    ``quanta``: probability of n final quanta whatever the other modes do, cut where 1e-4 is left;
    each within ``quanta_bound`` (proven). ``reorganisation_cm1`` = S f on the final surface;
    ``stokes_share``: its share of the sum over the modes.
    """

    label: str
    mean_quanta: float
    quanta: Floats
    quanta_bound: float
    reorganisation_cm1: float
    stokes_share: float


@dataclass(frozen=True)
class LinesAnswer:
    """The list kept, what the enumeration behind it holds, and the modes one by one."""

    lines: LineList
    enumerated: Completeness
    enumerated_lines: int
    modes: tuple[ModeReport, ...]
    warnings: tuple[str, ...] = ()


def lines(question: LinesQuestion, limits: Limits, deadline: Deadline) -> LinesAnswer:
    """Answer one question.

    Raises
    ------
    CostLimitExceeded
        A tolerance was asked for that the limit can not meet; the message tells what would be left.
    DomainError
        The states are too far apart for any list.
    DeadlineExceeded
        The deadline passed.
    """
    limit = amplitude_limit(limits)
    _check_cost(question, limits, limit)
    found = _enumerated(question, limit, deadline)
    return LinesAnswer(
        lines=found.selected if question.by == "intensity" else found.selected.by_position(),
        enumerated=found.enumerated,
        enumerated_lines=found.count,
        modes=mode_reports(question.transition),
        warnings=_warnings(question, found),
    )


def amplitude_limit(limits: Limits) -> int:
    """Amplitudes one request may compute."""
    return min(MOST_AMPLITUDES, max(1000, int(limits.work_s / SECONDS_PER_AMPLITUDE)))


def estimate_seconds(question: LinesQuestion) -> float:
    """Estimated seconds, from the marginals taken as independent; without enumerating anything.

    What would need more than the largest enumeration is refused at once, which takes no time, or gets
    the best list that can be had.
    """
    amplitudes, _ = _predicted(question.transition, _tolerance(question), MOST_AMPLITUDES)
    if question.tolerance is not None and _hopeless(amplitudes, MOST_AMPLITUDES):
        return 0.0
    work = SECONDS_PER_AMPLITUDE * min(amplitudes, MOST_AMPLITUDES)
    return _setup_seconds(question.transition) + work


def _hopeless(amplitudes: float, limit: int) -> bool:
    """True when the prediction is so far above the limit that nothing is tried."""
    return amplitudes > 10.0 * limit


def _setup_seconds(transition: Transition) -> float:
    """The generator in balls, by block: 0.1 s at 60 modes, 0.3 s at 100."""
    sizes = [len(block.final) for block in transition_blocks(transition)]
    return sum(1e-3 + 4e-7 * size**3 for size in sizes if size > 1)


def _tolerance(question: LinesQuestion) -> float:
    if question.tolerance is not None:
        return question.tolerance
    return DEFAULT_TOLERANCE


def _predicted(transition: Transition, tolerance: float, limit: int) -> tuple[float, float]:
    """(amplitudes for the tolerance, intensity missing when ``limit`` amplitudes are used)."""
    blocks = transition_blocks(transition)
    amplitudes, kept = 0.0, 1.0
    for block in blocks:
        part = transition if len(blocks) == 1 else block_transition(transition, block)
        prediction = predict(coupled_problem(part, tolerance / len(blocks)))
        nodes, _ = prediction.at(prediction.budget_for(0.7 * tolerance / len(blocks)))
        amplitudes += nodes
        kept *= 1.0 - prediction.at(prediction.budget_within(limit))[1]
    return amplitudes, 1.0 - kept


def _check_cost(question: LinesQuestion, limits: Limits, limit: int) -> None:
    """Refuse at once what is hopeless; borderline cases are tried."""
    setup = _setup_seconds(question.transition)
    limits.admit(setup, "POST /v1/bands gives the band of as many modes without listing lines.")
    if question.tolerance is None:
        return
    amplitudes, residual = _predicted(question.transition, question.tolerance, limit)
    if _hopeless(amplitudes, limit):
        raise CostLimitExceeded(
            setup + SECONDS_PER_AMPLITUDE * amplitudes,
            SECONDS_PER_AMPLITUDE * limit,
            f"Within the limit about {residual:.2g} of the intensity would stay missing "
            f"(asked: {question.tolerance:g}). Raise the tolerance, lower the temperature, leave "
            "the tolerance out to get the best list within the limit, or use POST /v1/bands, "
            "which sums over all lines without listing them.",
        )


def _enumerated(question: LinesQuestion, limit: int, deadline: Deadline) -> EnumeratedLines:
    """With a threshold alone: a first look finds the strongest line, then all above are certain."""
    selection = Selection(
        question.threshold or 0.0, question.max_lines, question.low_cm1, question.high_cm1
    )
    tolerance = _tolerance(question)
    found = transition_lines(question.transition, tolerance, selection, limit, deadline)
    if question.threshold is None or question.tolerance is not None:
        return found
    wanted = max(SMALLEST_TOLERANCE, question.threshold * found.strongest)
    if found.enumerated.missing_at_most <= wanted or found.count >= limit:
        return found
    return transition_lines(question.transition, wanted, selection, limit, deadline)


def mode_reports(transition: Transition) -> tuple[ModeReport, ...]:
    """The modes one by one, from the exact marginals."""
    energies = [mode.huang_rhys * mode.wavenumber_final_cm1 for mode in transition.modes]
    total = sum(energies)
    return tuple(
        _mode_report(mode.label or str(index), gaussian, energy, energy / total if total else 0.0)
        for index, (mode, gaussian, energy) in enumerate(
            zip(transition.modes, gaussian_modes(transition), energies, strict=True), start=1
        )
    )


def _mode_report(label: str, gaussian: GaussianMode, energy: float, share: float) -> ModeReport:
    distribution = marginal(gaussian)
    summed = np.cumsum(distribution.probabilities)
    length = int(np.searchsorted(summed, 1.0 - 1e-4)) + 1
    return ModeReport(
        label=label,
        mean_quanta=gaussian.mean_quanta,
        quanta=distribution.probabilities[:length],
        quanta_bound=distribution.bound,
        reorganisation_cm1=energy,
        stokes_share=share,
    )


def _warnings(question: LinesQuestion, found: EnumeratedLines) -> tuple[str, ...]:
    notes = []
    missing = found.enumerated.missing_at_most
    if missing > _tolerance(question):
        notes.append(
            f"The work limit of one request was reached: up to {missing:.3g} of the intensity is in "
            "lines that were not enumerated. POST /v1/bands sums over all lines without listing them."
        )
    if question.threshold is not None and missing > question.threshold * found.strongest:
        notes.append(
            f"Lines as strong as {missing:.3g} may be missing: the threshold is "
            f"{question.threshold * found.strongest:.3g}."
        )
    if len(found.selected) == question.max_lines < found.count:
        notes.append(
            f"Only the {question.max_lines} strongest lines are listed (max_lines); "
            f"{found.count} were enumerated."
        )
    return tuple(notes)
