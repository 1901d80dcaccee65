"""Line lists as CSV, NDJSON and npy, shared by every resource that returns one."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from ladderband.formats.csv import csv_body, csv_columns, csv_head
from ladderband.formats.ndjson import column_rows, ndjson_body
from ladderband.formats.npy import npy_body
from ladderband.formats.sheet import Sheet
from ladderband.numerics.line_list import LineList, assignments

_NOTES = {
    "position_cm1": "cm^-1",
    "intensity": "share of a complete list, dimensionless",
    "v_initial, v_final": "quanta of each mode, separated by spaces",
}


def _columns(answer: LineList) -> dict[str, Any]:
    return {
        "position_cm1": answer.position_cm1,
        "intensity": answer.intensity,
        "v_initial": answer.v_initial,
        "v_final": answer.v_final,
        "assignment": assignments(answer.v_initial, answer.v_final),
    }


def line_list_csv(sheet: Sheet, question: Any, answer: LineList) -> Iterator[bytes]:
    """One row a line."""
    head = csv_head(sheet, _NOTES, answer.accuracy, answer.completeness)
    return csv_body(head, csv_columns(_columns(answer)))


def line_list_ndjson(sheet: Sheet, question: Any, answer: LineList) -> Iterator[bytes]:
    """First line: completeness, accuracy, digest; then one object a line."""
    head = {
        "lines": len(answer),
        "completeness": answer.completeness,
        "accuracy": answer.accuracy,
        "warnings": sheet.warnings,
        "service_version": sheet.version,
        "request_digest": sheet.digest,
    }
    return ndjson_body(head, column_rows(_columns(answer)))


def line_list_npy(sheet: Sheet, question: Any, answer: LineList) -> Iterator[bytes]:
    """Array (lines, 2): position in cm^-1 and intensity."""
    return npy_body(np.column_stack([answer.position_cm1, answer.intensity]))
