"""Request and answer of ``POST /v1/bands``."""

from __future__ import annotations

from typing import Any, get_args

import numpy as np
from marshmallow import ValidationError

from ladderband.numerics.absolute_scale import Scale
from ladderband.numerics.axis import AxisUnit
from ladderband.schemas import ranges
from ladderband.schemas.axis import AxisSchema, axis_of
from ladderband.schemas.base import (
    NUMBER,
    NUMBERS,
    AnswerSchema,
    Question,
    StrictSchema,
    accuracy_part,
    completeness_part,
)
from ladderband.schemas.fields import (
    Choice,
    Many,
    Number,
    Numbers,
    Objects,
    Part,
    Reply,
    Truth,
    Whole,
)
from ladderband.schemas.line_list import LineColumnsSchema, line_columns
from ladderband.schemas.line_shape import LineShapeSchema, line_shape_of
from ladderband.schemas.transition import TransitionSchema
from ladderband.usecases.bands_question import Band, BandsAnswer, BandsQuestion, Species

MAX_SPECIES = 20
MAX_TEMPERATURES = 50

_WEIGHT = ranges.Range(1e-9, 1e9)


class WeightedTransitionSchema(TransitionSchema[Question]):
    """A transition and its share in a mixture."""

    weight = Number(
        "Share of this species; shares are scaled to sum 1. A mole fraction on absolute scales, the "
        "share of the band's area on the others. Default 1.",
        _WEIGHT,
        load_default=1.0,
        example=1.0,
    )

    def species(self, data: dict[str, Any], notes: list[str]) -> Species:
        """The species of checked members."""
        return Species(self.transition(data, notes), data["weight"])


class FurtherSpecies(WeightedTransitionSchema[Any]):
    """One more conformer or species of the mixture."""


class BandsRequest(WeightedTransitionSchema[BandsQuestion]):
    """A transition, an axis and what turns lines into a band."""

    axis = Part(AxisSchema, "The axis.", required=True)
    line_shape = Part(LineShapeSchema, "The line shape.", required=True)
    scale = Choice(
        "relative: largest value 1. unit_area: area 1 over all of the axis unit. Neither carries "
        "factors of the wavenumber. Absorption: molar_absorption_coefficient (L mol^-1 cm^-1), "
        "cross_section (cm^2), with one factor of the wavenumber. Emission: photon_rate (photons "
        "s^-1 per axis unit, three factors), radiated_power (W per axis unit, four).",
        get_args(Scale),
        load_default="relative",
    )
    temperatures_k = Numbers(
        "Several temperatures: one band each, instead of temperature_k.",
        ranges.TEMPERATURE,
        max_size=MAX_TEMPERATURES,
        example=[77.0, 298.15],
    )
    both_directions = Truth(
        "Also the reverse process (absorption and emission), and the Stokes shift. Default false.",
        load_default=False,
    )
    further_species = Objects(
        FurtherSpecies, "Further conformers or species.", max_size=MAX_SPECIES - 1
    )
    tolerance = Number(
        "Bound aimed at, relative to the band's maximum. Default 1e-6.",
        ranges.Range(1e-12, 0.01),
        load_default=BandsQuestion.tolerance,
        example=1e-6,
    )
    label_lines = Whole(
        "So many of the strongest lines on the axis, of each species, ride along with their "
        "assignment, down to a hundredth of the strongest. Default 0.",
        ranges.Range(0, 1000),
        load_default=0,
        example=20,
    )

    def build(self, data: dict[str, Any], notes: list[str]) -> BandsQuestion:
        further = self.fields["further_species"].schema  # type: ignore[attr-defined]
        species = [self.species(data, notes)]
        wrong = {}
        for index, entry in enumerate(data.get("further_species", [])):
            try:
                species.append(further.species(entry, notes))
            except ValidationError as error:
                wrong[index] = error.messages
        if wrong:
            raise ValidationError({"further_species": wrong})
        return BandsQuestion(
            species=tuple(species),
            axis=axis_of(data["axis"]),
            line_shape=line_shape_of(data["line_shape"]),
            scale=data["scale"],
            temperatures_k=tuple(data.get("temperatures_k", np.empty(0)).tolist()),
            both_directions=data["both_directions"],
            tolerance=data["tolerance"],
            label_lines=data["label_lines"],
        )


class AxisColumnSchema(StrictSchema):
    """The points the intensities belong to."""

    unit = Reply("Unit of the axis.", {"type": "string", "enum": list(get_args(AxisUnit))})
    values = Reply("The points, ascending.", NUMBERS)


