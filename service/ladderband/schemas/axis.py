"""The axis of a band, as a range or as points."""

from __future__ import annotations

from typing import Any, get_args

import numpy as np
from marshmallow import ValidationError

from ladderband.numerics.axis import Axis, AxisUnit
from ladderband.numerics.errors import DomainError
from ladderband.schemas import ranges
from ladderband.schemas.base import StrictSchema
from ladderband.schemas.fields import Choice, Complaint, Number, Numbers, Whole

MAX_POINTS = 100_001
_VALUE = ranges.Range(-1e9, 1e9)
_STEP = ranges.Range(0.0, 1e9, low_open=True)


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
