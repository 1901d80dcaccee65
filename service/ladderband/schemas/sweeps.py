"""Request of ``/v1/sweeps``."""

from __future__ import annotations

from typing import Any

from marshmallow import ValidationError

from ladderband.schemas import ranges
from ladderband.schemas.base import StrictSchema
from ladderband.schemas.fields import (
    Choice,
    Complaint,
    Described,
    Number,
    Objects,
    Part,
    Text,
    Whole,
)

POINTER_LENGTH = 400
MOST_VALUES = 1_000_000
MOST_COLLECTED = 200
MOST_VARIED = 20
TABLE_BYTES = 16_000_000


class AnyObject(Described):
    """A JSON object whose members another schema checks."""

    allowed = "an object"

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> dict[str, Any]:
        if type(value) is not dict:
            raise self.refuse("This is not an object.")
        return value

    def json_schema(self) -> dict[str, Any]:
        return {"type": "object", "additionalProperties": {}}


class AnyValues(Described):
    """A list of JSON values of any type."""

    allowed = f"a list of 1 to {MOST_VALUES} values"

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> list[Any]:
        if type(value) is not list or not 1 <= len(value) <= MOST_VALUES:
            raise self.refuse("This is not a list, or it has none or too many values.")
        return value

    def json_schema(self) -> dict[str, Any]:
        return {"type": "array", "minItems": 1, "maxItems": MOST_VALUES, "items": {}}


class Pointers(Described):
    """A list of JSON pointers."""

    allowed = f"a list of 1 to {MOST_COLLECTED} JSON pointers, each once"

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> list[str]:
        if type(value) is not list or not 1 <= len(value) <= MOST_COLLECTED:
            raise self.refuse("This is not a list, or it has none or too many entries.")
        for number, entry in enumerate(value):
            if type(entry) is not str or not entry.startswith("/") or len(entry) > POINTER_LENGTH:
                raise ValidationError(
                    {number: [Complaint("This is not a JSON pointer.", "text from /", "/sums/0")]}
                )
        if len(set(value)) < len(value):
            raise self.refuse("An entry is there twice.")
        return value

    def json_schema(self) -> dict[str, Any]:
        entry = {"type": "string", "maxLength": POINTER_LENGTH, "pattern": "^/"}
        return {
            "type": "array",
            "minItems": 1,
            "maxItems": MOST_COLLECTED,
            "uniqueItems": True,
            "items": entry,
        }


class LongText(Described):
    """Text of several lines."""

    allowed = f"a string of at most {TABLE_BYTES} characters"

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if type(value) is not str or len(value) > TABLE_BYTES:
            raise self.refuse("This is not a string, or it is too long.")
        return value

    def json_schema(self) -> dict[str, Any]:
        return {"type": "string", "maxLength": TABLE_BYTES}


class SweepRangeSchema(StrictSchema):
    """Values from start to stop, both included."""

    start = Number("First value.", ranges.Range(-1e12, 1e12), required=True, example=100.0)
    stop = Number("Last value.", ranges.Range(-1e12, 1e12), required=True, example=500.0)
    points = Whole("How many.", ranges.Range(1, MOST_VALUES), required=True, example=41)
    spacing = Choice("Even steps, or even steps of the logarithm.", ["linear", "logarithmic"])


class SweepAxisSchema(StrictSchema):
    """One member of the request and the values it takes."""

    exactly_one_of = ("values", "range")
    pointer = Text(
        "JSON pointer of the member.", POINTER_LENGTH, required=True, example="/temperature_k"
    )
    values = AnyValues("The values, of any type.", example=[77.0, 298.15])
    range = Part(SweepRangeSchema, "The values as a range.")


class SweepRequest(StrictSchema):
    """One request with some members varied, and what to collect from each answer."""

    exactly_one_of = ("vary", "table_csv")
    resource = Text("Name of the compute resource.", 40, required=True, example="lines")
    request = AnyObject("The request that is varied, as for that resource.", required=True)
    vary = Objects(SweepAxisSchema, "Members to vary.", max_size=MOST_VARIED)
    combine = Choice(
        "product: all combinations, the last varied fastest. zip: in step.", ["product", "zip"]
    )
    table_csv = LongText(
        "Instead of vary: CSV with JSON pointers as its header row, one point a row.",
        example="/temperature_k\n77\n298.15\n",
    )
    collect = Pointers(
        "JSON pointers into the answer; a list gives a point as many rows as it is long.",
        required=True,
        example=["/completeness/captured"],
    )

    def read(self, body: Any) -> dict[str, Any]:
        """The checked document as it goes on record; raises ValidationError."""
        data: dict[str, Any] = self.load(body)
        self.chosen(data)
        return data
