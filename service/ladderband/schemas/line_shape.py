"""What turns lines into a band: widths, baths, the instrument."""

from __future__ import annotations

from typing import Any

import numpy as np
from marshmallow import ValidationError

from ladderband.numerics.line_shape import Bath, InstrumentFunction
from ladderband.schemas import ranges
from ladderband.schemas.base import StrictSchema
from ladderband.schemas.fields import Choice, Complaint, Number, Numbers, Part
from ladderband.usecases.bands_question import LineShape

_WIDTH = ranges.Range(0.0, 1e5, low_open=True)


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
