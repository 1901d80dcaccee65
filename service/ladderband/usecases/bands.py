"""The band on an axis: all lines of one or several species, broadened, on a scale."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from ladderband.numerics.absolute_scale import SCALES, Scale, Strength, scale_factors, strength
from ladderband.numerics.accuracy import Accuracy, Deadline
from ladderband.numerics.axis import Axis, in_unit
from ladderband.numerics.band import (
    Density,
    Sampling,
    density,
    plan_sampling,
    reference_density,
)
from ladderband.numerics.errors import DeadlineExceeded, DomainError, PrecisionNotReached
from ladderband.numerics.line_list import LineList
from ladderband.numerics.line_shape import (
    FIT_REACH,
    Bath,
    Broadening,
    InstrumentFunction,
    broadening,
)
from ladderband.numerics.moments import skewness, vertical_energy
from ladderband.numerics.reversal import reversed_transition
from ladderband.numerics.symmetric_factor import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats, Process, Transition
from ladderband.usecases.kept_transitions import KeptTransition, KeptTransitions
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


@dataclass(frozen=True)
class LineShape:
    """Widths are full widths at half maximum in cm^-1; kind gaussian, lorentzian or voigt.

    ``bath`` and ``instrument`` act on top of it. A kind other than voigt uses only its own width.
    """

    kind: str = "gaussian"
    fwhm_cm1: float = 0.0
    fwhm_lorentzian_cm1: float = 0.0
    bath: Bath | None = None
    instrument: InstrumentFunction | None = None

    def at(self, temperature_k: float, direction: float) -> Broadening:
        """The broadening at a temperature; raises DomainError without any width."""
        gaussian = 0.0 if self.kind == "lorentzian" else self.fwhm_cm1
        lorentzian = {"gaussian": 0.0, "lorentzian": self.fwhm_cm1}.get(
            self.kind, self.fwhm_lorentzian_cm1
        )
        return broadening(
            gaussian, lorentzian, self.bath, self.instrument, temperature_k, direction
        )


@dataclass(frozen=True)
class Species:
    """One conformer or species and its share (> 0; shares are scaled to sum 1).

    On absolute scales the share is a mole fraction; on the others the share of the band's area.
    """

    transition: Transition
    weight: float = 1.0


@dataclass(frozen=True)
class BandsQuestion:
    """Bands of a mixture of species at one or several temperatures, on one axis.

    ``temperatures_k`` empty: the species' own. ``both_directions`` adds the reverse process.
    ``tolerance`` is the bound aimed at, relative to the maximum. ``label_lines``: so many of the
    strongest lines on the axis, of each species, ride along for labels.
    """

    species: tuple[Species, ...]
    axis: Axis
    line_shape: LineShape
    scale: Scale = "relative"
    temperatures_k: tuple[float, ...] = ()
    both_directions: bool = False
    tolerance: float = 1e-6
    label_lines: int = 0


@dataclass(frozen=True)
class BandMoments:
    """Mean, standard deviation (cm^-1) and skewness on the wavenumber axis."""

    mean_cm1: float
    standard_deviation_cm1: float
    skewness: float


@dataclass(frozen=True)
class Positions:
    """Landmarks of one species' band in cm^-1; the vertical one leaves out zero-point motion."""

    origin_cm1: float
    vertical_cm1: float
    first_moment_cm1: float


@dataclass(frozen=True)
class Band:
    """One band: intensity (P,) in the order of the axis, and what belongs to it.

    ``moments`` are those of the lines (closed form, bath's shift included); ``moments_on_axis``
    those of the broadened band over the axis given (None where there is no intensity).
    ``range_cm1`` holds all but 1e-6 of the lines. ``lines``: one list a species when labels were
    asked for, without the shift of a bath; its completeness says how far it looked.
    """

    process: Process
    temperature_k: float
    intensity: Floats
    accuracy: Accuracy
    moments: BandMoments
    moments_on_axis: BandMoments | None
    positions: tuple[Positions, ...]
    strength: Strength
    range_cm1: tuple[float, float]
    lines: tuple[LineList, ...] = ()


@dataclass(frozen=True)
class BandsAnswer:
    """The bands, direction by direction and within it temperature by temperature.

    ``stokes_shift_cm1`` (one a temperature): mean of absorption minus mean of emission, when both
    were asked.
    """

    axis: Axis
    intensity_unit: str
    bands: tuple[Band, ...]
    stokes_shift_cm1: tuple[float, ...] = ()
    warnings: tuple[str, ...] = ()


@dataclass(frozen=True)
class _Part:
    """One species of one band, planned."""

    species: Species
    share: float
    kept: KeptTransition
    shape: Broadening
    sampling: Sampling
    energies: Floats


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
        _stokes_shifts(question, found),
        _warnings(question, found),
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


def _part(question: BandsQuestion, species: Species, group: tuple[Species, ...]) -> _Part:
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
    return _Part(species, share, kept, shape, sampling, wanted)


def _seconds_left(part: _Part) -> float:
    missing = max(0, part.sampling.count - part.kept.have(part.sampling.step))
    modes = part.kept.modes
    each = sum(
        seconds_a_time(len(block), mixed=True, slopes=block.has_slopes) for block in modes.mixed
    )
    if modes.uncoupled is not None:
        slopes = bool(modes.uncoupled.slopes.any())
        each += seconds_a_time(len(modes.uncoupled.g), mixed=False, slopes=slopes)
    return missing * each + 3e-7 * part.sampling.count + 2e-7 * len(part.energies)