class MomentsSchema(StrictSchema):
    """Moments along the wavenumber axis."""

    mean_cm1 = Reply("Mean, cm^-1.", NUMBER)
    standard_deviation_cm1 = Reply("Standard deviation, cm^-1.", NUMBER)
    skewness = Reply("Third central moment / standard deviation^3.", NUMBER)


class PositionsSchema(StrictSchema):
    """Landmarks of one species' band."""

    origin_cm1 = Reply("The 0-0 line, cm^-1.", NUMBER)
    vertical_cm1 = Reply(
        "Difference of the potentials at the initial minimum (bath included), cm^-1.", NUMBER
    )
    first_moment_cm1 = Reply("Mean of its lines (bath included), cm^-1.", NUMBER)


class StrengthSchema(StrictSchema):
    """Numbers of the whole transition."""

    moment2_debye2 = Reply("<mu^2> of the initial state, debye^2.", NUMBER)
    oscillator_strength = Reply("Absorption, dimensionless.", NUMBER, required=False)
    einstein_a_s = Reply("Emission: spontaneous rate, s^-1.", NUMBER, required=False)
    radiative_lifetime_s = Reply("Emission: 1 / Einstein A, s.", NUMBER, required=False)


class LabelsSchema(LineColumnsSchema):
    """Assigned lines of one species, strongest first, and how far was looked."""

    completeness = completeness_part()


class BandSchema(StrictSchema):
    """One band."""

    process = Reply("Direction of this band.", {"type": "string"})
    temperature_k = Reply("Its temperature, K.", NUMBER)
    intensity = Reply("One value a point of the axis, in intensity_unit.", NUMBERS)
    moments = Part(
        MomentsSchema, "Of the lines: closed form, bath's shift included.", required=True
    )
    moments_on_axis = Part(
        MomentsSchema, "Of the broadened band on this axis, by the trapezoidal rule."
    )
    positions = Many(PositionsSchema, "One entry a species.", required=True)
    strength = Part(StrengthSchema, "Numbers of the whole transition.", required=True)
    range_cm1 = Reply("Holds all but 1e-6 of the lines, cm^-1.", NUMBERS)
    lines = Many(
        LabelsSchema,
        "With label_lines: the strongest lines found by a short enumeration, one entry a species; "
        "positions without the shift of a bath.",
    )
    accuracy = accuracy_part("Of the intensities, in their unit.")


class BandsResponse(AnswerSchema, BandSchema):
    """The band on the axis; further temperatures and directions in further_bands."""

    axis = Part(AxisColumnSchema, "The axis.", required=True)
    scale = Reply("The scale asked for.", {"type": "string"})
    intensity_unit = Reply("Unit of the intensities.", {"type": "string"})
    further_bands = Many(
        BandSchema,
        "Further bands: temperature by temperature, then the reverse process in the same order.",
        required=True,
    )
    stokes_shift_cm1 = Reply(
        "Mean of absorption minus mean of emission, cm^-1, one entry a temperature; with "
        "both_directions.",
        NUMBERS,
        required=False,
    )


def band_members(band: Band) -> dict[str, Any]:
    """JSON members of one band; what does not belong to the process is left out."""
    strength = {
        name: value
        for name in StrengthSchema().fields
        if (value := getattr(band.strength, name)) is not None
    }
    members: dict[str, Any] = {
        "process": band.process,
        "temperature_k": band.temperature_k,
        "intensity": band.intensity,
        "moments": band.moments,
        "positions": list(band.positions),
        "strength": strength,
        "range_cm1": list(band.range_cm1),
        "accuracy": band.accuracy,
    }
    if band.moments_on_axis is not None:
        members["moments_on_axis"] = band.moments_on_axis
    if band.lines:
        members["lines"] = [
            {**line_columns(found), "completeness": found.completeness} for found in band.lines
        ]
    return members


def bands_members(question: BandsQuestion, answer: BandsAnswer) -> dict[str, Any]:
    """JSON members of an answer."""
    members = {
        "axis": {"unit": answer.axis.unit, "values": answer.axis.values},
        "scale": question.scale,
        "intensity_unit": answer.intensity_unit,
        **band_members(answer.bands[0]),
        "further_bands": [band_members(band) for band in answer.bands[1:]],
    }
    if answer.stokes_shift_cm1:
        members["stokes_shift_cm1"] = list(answer.stokes_shift_cm1)
    return members
