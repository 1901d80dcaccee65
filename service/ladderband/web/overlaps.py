"""``POST /v1/overlaps``: overlap integrals and Franck-Condon factors of pairs of oscillators."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from marshmallow import ValidationError

from ladderband.formats.csv import csv_body, csv_head
from ladderband.formats.look import png, svg
from ladderband.formats.ndjson import ndjson_body
from ladderband.formats.npy import npy_body
from ladderband.formats.plots import overlap_plot
from ladderband.formats.sheet import Sheet
from ladderband.schemas.fields import Complaint
from ladderband.schemas.overlaps import OverlapsRequest, OverlapsResponse, overlaps_members
from ladderband.usecases.overlaps import (
    OverlapsAnswer,
    OverlapsQuestion,
    estimate_seconds,
    overlaps,
)
from ladderband.web.resource import Resource

ARRAYS = ("overlap_integrals", "franck_condon_factors", "matrix_elements")


def _rows(answer: OverlapsAnswer) -> Iterator[tuple[int, int, dict[str, Any]]]:
    """Pair, initial quanta and the rows of all tables."""
    tables = {name: getattr(answer, name) for name in ARRAYS if getattr(answer, name) is not None}
    for pair in range(len(answer.overlap_integrals)):
        for v in range(len(answer.overlap_integrals[pair])):
            yield pair, v, {name: table[pair][v] for name, table in tables.items()}


def _csv(sheet: Sheet, question: OverlapsQuestion, answer: OverlapsAnswer) -> Iterator[bytes]:
    notes = {
        "columns": "pair of the batch, initial and final quanta, dimensionless numbers",
        "phase": "every oscillator function is positive at large positive coordinate",
    }
    return csv_body(csv_head(sheet, notes, answer.accuracy), _csv_rows(answer))


def _csv_rows(answer: OverlapsAnswer) -> Iterator[str]:
    names = [name for name in ARRAYS if getattr(answer, name) is not None]
    yield ",".join(["pair", "v_initial", "v_final", *names]) + "\n"
    for pair, v, rows in _rows(answer):
        columns = [_plain(rows[name]) for name in names]
        cells = (",".join(map(_cell, values)) for values in zip(*columns, strict=True))
        yield "".join(f"{pair},{v},{n},{text}\n" for n, text in enumerate(cells))


def _cell(value: float | str) -> str:
    return value if isinstance(value, str) else repr(value)


def _plain(values: Any) -> Any:
    return values.tolist() if hasattr(values, "tolist") else values


def _ndjson(sheet: Sheet, question: OverlapsQuestion, answer: OverlapsAnswer) -> Iterator[bytes]:
    head = {
        "accuracy": answer.accuracy,
        "factors_accuracy": answer.factors_accuracy,
        "warnings": sheet.warnings,
        "service_version": sheet.version,
        "request_digest": sheet.digest,
    }
    rows = ({"pair": pair, "v_initial": v, **tables} for pair, v, tables in _rows(answer))
    return ndjson_body(head, rows)


def _npy(sheet: Sheet, question: OverlapsQuestion, answer: OverlapsAnswer) -> Iterator[bytes]:
    array = (
        getattr(answer, sheet.array or ARRAYS[0], None) if sheet.array in ("", *ARRAYS) else None
    )
    if not isinstance(array, np.ndarray):
        there = [name for name in ARRAYS if isinstance(getattr(answer, name), np.ndarray)]
        allowed = "one of: " + ", ".join(there) if there else "none: more than 15 digits are text"
        detail = "The answer has no such float64 array."
        raise ValidationError({"array": [Complaint(detail, allowed)]})
    return npy_body(array if question.pairs.batch else array[0])


OVERLAPS: Resource[OverlapsQuestion, OverlapsAnswer] = Resource(
    path="/v1/overlaps",
    operation_id="computeOverlaps",
    summary="Overlap integrals and Franck-Condon factors of two oscillators",
    description="All overlaps <v_initial|v_final> between two one-dimensional harmonic oscillators, "
    "with a proven bound, to as many digits as asked for; optionally matrix elements of powers of "
    "the coordinate. Lists instead of single numbers ask for many pairs at once. "
    "npy: `array` = overlap_integrals (default), franck_condon_factors or matrix_elements.",
    request=OverlapsRequest(),
    response=OverlapsResponse,
    use_case=overlaps,
    estimate=estimate_seconds,
    members=overlaps_members,
    formats={
        "csv": _csv,
        "ndjson": _ndjson,
        "npy": _npy,
        "svg": svg(overlap_plot),
        "png": png(overlap_plot),
    },
    examples={
        "one-pair": {
            "wavenumber_initial_cm1": 1000.0,
            "wavenumber_final_cm1": 900.0,
            "displacement": 1.5,
            "v_initial_max": 2,
            "v_final_max": 5,
        },
        "fifty-digits": {
            "wavenumber_initial_cm1": "1000",
            "wavenumber_final_cm1": "1000",
            "huang_rhys": "12.5",
            "v_initial_max": 1,
            "v_final_max": 3,
            "digits": 50,
        },
        "batch": {
            "wavenumber_initial_cm1": [1000.0, 1200.0, 1580.2],
            "wavenumber_final_cm1": [900.0, 1250.0, 1094.7],
            "displacement": [1.5, -0.2, 2.1],
            "v_initial_max": 0,
            "v_final_max": 9,
        },
        "matrix-elements": {
            "wavenumber_initial_cm1": 1000.0,
            "wavenumber_final_cm1": 900.0,
            "displacement": 1.5,
            "v_initial_max": 2,
            "v_final_max": 2,
            "operator": {"kind": "coordinate_power", "power": 2, "state": "initial"},
            "temperature_k": 298.15,
        },
    },
)
