"""An answer as bytes in the job records, and back.

The bytes are a pickle, which can hold anything; reading one back makes only arrays and the frozen
dataclasses of the package, so that records somebody tampered with cannot run code.
"""

from __future__ import annotations

import dataclasses
import io
import pickle
from collections.abc import Iterable
from typing import Any

_PLAIN = {
    ("numpy._core.multiarray", "_reconstruct"),
    ("numpy._core.numeric", "_frombuffer"),
    ("numpy._core.multiarray", "scalar"),
    ("numpy", "ndarray"),
    ("numpy", "dtype"),
    ("fractions", "Fraction"),
    ("builtins", "complex"),
}


class UnreadableAnswer(ValueError):
    """The bytes are not an answer this version can read."""


def dump_answer(answer: Any) -> bytes:
    """The bytes of an answer dataclass."""
    stream = io.BytesIO()  # grows in place; pickle.dumps copies large arrays as it grows
    pickle.Pickler(stream, protocol=5).dump(answer)
    return stream.getvalue()


def load_answer(parts: Iterable[bytes]) -> Any:
    """The answer whose bytes come in parts, one of them in memory at a time.

    Raises
    ------
    UnreadableAnswer
        The bytes are anything but an answer of this version.
    """
    try:
        with io.BufferedReader(_Parts(parts)) as stream:
            return _Answers(stream).load()
    except (pickle.UnpicklingError, EOFError, AttributeError, ImportError, TypeError) as error:
        raise UnreadableAnswer("The stored result cannot be read by this version.") from error


class _Parts(io.RawIOBase):
    """Parts as one stream: joined first, a large answer would be held twice."""

    def __init__(self, parts: Iterable[bytes]) -> None:
        self._parts = iter(parts)
        self._left = memoryview(b"")

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: Any, /) -> int:
        while not self._left:
            part = next(self._parts, None)
            if part is None:
                return 0
            self._left = memoryview(part)
        taken = self._left[: len(buffer)]
        buffer[: len(taken)] = taken
        self._left = self._left[len(taken) :]
        return len(taken)


class _Answers(pickle.Unpickler):
    def find_class(self, module: str, name: str) -> Any:
        if (module, name) in _PLAIN:
            return super().find_class(module, name)
        if module.startswith("ladderband."):
            found = super().find_class(module, name)
            if dataclasses.is_dataclass(found):
                return found
        raise pickle.UnpicklingError(f"{module}.{name} has no place in an answer")
