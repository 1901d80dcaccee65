"""The requests of a page computed, and the numbers of their answers for its text."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import orjson

from ladderband.formats.json_stream import json_chunks
from ladderband.formats.sheet import Sheet
from ladderband.jobs.sweeps import looked_up, parse_plan, tokens
from ladderband.jobs.tables import Block as Table
from ladderband.jobs.tables import append_point, collected, column_names
from ladderband.numerics.accuracy import Deadline
from ladderband.schemas import ranges
from ladderband.schemas.bands import MAX_SPECIES, MAX_TEMPERATURES
from ladderband.settings import Settings
from ladderband.usecases.limits import Limits
from ladderband.usecases.mode_maps import MAX_ATOMS
from ladderband.usecases.progressions import MAX_MODES
from ladderband.web.guide.source import Block, SourceError, blocks, text
from ladderband.web.jobs import SILENCE_S, STREAM_S
from ladderband.web.problems import MAX_ERRORS
from ladderband.web.resource import NO_VIEW, Resource
from ladderband.web.resources import RESOURCES
from ladderband.web.reuse import MAX_AGE_S

_PLACEHOLDER = re.compile(r"\{\{([^{}:]+?)(?::([^{}]*))?\}\}")
_POWER = re.compile(r"(?<=\d)e([+-])0*(\d+)")
_TO_RAISE = re.compile(r"(?<=×10)\^(\d+)|\^(-\d+)")
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
_LAST: dict[str, Callable[[Any], Any]] = {"max": max, "min": min, "len": len, "sum": sum}


MOST = {
    "progression_modes": MAX_MODES,
    "batch_size": Limits().batch_size,
    "temperatures": MAX_TEMPERATURES,
    "species": MAX_SPECIES,
    "atoms": MAX_ATOMS,
    "max_age_s": MAX_AGE_S,
    "complaints": MAX_ERRORS,
    "stream_s": STREAM_S,
    "silence_s": SILENCE_S,
}
"""Further limits for the texts."""

SIZES = {"wide": (760, 420), "narrow": (380, 300)}
"""Width and height of the pictures, pixels."""


@dataclass(frozen=True)
class Answered:
    """A block with its complete body and the answer to it."""

    block: Block
    body: dict[str, Any]
    document: dict[str, Any]
    """The JSON answer; a sweep's table as columns."""

    def picture(self, theme: str, size: str) -> bytes:
        """The SVG of a block that has one."""
        resource = _resource(self.block.resource)
        loaded = resource.request.read(self.body)
        answer = resource.use_case(loaded.question, Limits(), Deadline.none())
        width, height = SIZES[size]
        view = {**NO_VIEW, "theme": theme, "width": width, "height": height}
        sheet = Sheet.of(resource.summary, "", (), view)
        drawn = resource.formats["svg"](sheet, loaded.question, answer)
        return drawn if isinstance(drawn, bytes) else b"".join(drawn)


@cache
def answers(slug: str) -> Mapping[str, Answered]:
    """Every block of a page, computed once a process."""
    found: dict[str, Answered] = {}
    for block in blocks(text(slug)):
        if block.name in found:
            raise SourceError(f"Two blocks of {slug} are called {block.name}.")
        body = _body(block, found)
        compute = _table if block.resource == "sweeps" else _document
        found[block.name] = Answered(block, body, compute(block.resource, body))
    return found


def _body(block: Block, known: Mapping[str, Answered]) -> dict[str, Any]:
    if block.example:
        return dict(_resource(block.resource).examples[block.example])
    if not block.merge:
        return block.body
    documents = {name: found.document for name, found in known.items()}
    return {**looked_up(documents, tokens("/" + block.merge)), **block.body}


def _resource(name: str) -> Resource[Any, Any]:
    return next(resource for resource in RESOURCES if resource.name == name)


def _document(name: str, body: dict[str, Any]) -> dict[str, Any]:
    resource = _resource(name)
    loaded = resource.request.read(body)
    answer = resource.use_case(loaded.question, Limits(), Deadline.none())
    chunks = json_chunks(resource.json_members(loaded, answer, resource.digest(loaded.question)))
    document: dict[str, Any] = orjson.loads(
        chunks if isinstance(chunks, bytes) else b"".join(chunks)
    )
    return document


def _table(_: str, body: dict[str, Any]) -> Table:
    plan = parse_plan(body)
    table: Table = {
        name: [] for name in column_names([axis.pointer for axis in plan.axes], plan.collect)
    }
    for point in range(plan.total):
        found = collected(_document(plan.resource, plan.request(point)), plan.collect)
        append_point(table, point, plan.values(point), found, None)
    return table


def filled(slug: str, settings: Settings) -> str:
    """The text of a page with its placeholders replaced."""
    roots: dict[str, Any] = {name: found.document for name, found in answers(slug).items()}
    roots |= {"settings": settings, "ranges": vars(ranges), "most": MOST}
    return _PLACEHOLDER.sub(lambda match: written(roots, match[1], match[2] or ""), text(slug))


def written(roots: Mapping[str, Any], pointer: str, form: str) -> str:
    """One number of an answer as words: ``3.5e-13`` becomes 3.5×10⁻¹³.

    Raises
    ------
    SourceError
        The pointer leads nowhere.
    """
    pointer, _, factor = pointer.partition("*")
    *path, last = tokens("/" + pointer)
    try:
        found = looked_up(roots, path)
        value = _LAST[last](found) if last in _LAST else looked_up(found, [last])
    except LookupError as error:
        raise SourceError(f"{{{{{pointer}}}}}: {error.args[0]}") from error
    number = format(value * float(factor) if factor else value, form)
    number = re.sub(r"^-(?=\d)", "−", number)
    number = _POWER.sub(lambda match: f"×10^{match[1].strip('+')}{match[2]}", number)
    return _TO_RAISE.sub(lambda match: match[0][1:].translate(_RAISED), number)
