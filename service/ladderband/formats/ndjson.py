"""NDJSON: one JSON object a line, the first about the answer, then one a row."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from itertools import chain
from typing import Any

import orjson

_OPTIONS = orjson.OPT_SERIALIZE_NUMPY | orjson.OPT_APPEND_NEWLINE
LINES = 2000
"""Lines sent in one piece."""


def ndjson_body(head: Mapping[str, Any], rows: Iterable[Mapping[str, Any]]) -> Iterator[bytes]:
    """``head`` as the first line, then the rows; in pieces of ``LINES`` lines."""
    piece: list[bytes] = []
    for row in chain([head], rows):
        piece.append(orjson.dumps(row, option=_OPTIONS))
        if len(piece) >= LINES:
            yield b"".join(piece)
            piece.clear()
    if piece:
        yield b"".join(piece)


def column_rows(columns: Mapping[str, Any], block: int = LINES) -> Iterator[dict[str, Any]]:
    """Equally long columns (arrays or lists) as rows."""
    names = list(columns)
    size = len(columns[names[0]])
    for start in range(0, size, block):
        parts = [_plain(columns[name][start : start + block]) for name in names]
        for row in zip(*parts, strict=True):
            yield dict(zip(names, row, strict=True))


def _plain(values: Any) -> Any:
    return values.tolist() if hasattr(values, "tolist") else values
