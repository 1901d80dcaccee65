"""Sweeps: one request with some members varied, and the table of what was collected.

A sweep's request names a resource, a request for it, the members to vary (by JSON pointer, RFC
6901) and the members of the answer to collect. Points are numbered; the request of a point is made
when it is computed, so a sweep of a million points is as small as its lists.
"""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields, is_dataclass
from typing import Any

import numpy as np
import orjson

from ladderband.jobs.errors import SweepError
from ladderband.jobs.kinds import SWEEPS, Document

MAX_POINTS = 1_000_000


@dataclass(frozen=True)
class Range:
    """``points`` values from start to stop, both included, evenly spaced (or their logarithms)."""

    start: float
    stop: float
    points: int
    logarithmic: bool = False

    def __len__(self) -> int:
        return self.points

    def __getitem__(self, index: int) -> float:
        if index in (0, self.points - 1):  # the ends exactly as they were given
            return self.stop if index else self.start
        part = index / (self.points - 1)
        if self.logarithmic:
            return self.start * math.pow(self.stop / self.start, part)
        return self.start + (self.stop - self.start) * part


@dataclass(frozen=True)
class Axis:
    """A member of the request and the values it takes."""

    pointer: str
    values: Sequence[Any] | Range


@dataclass(frozen=True)
class Plan:
    """All points; ``product``: every combination, the last axis fastest; else in step."""

    resource: str
    base: Document
    axes: tuple[Axis, ...]
    product: bool
    collect: tuple[str, ...]

    @property
    def total(self) -> int:
        sizes = [len(axis.values) for axis in self.axes]
        return math.prod(sizes) if self.product else sizes[0]

    def values(self, point: int) -> list[Any]:
        """The varied members' values at one point, in the order of the axes."""
        if not self.product:
            return [axis.values[point] for axis in self.axes]
        found = []
        for axis in reversed(self.axes):
            point, index = divmod(point, len(axis.values))
            found.append(axis.values[index])
        return found[::-1]

    def request(self, point: int) -> Document:
        """The request of one point."""
        return varied(
            orjson.dumps(self.base), [axis.pointer for axis in self.axes], self.values(point)
        )

    def samples(self) -> list[int]:
        """First, last and some points between: what a submission is checked and estimated by."""
        last = self.total - 1
        return sorted({last * step // 6 for step in range(7)})


def parse_plan(document: Document, max_points: int = MAX_POINTS) -> Plan:
    """The plan of a sweep's request, whose members have been checked for type by the schema.

    Raises SweepError for pointers that lead nowhere or overlap, lists of unequal length that go in
    step, a sweep of sweeps, and more than ``max_points`` points.
    """
    if document["resource"] == SWEEPS:
        raise SweepError(
            "/resource", "A sweep cannot vary another sweep; vary its members instead."
        )
    axes = tuple(_axes(document))
    _check_pointers(document["request"], axes)
    plan = Plan(
        resource=document["resource"],
        base=document["request"],
        axes=axes,
        product=document.get("combine", "product") == "product" and "table_csv" not in document,
        collect=tuple(document["collect"]),
    )
    _check_size(plan, max_points)
    return plan


def _axes(document: Document) -> Iterator[Axis]:
    if "table_csv" in document:
        if "vary" in document:
            raise SweepError("/table_csv", "Give either vary or table_csv, not both.")
        yield from _table_axes(document["table_csv"])
        return
    for number, entry in enumerate(document.get("vary", [])):
        yield Axis(entry["pointer"], _axis_values(entry, f"/vary/{number}"))


def _axis_values(entry: Document, where: str) -> Sequence[Any] | Range:
    if ("values" in entry) == ("range" in entry):
        raise SweepError(where, "Give exactly one of values and range.")
    if "values" in entry:
        values: list[Any] = entry["values"]
        return values
    span = entry["range"]
    logarithmic = span.get("spacing", "linear") == "logarithmic"
    if logarithmic and not span["start"] * span["stop"] > 0:
        raise SweepError(
            f"{where}/range", "A logarithmic range needs start and stop above 0, or both below 0."
        )
    return Range(float(span["start"]), float(span["stop"]), int(span["points"]), logarithmic)


def _table_axes(text: str) -> Iterator[Axis]:
    """The columns of a CSV table whose header row holds the pointers."""
    try:
        rows = [row for row in csv.reader(io.StringIO(text, newline="")) if row]
    except csv.Error as error:
        raise SweepError("/table_csv", f"This is not CSV: {error}.") from error
    if len(rows) < 2:
        raise SweepError(
            "/table_csv", "The table needs a header row of pointers and at least a row."
        )
    header, body = rows[0], rows[1:]
    for number, row in enumerate(body, start=2):
        if len(row) != len(header):
            raise SweepError(
                "/table_csv", f"Row {number} has {len(row)} cells; the header has {len(header)}."
            )
    for column, pointer in enumerate(header):
        yield Axis(pointer.strip(), [_cell(row[column].strip()) for row in body])


def _cell(text: str) -> Any:
    """A cell is JSON where it reads as JSON (1.5, true, null), else text."""
    try:
        return orjson.loads(text)
    except orjson.JSONDecodeError:
        return text


def _check_pointers(base: Document, axes: Sequence[Axis]) -> None:
    if not axes:
        raise SweepError("/vary", "Name at least one member to vary.")
    for number, axis in enumerate(axes):
        try:
            _parent(base, axis.pointer)
        except LookupError as error:
            raise SweepError(
                f"/vary/{number}/pointer",
                f"The pointer {axis.pointer!r} leads nowhere in the request: {error.args[0]}",
            ) from error
        for other in axes[:number]:
            if (axis.pointer + "/").startswith(other.pointer + "/") or (
                other.pointer + "/"
            ).startswith(axis.pointer + "/"):
                raise SweepError(
                    f"/vary/{number}/pointer",
                    f"{axis.pointer!r} and {other.pointer!r} name the same member or one inside "
                    "the other; each member can be varied once.",
                )


def _check_size(plan: Plan, max_points: int) -> None:
    sizes = [len(axis.values) for axis in plan.axes]
    if not plan.product and len(set(sizes)) > 1:
        raise SweepError("/vary", f"Lists that go in step need one length; these have {sizes}.")
    if min(sizes) == 0:
        raise SweepError("/vary", "Each varied member needs at least one value.")
    if plan.total > max_points:
        raise SweepError(
            "/vary",
            f"The sweep has {' x '.join(map(str, sizes))} = {plan.total} points; "
            f"at most {max_points} are allowed. Use shorter lists or several sweeps.",
        )


def tokens(pointer: str) -> list[str]:
    """The reference tokens of a JSON pointer; raises LookupError when it is not one."""
    if not pointer.startswith("/"):
        raise LookupError("a pointer to a member starts with '/'.")
    return [part.replace("~1", "/").replace("~0", "~") for part in pointer.split("/")[1:]]


def looked_up(document: Any, path: Sequence[str]) -> Any:
    """The value at a path through objects, dataclasses, lists and arrays.

    Raises LookupError with a sentence.
    """
    value = document
    for token in path:
        if isinstance(value, list | tuple | np.ndarray):
            value = value[_index(value, token)]
        elif isinstance(value, dict) and token in value:
            value = value[token]
        elif is_dataclass(value) and token in {member.name for member in fields(value)}:
            value = getattr(value, token)
        else:
            raise LookupError(f"there is no member {token!r}.")
    return value


def _index(values: Sequence[Any] | np.ndarray[Any, Any], token: str) -> int:
    if not (token.isascii() and token.isdigit()) or int(token) >= len(values):
        raise LookupError(f"{token!r} is not an index of a list of {len(values)}.")
    return int(token)


def _parent(base: Document, pointer: str) -> tuple[Any, Any]:
    """The container a pointer's last token is in, and its key there.

    The last token may be a new member of an object: optional members can be varied without being in
    the request. Whether the resource knows it is decided when the points are checked.
    """
    *path, last = tokens(pointer)
    container = looked_up(base, path)
    if isinstance(container, list):
        return container, _index(container, last)
    if not isinstance(container, dict):
        raise LookupError(f"{path[-1]!r} has no members." if path else "it has no members.")
    return container, last


def varied(base: bytes, pointers: Sequence[str], values: Sequence[Any]) -> Document:
    """A fresh copy of the base request with the members at the pointers replaced."""
    document: Document = orjson.loads(base)
    for pointer, value in zip(pointers, values, strict=True):
        container, key = _parent(document, pointer)
        container[key] = value
    return document
