"""CSV: a commented head (what, units, version, digest, accuracy), then columns."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from ladderband.formats.sheet import Sheet
from ladderband.numerics.accuracy import Accuracy, Completeness

ROWS = 4096
"""Rows written at a time."""


def csv_head(
    sheet: Sheet,
    notes: Mapping[str, Any],
    accuracy: Accuracy,
    completeness: Completeness | None = None,
) -> str:
    """Comment lines, each starting with ``# ``; ``notes`` gives units and meanings."""
    lines = {
        "ladderband": f"{sheet.version}, {sheet.name}",
        "request_digest": sheet.digest,
        **notes,
        "accuracy": f"bound {_widest(accuracy.bound):.3g}, {accuracy.evidence}, {accuracy.route}",
    }
    if completeness is not None:
        lines["completeness"] = (
            f"captured {completeness.captured:.17g} of {completeness.total:.17g}, "
            f"missing at most {completeness.missing_at_most:.3g}"
        )
    text = [f"# {name}: {value}" for name, value in lines.items()]
    text += [f"# warning: {warning}" for warning in sheet.warnings]
    return "\n".join(text) + "\n"


def csv_columns(columns: Mapping[str, Sequence[Any]]) -> Iterator[str]:
    """A header line and the rows of equally long columns; arrays, numbers or text."""
    yield ",".join(columns) + "\n"
    size = len(next(iter(columns.values())))
    for start in range(0, size, ROWS):
        blocks = [_cells(column[start : start + ROWS]) for column in columns.values()]
        yield "\n".join(map(",".join, zip(*blocks, strict=True))) + "\n"


def csv_body(head: str, rows: Iterable[str]) -> Iterator[bytes]:
    """Head and rows as bytes."""
    yield head.encode()
    for block in rows:
        yield block.encode()


def _cells(values: Any) -> list[str]:
    plain = values.tolist() if isinstance(values, np.ndarray) else values
    return [value if isinstance(value, str) else repr(value) for value in map(_quoted, plain)]


def _quoted(value: Any) -> Any:
    if isinstance(value, (list, tuple)):
        return " ".join(map(str, value))
    if isinstance(value, str) and any(mark in value for mark in ',"\n'):
        return '"' + value.replace('"', '""') + '"'
    return value


def _widest(bound: Any) -> float:
    return float(np.max(bound))
