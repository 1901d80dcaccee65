"""The band on an axis: all lines of one or several species, broadened, on a scale."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from ladderband.numerics.absolute_scale import SCALES, scale_factors
from ladderband.numerics.accuracy import Accuracy, Deadline
from ladderband.numerics.band import (
    Density,
    density,
    plan_sampling,
    reference_density,
)
from ladderband.numerics.errors import DeadlineExceeded, DomainError, PrecisionNotReached
from ladderband.numerics.line_list import LineList
from ladderband.numerics.line_shape import (
    FIT_REACH,
)
from ladderband.numerics.reversal import reversed_transition
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats, Process, Transition
from ladderband.usecases.bands_question import Band, BandsAnswer, BandsQuestion, Species
from ladderband.usecases.bands_report import (
    Part,
    band_warnings,
    lines_range,
    mixture_moments,
    mixture_strength,
    moments_on_axis,
    positions,
    stokes_shifts,
)
from ladderband.usecases.kept_transitions import KeptTransitions
from ladderband.usecases.limits import CostLimitExceeded, Limits
from ladderband.usecases.lines import LinesQuestion, lines

MAX_TIMES = 2**18
"""Samples of the correlation function in one band: a width of 1/20000 of the band's range."""

LABEL_THRESHOLD = 0.01
"""Weakest line labelled, as a share of the strongest."""
LABEL_SECONDS = 0.1
"""Work spent on the labels of one species."""
LABEL_DEADLINE_S = 1.0
"""Time after which a band goes without labels."""

ADVICE = "Give wider lines, a shorter axis, a larger tolerance or fewer bands in one request."

_KEPT = KeptTransitions()


def bands(question: BandsQuestion, limits: Limits, deadline: Deadline) -> BandsAnswer:
    """Answer one question.

    Raises
    ------
    DomainError
        No width, a scale that does not belong to the process, a moment of zero.
    CostLimitExceeded
        The estimate is above the limit.
    PrecisionNotReached
        Nothing could be proved in double precision.
    DeadlineExceeded
        The deadline passed.
    """
    groups = _groups(question)
    for group in groups:  # what a scale refuses is refused before any work
        _factors(question, group[0].transition.process, 1.0)
    limits.admit(estimate_seconds(question), ADVICE)
    planned = []
    for group in groups:
        deadline.check()
        planned.append([_part(question, species, group) for species in group])
    limits.admit(sum(_seconds_left(part) for parts in planned for part in parts), ADVICE)
    found = tuple(_band(question, parts, deadline) for parts in planned)
    _KEPT.trim()
    return BandsAnswer(
        question.axis,
        SCALES[question.scale].unit.format(axis=question.axis.unit),
        found,
        stokes_shifts(question, found),
        band_warnings(question, found),
    )


def _factors(question: BandsQuestion, process: Process, moment2: float) -> Floats:
    axis = question.axis
    return scale_factors(question.scale, process, axis.wavenumbers, axis.jacobian, moment2)


def _groups(question: BandsQuestion) -> list[tuple[Species, ...]]:
    """The species of each band: direction by direction, temperature by temperature."""
    processes = {species.transition.process for species in question.species}
    if len(processes) > 1:
        raise DomainError(
            "All species of one band share one process; these are " + ", ".join(sorted(processes)),
            "/further_species",
        )
    directions = [question.species]
    if question.both_directions:
        directions.append(
            tuple(
                replace(species, transition=reversed_transition(species.transition))
                for species in question.species
            )
        )
    if not question.temperatures_k:
        return directions
    return [
        tuple(
            replace(species, transition=replace(species.transition, temperature_k=temperature))
            for species in group
        )
        for group in directions
        for temperature in question.temperatures_k
    ]


def estimate_seconds(question: BandsQuestion) -> float:
    """Estimated seconds of work, without doing any: the warmest band's, times the number of bands.

    25 standard deviations stand for the proven range; right within a factor of three, and the exact
    plan is held against the limit before chi is evaluated.
    """
    groups = _groups(question)
    warmest = max(groups, key=lambda group: group[0].transition.temperature_k)
    total = 2e-7 * len(question.axis.values) * len(warmest)
    total += 0.1 * len(warmest) * (question.label_lines > 0)
    for species in warmest:
        transition = species.transition
        n, mixed = len(transition.modes), transition.mixing is not None
        shape = question.line_shape.at(transition.temperature_k, transition.direction)
        period = 25.0 * _KEPT.get(transition).moments.standard_deviation + 2.0 * shape.light_reach(
            1e-6
        )
        period /= FIT_REACH if shape.gamma else 1.0
        times = min(shape.end(1e-9 * shape.peak) * period / (2.0 * math.pi), float(MAX_TIMES))
        total += (
            0.003
            + 2e-8 * n**3 * mixed
            + times * seconds_a_time(n, mixed=mixed, slopes=_has_slopes(transition))
        )
    return len(groups) * total


