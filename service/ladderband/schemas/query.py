"""Query strings: each parameter once, numbers read from text, then the body's own schema.

A short form only turns text into the members of the request body; ranges are checked once more by
the schema of the body, which stays the only authority.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from marshmallow import ValidationError

from ladderband.schemas.base import StrictSchema
from ladderband.schemas.fields import DECIMAL_TEXT, Complaint, Described, Number, Text
from ladderband.schemas.ranges import Range

QUERY_LIST_LENGTH = 400


def number_of(text: str) -> float | None:
    """The double of a decimal text, None when it is not one; 400 characters at most."""
    if len(text) > 400 or DECIMAL_TEXT.fullmatch(text) is None:
        return None
    value = float(text)
    return value if math.isfinite(value) else None


class QueryNumber(Number):
    """One number as text."""

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> float:
        number = number_of(value)
        if number is None:
            raise self.refuse("This is not a number.")
        return super()._deserialize(number, attr, data, **kwargs)


class QueryText(Text):
    """One short text, of a few words when ``words`` are given."""

    def __init__(
        self, description: str, max_length: int, *, words: tuple[str, ...] = (), **kwargs: Any
    ) -> None:
        super().__init__(description, max_length, **kwargs)
        self.words = words
        if words:
            self.allowed = "one of: " + ", ".join(words)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        text = super()._deserialize(value, attr, data, **kwargs)
        if self.words and text not in self.words:
            raise self.refuse("This is none of the allowed words.")
        return text

    def json_schema(self) -> dict[str, Any]:
        if self.words:
            return {"type": "string", "enum": list(self.words)}
        return super().json_schema()


class QueryList(Described):
    """Comma-separated numbers -> list of floats."""

    def __init__(self, description: str, max_size: int, **kwargs: Any) -> None:
        self.max_size = max_size
        self.allowed = f"1 to {max_size} numbers, comma-separated"
        super().__init__(description, **kwargs)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> list[float]:
        if len(value) > QUERY_LIST_LENGTH:
            raise self.refuse(f"This text has {len(value)} characters.")
        parts = value.split(",")
        if len(parts) > self.max_size:
            raise self.refuse(f"This list has {len(parts)} entries.")
        numbers = [number_of(part.strip()) for part in parts]
        if None in numbers:
            raise self.refuse("This is not a list of numbers.", numbers.index(None))
        return numbers  # type: ignore[return-value]

    def json_schema(self) -> dict[str, Any]:
        return {
            "type": "string",
            "pattern": r"^[-+0-9.eE]+(,[-+0-9.eE]+)*$",
            "maxLength": QUERY_LIST_LENGTH,
        }


class QuerySchema(StrictSchema):
    """Parameters of a query string."""

    def read(self, parameters: Mapping[str, list[str]]) -> dict[str, Any]:
        """Checked parameters, each given once.

        Raises
        ------
        ValidationError
            A parameter is unknown, repeated or malformed.
        """
        repeated = {
            name: [Complaint("This parameter is given more than once.", "once")]
            for name, values in parameters.items()
            if len(values) > 1
        }
        if repeated:
            raise ValidationError(repeated)
        loaded: dict[str, Any] = self.load({name: values[0] for name, values in parameters.items()})
        return loaded

    def body(self, data: dict[str, Any]) -> dict[str, Any]:
        """The request body these parameters stand for."""
        return data

    @staticmethod
    def rows(columns: Mapping[str, list[float]]) -> list[dict[str, float]]:
        """Columns of one length as a list of objects.

        Raises
        ------
        ValidationError
            The columns have different lengths.
        """
        lengths = {len(column) for column in columns.values()}
        if len(lengths) > 1:
            name = min(columns, key=lambda key: len(columns[key]))
            detail = f"This has {min(lengths)} values, another parameter has {max(lengths)}."
            raise ValidationError({name: [Complaint(detail, "lists of one length")]})
        return [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]


THEMES = ("light", "dark")


class ViewQuery(QuerySchema):
    """How an answer is shown: format, and size, title and theme of a plot."""

    format = QueryText("Format by name instead of by Accept, for links.", 20, example="svg")
    width = QueryNumber(
        "Width of a plot, pixels.", Range(160, 4000), load_default=760.0, example=760
    )
    height = QueryNumber(
        "Height of a plot, pixels.", Range(120, 4000), load_default=420.0, example=420
    )
    title = QueryText("Title of a plot.", 200, load_default="", example="Ring breathing")
    theme = QueryText(
        "Colours of a plot: light or dark.", 10, words=THEMES, load_default="light", example="light"
    )
    array = QueryText("Which array the npy format holds; see the operation.", 40, load_default="")


_PLOTS = frozenset({"svg", "png"})
VIEW_HELP = {
    "width": _PLOTS,
    "height": _PLOTS,
    "title": _PLOTS,
    "theme": _PLOTS,
    "array": frozenset({"npy"}),
}
"""View parameters and the formats they matter for."""
