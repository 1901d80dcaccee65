"""JSON of an answer, large arrays block by block, so that no copy of a large table is ever held."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import orjson

BLOCK = 65536
"""Numbers encoded at a time: about 1.3 MB of text."""
_OPTIONS = orjson.OPT_SERIALIZE_NUMPY
_NEVER_INFINITE = frozenset({str, int, bool})


class NotFinite(ArithmeticError):
    """A result holds NaN or infinity; orjson would write it as null without a word."""


def json_chunks(members: Mapping[str, Any]) -> bytes | Iterator[bytes]:
    """The JSON object of ``members``, in pieces when it is large; arrays may have any shape.

    Raises
    ------
    NotFinite
        Before the first piece, when an array or a number is not finite.
    """
    if any(_is_large(value) for value in members.values()):
        require_finite("answer", members)
        return _streamed(members)
    whole = orjson.dumps(members, option=_OPTIONS, default=_contiguous)
    if b"null" in whole:  # written for NaN as well as for None and inside of strings
        require_finite("answer", members)
    return whole


def _streamed(members: Mapping[str, Any]) -> Iterator[bytes]:
    opening = b"{"
    for name, value in members.items():
        yield opening + orjson.dumps(name) + b":"
        yield from _value(value)
        opening = b","
    yield b"}"


def _is_large(value: Any) -> bool:
    if isinstance(value, np.ndarray):
        return value.size > BLOCK
    if isinstance(value, dict):
        return any(map(_is_large, value.values()))
    return False


def _value(value: Any) -> Iterator[bytes]:
    if isinstance(value, np.ndarray) and value.size > BLOCK:
        yield from _array(value)
    elif isinstance(value, dict) and _is_large(value):
        yield from _streamed(value)
    else:
        yield orjson.dumps(value, option=_OPTIONS, default=_contiguous)


def _array(array: Any) -> Iterator[bytes]:
    """An array as blocks of whole entries of its first axis, or recursively when one is large."""
    entry = array[0].size if len(array) else 1
    opening = b"["
    step = max(1, BLOCK // max(entry, 1))
    for start in range(0, len(array), step):
        yield opening
        if entry > BLOCK:
            yield from _array(array[start])
        else:
            block = np.ascontiguousarray(array[start : start + step])
            yield orjson.dumps(block, option=_OPTIONS)[1:-1]
        opening = b","
    yield b"]"


def require_finite(name: str, value: Any) -> None:
    """Raise NotFinite when a number somewhere in ``value`` is NaN or infinite."""
    if isinstance(value, np.ndarray):
        # blocks: isfinite of a whole 2000 x 2000 table would need a mask of its own
        flat = value.reshape(-1)
        if value.dtype.kind == "f" and not all(
            np.isfinite(flat[k : k + BLOCK]).all() for k in range(0, flat.size, BLOCK)
        ):
            raise NotFinite(name)
    elif isinstance(value, float):
        if not np.isfinite(value):
            raise NotFinite(name)
    elif isinstance(value, Mapping):
        for key, inner in value.items():
            require_finite(f"{name}.{key}", inner)
    elif isinstance(value, (list, tuple)):
        if not set(map(type, value)) <= _NEVER_INFINITE:
            for index, inner in enumerate(value):
                require_finite(f"{name}.{index}", inner)
    elif dataclasses.is_dataclass(value) and not isinstance(value, type):
        for item in dataclasses.fields(value):
            require_finite(f"{name}.{item.name}", getattr(value, item.name))


def _contiguous(value: Any) -> Any:
    if isinstance(value, np.ndarray):
        return np.ascontiguousarray(value)
    raise TypeError(type(value).__name__)