def seconds_a_time(n: int, *, mixed: bool, slopes: bool) -> float:
    """Seconds of one time point of n modes, all mixed or none, with a moment that varies or not."""
    if mixed:
        return 1e-6 + (7e-7 if slopes else 2.5e-7) * n + 1.2e-8 * n**2 + 3.5e-10 * n**3
    return 1e-6 + (8e-8 if slopes else 6e-9) * n


def _has_slopes(transition: Transition) -> bool:
    return transition.moment is not None and bool(transition.moment.slopes_debye.any())


def _part(question: BandsQuestion, species: Species, group: tuple[Species, ...]) -> Part:
    transition = species.transition
    kept = _KEPT.get(transition)
    shape = question.line_shape.at(transition.temperature_k, transition.direction)
    rough = kept.energy_range(1e-6)
    allowed = question.tolerance * reference_density(rough, shape)
    outside = min(0.03 * allowed / shape.kernel_top, 1e-6)
    energies = kept.energy_range(10.0 ** math.floor(math.log10(max(outside, 1e-300))))
    wanted = transition.direction * (question.axis.wavenumbers - transition.origin_cm1)
    sampling = plan_sampling(energies, shape, float(wanted.min()), float(wanted.max()), allowed)
    if sampling.count > MAX_TIMES:
        raise DomainError(
            f"The lines are too narrow for the range of the band and axis: {sampling.count} time "
            f"points would be needed, the limit is {MAX_TIMES}. {ADVICE}",
            "/line_shape",
        )
    share = species.weight / sum(other.weight for other in group)
    return Part(species, share, kept, shape, sampling, wanted)


def _seconds_left(part: Part) -> float:
    missing = max(0, part.sampling.count - part.kept.have(part.sampling.step))
    modes = part.kept.modes
    each = sum(
        seconds_a_time(len(block), mixed=True, slopes=block.has_slopes) for block in modes.mixed
    )
    if modes.uncoupled is not None:
        slopes = bool(modes.uncoupled.slopes.any())
        each += seconds_a_time(len(modes.uncoupled.g), mixed=False, slopes=slopes)
    return missing * each + 3e-7 * part.sampling.count + 2e-7 * len(part.energies)


def _band(question: BandsQuestion, parts: list[Part], deadline: Deadline) -> Band:
    axis = question.axis
    process = parts[0].species.transition.process
    plain, total, bound = np.zeros((3, len(axis.values)))
    for part in parts:
        found = _density(part, deadline)
        factors = part.share * _factors(question, process, part.kept.modes.total)
        plain += part.share * found.value
        total += factors * found.value
        bound += factors * found.bound + 40.0 * UNIT_ROUNDOFF * np.abs(factors * found.value)
    if question.scale == "relative":
        total, bound = _relative(total, bound)
    return Band(
        process,
        parts[0].species.transition.temperature_k,
        total,
        Accuracy(float(bound.max()), "proven", "correlation function in time"),
        mixture_moments(question, parts),
        moments_on_axis(axis.wavenumbers, plain),
        tuple(positions(part) for part in parts),
        mixture_strength(question, process, parts),
        lines_range(parts),
        _labels(question, parts, deadline) if question.label_lines else (),
    )


def _labels(question: BandsQuestion, parts: list[Part], deadline: Deadline) -> tuple[LineList, ...]:
    """The strongest lines on the axis, one list a species; none where a short look finds none."""
    wavenumbers = question.axis.wavenumbers
    found = []
    for part in parts:
        asked = LinesQuestion(
            part.species.transition,
            threshold=LABEL_THRESHOLD,
            max_lines=question.label_lines,
            low_cm1=float(wavenumbers.min()),
            high_cm1=float(wavenumbers.max()),
        )
        short = min(deadline, Deadline.after(LABEL_DEADLINE_S), key=lambda one: one.at)
        try:
            found.append(lines(asked, Limits(work_s=LABEL_SECONDS), short).lines)
        except (CostLimitExceeded, DeadlineExceeded, DomainError, PrecisionNotReached):
            deadline.check()
            return ()
    return tuple(found)


def _density(part: Part, deadline: Deadline) -> Density:
    deadline.check()
    return density(
        lambda step, count: part.kept.correlation(step, count, deadline),
        part.shape,
        part.sampling,
        part.energies,
        float(np.abs(part.energies).max()) + abs(part.species.transition.origin_cm1),
    )


def _relative(total: Floats, bound: Floats) -> tuple[Floats, Floats]:
    """Scale the largest value to 1; the true maximum may differ by its bound as well."""
    top, worst = float(total.max()), float(bound.max())
    if top <= 2.0 * worst:  # nothing on this axis that is told from zero
        return np.zeros_like(total), np.ones_like(bound)
    return total / top, (bound + worst) / (top - worst)
