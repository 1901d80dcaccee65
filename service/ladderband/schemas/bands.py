"""Request and answer of ``POST /v1/bands``."""

from __future__ import annotations

from typing import Any, get_args

import numpy as np
from marshmallow import ValidationError

from ladderband.numerics.absolute_scale import Scale
from ladderband.numerics.axis import Axis, AxisUnit
from ladderband.numerics.errors import DomainError
from ladderband.numerics.line_shape import Bath, InstrumentFunction
from ladderband.schemas import ranges
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
    Complaint,
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
from ladderband.schemas.transition import TransitionSchema
from ladderband.usecases.bands import Band, BandsAnswer, BandsQuestion, LineShape, Species

MAX_SPECIES = 20
MAX_TEMPERATURES = 50
MAX_POINTS = 100_001

_VALUE = ranges.Range(-1e9, 1e9)
_WIDTH = ranges.Range(0.0, 1e5, low_open=True)
_STEP = ranges.Range(0.0, 1e9, low_open=True)
_WEIGHT = ranges.Range(1e-9, 1e9)


class AxisSchema(StrictSchema):
    """The axis: start, stop and points or step; or the points themselves."""

    unit = Choice(
        "Unit of the axis; nm is the vacuum wavelength. Densities are per this unit.",
        get_args(AxisUnit),
        required=True,
    )
    start = Number("First point.", _VALUE, example=24000.0)
    stop = Number("Last point (with a step: not passed).", _VALUE, example=36000.0)
    points = Whole(
        "Number of points from start to stop, both included.",
        ranges.Range(2, MAX_POINTS),
        example=601,
    )
    step = Number("Distance of points; instead of points.", _STEP, example=20.0)
    values = Numbers(
        "The points themselves, ascending; instead of start and stop.",
        _VALUE,
        max_size=MAX_POINTS,
    )


def axis_of(data: dict[str, Any]) -> Axis:
    """The axis of checked members.

    Raises
    ------
    ValidationError
        Members missing or too many, a range that does not ascend, too many points.
    """
    try:
        return Axis(data["unit"], _values(data))
    except DomainError as error:
        raise ValidationError({"axis": [Complaint(str(error), "ascending points")]}) from None


def _values(data: dict[str, Any]) -> Any:
    if "values" in data:
        extra = [name for name in ("start", "stop", "points", "step") if name in data]
        if extra:
            raise _axis_error(extra[0], "Give either values or start and stop, not both.")
        return data["values"]
    for name in ("start", "stop"):
        if name not in data:
            raise _axis_error(name, "This member is required without values.")
    start, stop = data["start"], data["stop"]
    if not start < stop:
        raise _axis_error("stop", f"The axis is empty or descends: stop {stop:.10g} is not above "
                          f"start {start:.10g}.", "stop > start")  # fmt: skip
    if ("points" in data) == ("step" in data):
        raise _axis_error("points", "Give exactly one of points and step.")
    if "points" in data:
        return np.linspace(start, stop, data["points"])
    count = int((stop - start) / data["step"] * (1.0 + 1e-12)) + 1
    if count > MAX_POINTS:
        raise _axis_error(
            "step", f"This step makes {count} points.", f"at most {MAX_POINTS} points"
        )
    return start + data["step"] * np.arange(count)


def _axis_error(member: str, detail: str, allowed: str = "") -> ValidationError:
    text = allowed or "values, or start and stop with one of points, step"
    return ValidationError({"axis": {member: [Complaint(detail, text)]}})


class BathSchema(StrictSchema):
    """A low-frequency bath that is displaced by the transition."""

    kind = Choice(
        "static: inhomogeneous Gaussian of variance 2 x reorganisation x kT. brownian: overdamped "
        "Brownian oscillator (high-temperature form). Both move absorption and emission apart by "
        "twice the reorganisation energy.",
        ("static", "brownian"),
        load_default="static",
    )
    reorganisation_cm1 = Number(
        "Reorganisation energy, cm^-1.", _WIDTH, required=True, example=300.0
    )
    relaxation_cm1 = Number(
        "Relaxation rate of a Brownian bath, cm^-1 (1 / (2 pi c tau)); needed for brownian.",
        _WIDTH,
        example=20.0,
    )


