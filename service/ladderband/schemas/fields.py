"""Strict field classes: what JSON Schema calls a number is taken, everything else is refused.

marshmallow's own numbers take strings, and its integers refuse 95.0 which JSON Schema counts as an
integer. Each class here checks its own range and writes its own JSON Schema, so that what is
checked and what is published cannot differ. A refusal is a :class:`Complaint`.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from marshmallow import ValidationError, fields

from ladderband.numerics.oscillators import Column
from ladderband.schemas.ranges import Range

CONTROL = re.compile("[\x00-\x1f]")
NUMERIC = frozenset({int, float})
NUMERIC_OR_TEXT = frozenset({int, float, str})


@dataclass(frozen=True, slots=True)
class Complaint:
    """What is wrong with one member, what is allowed there, and a value that would do."""

    detail: str
    allowed: str | None = None
    example: Any = None


class Described(fields.Field[Any]):
    """A field with a description, an example and its own JSON Schema (``json_schema``)."""

    allowed = "any value"

    def __init__(self, description: str, *, example: Any = None, **kwargs: Any) -> None:
        metadata = {"description": description}
        super().__init__(metadata=metadata, **kwargs)
        self.description, self.example = description, example
        self.error_messages["required"] = self._complain("This member is required.")
        self.error_messages["null"] = self._complain("null is not allowed here.")

    def _complain(self, detail: str) -> list[Complaint]:
        return [Complaint(detail, self.allowed, self.example)]

    def refuse(self, detail: str, index: int | None = None) -> ValidationError:
        """The error for this member, or for one entry of it."""
        complaint = self._complain(detail)
        return ValidationError(complaint if index is None else {index: complaint})

    def json_schema(self) -> dict[str, Any]:
        """JSON Schema keywords of this field."""
        raise NotImplementedError


class Number(Described):
    """A finite JSON number inside a range -> float."""

    def __init__(self, description: str, within: Range, **kwargs: Any) -> None:
        self.within = within
        self.allowed = f"a number, {within.text()}"
        super().__init__(description, **kwargs)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> float:
        if type(value) not in NUMERIC:
            raise self.refuse("This is not a number.")
        if not self.within.holds(value):
            raise self.refuse(f"{value:.17g} is outside the allowed range.")
        return float(value)

    def json_schema(self) -> dict[str, Any]:
        return {"type": "number", **self.within.json_schema()}


class Whole(Number):
    """A whole number inside a range -> int; 95.0 is one, 95.5, "95" and true are not."""

    def __init__(self, description: str, within: Range, **kwargs: Any) -> None:
        super().__init__(description, within, **kwargs)
        self.allowed = f"a whole number, {within.text()}"

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> int:
        number = super()._deserialize(value, attr, data, **kwargs)
        if not number.is_integer():
            raise self.refuse(f"{number:.17g} is not a whole number.")
        return int(number)

    def json_schema(self) -> dict[str, Any]:
        bounds = {key: int(value) for key, value in self.within.json_schema().items()}
        return {"type": "integer", **bounds}


class Truth(Described):
    """true or false -> bool."""

    allowed = "true or false"

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> bool:
        if type(value) is not bool:
            raise self.refuse("This is neither true nor false.")
        return value

    def json_schema(self) -> dict[str, Any]:
        return {"type": "boolean"}


class Text(Described):
    """A string of limited length without control characters -> str."""

    def __init__(self, description: str, max_length: int, **kwargs: Any) -> None:
        self.max_length = max_length
        self.allowed = f"a string of at most {max_length} characters"
        super().__init__(description, **kwargs)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if type(value) is not str:
            raise self.refuse("This is not a string.")
        if len(value) > self.max_length:
            raise self.refuse(f"This string has {len(value)} characters.")
        if CONTROL.search(value):
            raise self.refuse("This string holds control characters.")
        return value

    def json_schema(self) -> dict[str, Any]:
        return {"type": "string", "maxLength": self.max_length, "pattern": r"^[^\u0000-\u001f]*$"}


class Choice(Described):
    """One of a few words -> str."""

    def __init__(self, description: str, words: Sequence[str], **kwargs: Any) -> None:
        self.words = tuple(words)
        self.allowed = "one of: " + ", ".join(self.words)
        kwargs.setdefault("example", self.words[0])
        super().__init__(description, **kwargs)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> str:
        if type(value) is not str or value not in self.words:
            raise self.refuse("This is none of the allowed words.")
        return value

    def json_schema(self) -> dict[str, Any]:
        return {"type": "string", "enum": list(self.words)}


DECIMAL_TEXT = re.compile(r"[+-]?[0-9]+(\.[0-9]+)?([eE][+-]?[0-9]{1,3})?")
DECIMAL_LENGTH = 1100
"""Characters of a decimal string: the 1000 digits that can be asked for, sign, point, exponent."""
DECIMAL_SCHEMA = {
    "type": "string",
    "maxLength": DECIMAL_LENGTH,
    "pattern": rf"^{DECIMAL_TEXT.pattern}$",
}


def exact_decimal(text: str) -> Fraction | None:
    """The exact value of a decimal string, None when it is not one or too long.

    Length and exponent are limited before any arithmetic, so no string is dear: the exponent has at
    most three digits, hence the fraction at most 2100 digits.
    """
    if len(text) > DECIMAL_LENGTH or DECIMAL_TEXT.fullmatch(text) is None:
        return None
    return Fraction(text)


class DecimalColumn(Described):
    """One number or decimal string, or a list of them -> :class:`Given`.

    A number is a double, taken exactly as that double; a decimal string is taken exactly.
    """

    def __init__(self, description: str, within: Range, max_size: int, **kwargs: Any) -> None:
        self.within, self.max_size = within, max_size
        self.allowed = (
            f"a number or decimal string (at most {DECIMAL_LENGTH} characters), {within.text()}, "
            f"or a list of 1 to {max_size} of them"
        )
        super().__init__(description, **kwargs)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Given:
        if type(value) is not list:
            return Given(self._column([value], scalar=True), is_list=False)
        if not 1 <= len(value) <= self.max_size:
            raise self.refuse(f"This list has {len(value)} entries.")
        return Given(self._column(value, scalar=False), is_list=True)

    def _column(self, entries: list[Any], *, scalar: bool) -> Column:
        kinds = set(map(type, entries))  # one pass in C: no bool, null, list or object gets through
        if not kinds <= NUMERIC_OR_TEXT:
            index = next(i for i, x in enumerate(entries) if type(x) not in NUMERIC_OR_TEXT)
            raise self.refuse("This is not a number.", None if scalar else index)
        column = self._fractions(entries, scalar) if str in kinds else np.array(entries, np.float64)
        outside = self._first_outside(column)
        if outside is not None:
            raise self.refuse("This is outside the allowed range.", None if scalar else outside)
        return column

    def _fractions(self, entries: list[Any], scalar: bool) -> tuple[Fraction, ...]:
        column = []
        for index, entry in enumerate(entries):
            value = exact_decimal(entry) if type(entry) is str else Fraction(entry)
            if value is None:
                detail = f"This string of {len(entry)} characters is not a decimal number."
                raise self.refuse(detail, None if scalar else index)
            column.append(value)
        return tuple(column)

    def _first_outside(self, column: Column) -> int | None:
        if isinstance(column, np.ndarray):
            return self.within.first_outside(column)
        return next((i for i, x in enumerate(column) if not self.within.holds(x)), None)

    def json_schema(self) -> dict[str, Any]:
        number = {"type": "number", **self.within.json_schema()}
        entry = {"anyOf": [number, DECIMAL_SCHEMA]}
        column = {"type": "array", "items": entry, "minItems": 1, "maxItems": self.max_size}
        return {"anyOf": [number, DECIMAL_SCHEMA, column]}


@dataclass(frozen=True, slots=True)
class Given:
    """A column as it came: one value (``is_list`` false) or several."""

    column: Column
    is_list: bool

    def repeated(self, size: int) -> Column:
        """The column with ``size`` entries: a single value stands for all."""
        if len(self.column) == size:
            return self.column
        if isinstance(self.column, np.ndarray):
            return np.full(size, self.column[0])
        return self.column * size


class Numbers(Described):
    """A list of finite numbers inside a range -> float64 array (n,), checked as a whole.

    A list of 10^5 numbers takes 5 ms; a list of single number fields 250 ms.
    """

    def __init__(
        self, description: str, within: Range, *, min_size: int = 1, max_size: int, **kwargs: Any
    ) -> None:
        self.within, self.min_size, self.max_size = within, min_size, max_size
        size = str(max_size) if min_size == max_size else f"{min_size} to {max_size}"
        self.allowed = f"a list of {size} numbers, each {within.text()}"
        super().__init__(description, **kwargs)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        if type(value) is not list:
            raise self.refuse("This is not a list.")
        if not self.min_size <= len(value) <= self.max_size:
            raise self.refuse(f"This list has {len(value)} entries.")
        if not set(map(type, value)) <= NUMERIC:
            index = next(i for i, x in enumerate(value) if type(x) not in NUMERIC)
            raise self.refuse("This is not a number.", index)
        array = np.array(value, np.float64)
        outside = self.within.first_outside(array)
        if outside is not None:
            raise self.refuse("This is outside the allowed range.", outside)
        return array

    def json_schema(self) -> dict[str, Any]:
        items = {"type": "number", **self.within.json_schema()}
        return {
            "type": "array",
            "items": items,
            "minItems": self.min_size,
            "maxItems": self.max_size,
        }


class Matrix(Described):
    """A list of rows of one length -> float64 array (rows, columns)."""

    def __init__(
        self, description: str, within: Range, *, rows: int, columns: int, **kwargs: Any
    ) -> None:
        self.row = Numbers(description, within, max_size=columns)
        self.rows = rows
        self.allowed = f"a list of 1 to {rows} rows of one length, each number {within.text()}"
        super().__init__(description, **kwargs)

    def _deserialize(self, value: Any, attr: Any, data: Any, **kwargs: Any) -> Any:
        if type(value) is not list or not 1 <= len(value) <= self.rows:
            raise self.refuse("This is not a list of rows, or has too many or none.")
        rows = []
        for index, entry in enumerate(value):
            try:
                rows.append(self.row.deserialize(entry))
            except ValidationError as error:
                raise ValidationError({index: error.messages}) from None
            if len(rows[index]) != len(rows[0]):
                raise self.refuse(
                    f"This row has {len(rows[index])} numbers, the first {len(rows[0])}.", index
                )
        return np.array(rows)

    def json_schema(self) -> dict[str, Any]:
        return {
            "type": "array",
            "items": self.row.json_schema(),
            "minItems": 1,
            "maxItems": self.rows,
        }


class Objects(fields.Nested):
    """A list of 1..max_size objects of one schema -> list of their checked members."""

    def __init__(self, schema: Any, description: str, *, max_size: int, **kwargs: Any) -> None:
        super().__init__(schema, many=True, metadata={"description": description}, **kwargs)
        self.max_size = max_size
        self.allowed = f"a list of 1 to {max_size} objects"
        self.error_messages["required"] = [Complaint("This member is required.", self.allowed)]
        self.error_messages["null"] = [Complaint("null is not allowed here.", self.allowed)]

    def _deserialize(self, value: Any, attr: Any, data: Any, *_: Any, **kwargs: Any) -> Any:
        if type(value) is not list:
            raise ValidationError([Complaint("This is not a list.", self.allowed)])
        if not 1 <= len(value) <= self.max_size:
            raise ValidationError([Complaint(f"This list has {len(value)} entries.", self.allowed)])
        loaded, wrong = [], {}
        for index, entry in enumerate(value):
            try:
                loaded.append(self.schema.load(entry))
            except ValidationError as error:
                wrong[index] = error.messages
        if wrong:
            raise ValidationError(wrong)
        return loaded

    def json_schema(self) -> dict[str, Any]:
        return {"minItems": 1, "maxItems": self.max_size}


class Part(fields.Nested):
    """One nested object -> its checked members."""

    def __init__(self, schema: Any, description: str, **kwargs: Any) -> None:
        super().__init__(schema, metadata={"description": description}, **kwargs)
        self.error_messages["required"] = [Complaint("This member is required.", "an object")]
        self.error_messages["null"] = [Complaint("null is not allowed here.", "an object")]

    def _deserialize(self, value: Any, attr: Any, data: Any, *_: Any, **kwargs: Any) -> Any:
        return self.schema.load(value)

    def json_schema(self) -> dict[str, Any]:
        return {}


class Many(fields.Nested):
    """A list of objects in an answer: described for the document, never loaded."""

    def __init__(self, schema: Any, description: str, **kwargs: Any) -> None:
        super().__init__(schema, many=True, metadata={"description": description}, **kwargs)

    def json_schema(self) -> dict[str, Any]:
        return {}


class Reply(Described):
    """A member of an answer: described for the document, never loaded."""

    def __init__(self, description: str, schema: Mapping[str, Any], **kwargs: Any) -> None:
        self.schema_ = dict(schema)
        super().__init__(description, required=kwargs.pop("required", True), **kwargs)

    def json_schema(self) -> dict[str, Any]:
        return self.schema_