def _band(question: BandsQuestion, parts: list[_Part], deadline: Deadline) -> Band:
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
        _mixture_moments(question, parts),
        _moments_on_axis(axis.wavenumbers, plain),
        tuple(_positions(part) for part in parts),
        _mixture_strength(question, process, parts),
        _range(parts),
        _labels(question, parts, deadline) if question.label_lines else (),
    )


def _labels(
    question: BandsQuestion, parts: list[_Part], deadline: Deadline
) -> tuple[LineList, ...]:
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


def _density(part: _Part, deadline: Deadline) -> Density:
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


def _mixture_moments(question: BandsQuestion, parts: list[_Part]) -> BandMoments:
    """Moments of all lines of all species, about their common mean."""
    weights = np.array([part.share for part in parts])
    if SCALES[question.scale].power:
        weights = weights * np.array([part.kept.modes.total for part in parts])
        weights = weights / weights.sum()
    means = np.array([_positions(part).first_moment_cm1 for part in parts])
    variances = np.array([part.kept.moments.variance for part in parts])
    signs = np.array([part.species.transition.direction for part in parts])
    thirds = signs * np.array([part.kept.moments.third for part in parts])
    mean = float(weights @ means)
    off = means - mean
    variance = float(weights @ (variances + off**2))
    third = float(weights @ (thirds + 3.0 * off * variances + off**3))
    deviation = math.sqrt(max(variance, 0.0))
    return BandMoments(mean, deviation, skewness(third, deviation))


def _positions(part: _Part) -> Positions:
    transition = part.species.transition
    sign, origin = transition.direction, transition.origin_cm1
    zero_points = 0.5 * float((transition.wavenumbers_final - transition.wavenumbers_initial).sum())
    vertical = vertical_energy(transition) - zero_points + part.shape.shift
    mean = part.kept.moments.mean + part.shape.shift
    return Positions(origin, origin + sign * vertical, origin + sign * mean)


def _moments_on_axis(wavenumbers: Floats, plain: Floats) -> BandMoments | None:
    """Trapezoidal moments of the density over the axis, in cm^-1."""
    steps = np.abs(np.diff(wavenumbers))
    weights = np.zeros(len(plain))
    weights[:-1] += 0.5 * steps
    weights[1:] += 0.5 * steps
    weights *= plain
    area = float(weights.sum())
    if area <= 1e-9:
        return None
    mean = float(weights @ wavenumbers) / area
    off = wavenumbers - mean
    square = off * off
    variance = float(weights @ square) / area
    third = float(weights @ (square * off)) / area
    deviation = math.sqrt(max(variance, 0.0))
    return BandMoments(mean, deviation, skewness(third, deviation))


def _mixture_strength(question: BandsQuestion, process: Process, parts: list[_Part]) -> Strength:
    """Shares as mole fractions: moments squared, oscillator strengths and rates add up."""
    total, mean, cube = 0.0, 0.0, 0.0
    for part in parts:
        weight = part.share * part.kept.modes.total
        position = _positions(part).first_moment_cm1
        lines = part.kept.moments
        sign = part.species.transition.direction
        total += weight
        mean += weight * position
        cube += weight * (position**3 + 3.0 * position * lines.variance + sign * lines.third)
    return strength(process, total, mean / total, cube / total)


def _range(parts: list[_Part]) -> tuple[float, float]:
    ends = []
    for part in parts:
        energies = part.kept.energy_range(1e-6)
        sign, origin = part.species.transition.direction, part.species.transition.origin_cm1
        ends += [origin + sign * (end + part.shape.shift) for end in (energies.low, energies.high)]
    return min(ends), max(ends)


def _stokes_shifts(question: BandsQuestion, found: tuple[Band, ...]) -> tuple[float, ...]:
    if not question.both_directions:
        return ()
    half = len(found) // 2
    return tuple(
        (one.moments.mean_cm1 - other.moments.mean_cm1)
        * (1.0 if one.process == "absorption" else -1.0)
        for one, other in zip(found[:half], found[half:], strict=True)
    )


def _warnings(question: BandsQuestion, found: tuple[Band, ...]) -> tuple[str, ...]:
    notes = []
    unit = question.axis.unit
    low, high = float(question.axis.wavenumbers.min()), float(question.axis.wavenumbers.max())
    for band in found:
        first, last = band.range_cm1
        if high < first or low > last:
            ends = sorted((in_unit(first, unit), in_unit(last, unit))) if first > 0.0 else None
            where = f" ({ends[0]:.6g} to {ends[1]:.6g} {unit})" if ends and unit != "cm-1" else ""
            notes.append(
                f"The axis lies outside the {band.process} band: its lines range from {first:.6g} "
                f"to {last:.6g} cm-1{where}."
            )
        area = _area(band, question)
        if question.scale == "unit_area" and area is not None and area < 0.99:
            notes.append(
                f"The axis holds {100.0 * area:.3g} % of the {band.process} band's area; "
                "the area is 1 over all wavenumbers."
            )
    if question.label_lines and not all(band.lines for band in found):
        notes.append(
            "No labels: the band has too many lines for a short enumeration. POST /v1/lines gives "
            "more time to it."
        )
    if question.scale in ("molar_absorption_coefficient", "cross_section", "photon_rate") and any(
        species.transition.moment is None for species in question.species
    ):
        notes.append("No moment was given: the scale is that of a transition moment of 1 debye.")
    return tuple(notes)


def _area(band: Band, question: BandsQuestion) -> float | None:
    if question.scale != "unit_area" or len(question.axis.values) < 2:
        return None
    return float(np.trapezoid(band.intensity, question.axis.values))