class InstrumentSchema(StrictSchema):
    """Response of the instrument as a table, linear between the points."""

    offset_cm1 = Numbers(
        "Offsets, ascending, cm^-1.",
        ranges.Range(-1e5, 1e5),
        min_size=2,
        max_size=1000,
        required=True,
        example=[-8.0, 0.0, 8.0],
    )
    weight = Numbers(
        "Weights >= 0; their scale does not matter.",
        ranges.Range(0.0, 1e9),
        min_size=2,
        max_size=1000,
        required=True,
        example=[0.0, 1.0, 0.0],
    )


class LineShapeSchema(StrictSchema):
    """What each line is replaced by; widths are full widths at half maximum."""

    kind = Choice(
        "Shape. voigt: Gaussian of fwhm_cm1 and Lorentzian of fwhm_lorentzian_cm1 together.",
        ("gaussian", "lorentzian", "voigt"),
        load_default="gaussian",
    )
    fwhm_cm1 = Number(
        "Full width at half maximum, cm^-1 (voigt: of the Gaussian). May be left out beside a bath.",
        _WIDTH,
        example=250.0,
    )
    fwhm_lorentzian_cm1 = Number(
        "voigt only: full width at half maximum of the Lorentzian, cm^-1.", _WIDTH
    )
    bath = Part(BathSchema, "A low-frequency bath. Default: none.")
    instrument = Part(InstrumentSchema, "The instrument's response. Default: none.")


def line_shape_of(data: dict[str, Any]) -> LineShape:
    """The line shape of checked members."""
    kind = data["kind"]
    if "fwhm_lorentzian_cm1" in data and kind != "voigt":
        raise _shape_error("fwhm_lorentzian_cm1", f"A {kind} shape has only fwhm_cm1.", "voigt")
    if kind == "voigt" and not {"fwhm_cm1", "fwhm_lorentzian_cm1"} <= set(data):
        missing = "fwhm_lorentzian_cm1" if "fwhm_cm1" in data else "fwhm_cm1"
        raise _shape_error(missing, "A Voigt shape needs both widths.", "fwhm above 0")
    if "fwhm_cm1" not in data and "bath" not in data:
        raise _shape_error(
            "fwhm_cm1", "A band on an axis needs lines with a width.", "fwhm above 0, or a bath"
        )
    return LineShape(
        kind,
        data.get("fwhm_cm1", 0.0),
        data.get("fwhm_lorentzian_cm1", 0.0),
        _bath(data.get("bath")),
        _instrument(data.get("instrument")),
    )


def _bath(data: dict[str, Any] | None) -> Bath | None:
    if data is None:
        return None
    if (data["kind"] == "brownian") != ("relaxation_cm1" in data):
        detail = "relaxation_cm1 belongs to a Brownian bath, which needs it."
        raise ValidationError(
            {"line_shape": {"bath": {"relaxation_cm1": [Complaint(detail, "brownian only")]}}}
        )
    return Bath(data["kind"], data["reorganisation_cm1"], data.get("relaxation_cm1", 0.0))


def _instrument(data: dict[str, Any] | None) -> InstrumentFunction | None:
    if data is None:
        return None
    offset, weight = data["offset_cm1"], data["weight"]
    wrong = None
    if len(offset) != len(weight):
        wrong = f"{len(offset)} offsets and {len(weight)} weights."
    elif not (np.diff(offset) > 0.0).all():
        wrong = "The offsets do not ascend."
    elif not np.trapezoid(weight, offset) > 0.0:
        wrong = "The weights have no area."
    if wrong:
        complaint = Complaint(wrong, "as many weights as ascending offsets, with an area above 0")
        raise ValidationError({"line_shape": {"instrument": [complaint]}})
    return InstrumentFunction(offset, weight)


def _shape_error(member: str, detail: str, allowed: str) -> ValidationError:
    return ValidationError({"line_shape": {member: [Complaint(detail, allowed)]}})


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
