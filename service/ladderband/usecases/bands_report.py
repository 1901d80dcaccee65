"""What is told beside a band: moments, positions, strength, range, warnings."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ladderband.numerics.absolute_scale import SCALES, Strength, strength
from ladderband.numerics.axis import in_unit
from ladderband.numerics.band import (
    Sampling,
)
from ladderband.numerics.line_shape import (
    Broadening,
)
from ladderband.numerics.moments import skewness, vertical_energy
from ladderband.numerics.transition import Floats, Process
from ladderband.usecases.bands_question import Band, BandMoments, BandsQuestion, Positions, Species
from ladderband.usecases.kept_transitions import KeptTransition


@dataclass(frozen=True)
class Part:
    """One species of one band, planned."""

    species: Species
    share: float
    kept: KeptTransition
    shape: Broadening
    sampling: Sampling
    energies: Floats


def mixture_moments(question: BandsQuestion, parts: list[Part]) -> BandMoments:
    """Moments of all lines of all species, about their common mean."""
    weights = np.array([part.share for part in parts])
    if SCALES[question.scale].power:
        weights = weights * np.array([part.kept.modes.total for part in parts])
        weights = weights / weights.sum()
    means = np.array([positions(part).first_moment_cm1 for part in parts])
    variances = np.array([part.kept.moments.variance for part in parts])
    signs = np.array([part.species.transition.direction for part in parts])
    thirds = signs * np.array([part.kept.moments.third for part in parts])
    mean = float(weights @ means)
    off = means - mean
    variance = float(weights @ (variances + off**2))
    third = float(weights @ (thirds + 3.0 * off * variances + off**3))
    deviation = math.sqrt(max(variance, 0.0))
    return BandMoments(mean, deviation, skewness(third, deviation))


def positions(part: Part) -> Positions:
    transition = part.species.transition
    sign, origin = transition.direction, transition.origin_cm1
    zero_points = 0.5 * float((transition.wavenumbers_final - transition.wavenumbers_initial).sum())
    vertical = vertical_energy(transition) - zero_points + part.shape.shift
    mean = part.kept.moments.mean + part.shape.shift
    return Positions(origin, origin + sign * vertical, origin + sign * mean)


def moments_on_axis(wavenumbers: Floats, plain: Floats) -> BandMoments | None:
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


def mixture_strength(question: BandsQuestion, process: Process, parts: list[Part]) -> Strength:
    """Shares as mole fractions: moments squared, oscillator strengths and rates add up."""
    total, mean, cube = 0.0, 0.0, 0.0
    for part in parts:
        weight = part.share * part.kept.modes.total
        position = positions(part).first_moment_cm1
        lines = part.kept.moments
        sign = part.species.transition.direction
        total += weight
        mean += weight * position
        cube += weight * (position**3 + 3.0 * position * lines.variance + sign * lines.third)
    return strength(process, total, mean / total, cube / total)


def lines_range(parts: list[Part]) -> tuple[float, float]:
    ends = []
    for part in parts:
        energies = part.kept.energy_range(1e-6)
        sign, origin = part.species.transition.direction, part.species.transition.origin_cm1
        ends += [origin + sign * (end + part.shape.shift) for end in (energies.low, energies.high)]
    return min(ends), max(ends)


def stokes_shifts(question: BandsQuestion, found: tuple[Band, ...]) -> tuple[float, ...]:
    if not question.both_directions:
        return ()
    half = len(found) // 2
    return tuple(
        (one.moments.mean_cm1 - other.moments.mean_cm1)
        * (1.0 if one.process == "absorption" else -1.0)
        for one, other in zip(found[:half], found[half:], strict=True)
    )


def band_warnings(question: BandsQuestion, found: tuple[Band, ...]) -> tuple[str, ...]:
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
