"""Rows of a sweep: blocks, merging, types, and bytes that read back exactly."""

from __future__ import annotations

import csv
import io
import itertools
import math

import numpy as np
import orjson
import pytest

from ladderband.jobs import tables
from ladderband.jobs.tables import append_point, collected, column_names, merged


def block(points: int, start: int = 0) -> tables.Block:
    made: tables.Block = {name: [] for name in column_names(["/x"], ["/y", "/name"])}
    for point in range(start, start + points):
        if point % 5 == 3:
            append_point(made, point, [point / 3], [], 'went "wrong", sadly')
        else:
            append_point(made, point, [point / 3], [math.exp(point / 7), f"n{point}"], None)
    return made


def test_a_list_makes_a_block_of_rows_and_scalars_repeat() -> None:
    made: tables.Block = {name: [] for name in column_names(["/t"], ["/e", "/i"])}
    append_point(made, 7, [300.0], [[1.0, 2.0], 5], None)
    assert made == {
        "point": [7, 7],
        "t": [300.0, 300.0],
        "e": [1.0, 2.0],
        "i": [5, 5],
        "error": [None, None],
    }


def test_lists_of_different_lengths_are_a_points_error() -> None:
    made: tables.Block = {name: [] for name in column_names(["/t"], ["/e", "/i"])}
    append_point(made, 0, [1.0], [[1.0, 2.0], [3.0]], None)
    assert made["e"] == [None]
    assert "different lengths: [1, 2]" in made["error"][0]


def test_a_member_varied_and_collected_keeps_both_columns() -> None:
    assert column_names(["/x"], ["/x", "/y"]) == ["point", "x", "answer:x", "y", "error"]


def test_a_missing_member_of_an_answer_is_named() -> None:
    with pytest.raises(LookupError, match="nothing at '/sums/4'"):
        collected({"sums": [1]}, ["/sums/4"])


def test_merging_does_not_depend_on_how_the_points_were_cut(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(tables, "PART_ROWS", 16)
    one = list(merged([orjson.dumps(block(50))]))
    cuts = [0, 1, 20, 21, 49, 50]
    many = list(merged(orjson.dumps(block(b - a, a)) for a, b in itertools.pairwise(cuts)))
    assert one == many
    assert [len(orjson.loads(part)["point"]) for part in one[:-1]] == [16, 16, 16, 2]
    assert orjson.loads(one[-1]) == {
        "columns": {
            "point": "integer",
            "x": "number",
            "y": "number",
            "name": "text",
            "error": "text",
        },
        "rows": 50,
        "failed_points": 10,
    }


HEADER = orjson.loads(list(merged([orjson.dumps(block(50))]))[-1])
BLOCKS = [block(20), block(30, 20)]


def test_csv_reads_back_exactly() -> None:
    text = b"".join(tables.csv_file(HEADER, BLOCKS)).decode()
    header, *rows = csv.reader(io.StringIO(text))
    assert header == ["point", "x", "y", "name", "error"]
    assert len(rows) == 50
    assert float(rows[7][2]) == math.exp(1.0)
    assert rows[3][2:] == ["", "", 'went "wrong", sadly']


def test_ndjson_reads_back_exactly() -> None:
    rows = [
        orjson.loads(line)
        for line in b"".join(tables.ndjson_file(HEADER, BLOCKS)).split(b"\n")[:-1]
    ]
    assert rows[7] == {"point": 7, "x": 7 / 3, "y": math.exp(1.0), "name": "n7", "error": None}


def test_npy_is_one_structured_array_of_the_numbers() -> None:
    table = np.load(io.BytesIO(b"".join(tables.npy_file(HEADER, BLOCKS))))
    assert table.dtype.names == ("point", "x", "y")
    assert table.shape == (50,)
    assert table["y"][7] == math.exp(1.0)
    assert np.isnan(table["y"][3])
    assert list(table["point"]) == list(range(50))


def test_json_is_one_object_with_rows() -> None:
    found = orjson.loads(b"".join(tables.json_file(HEADER, BLOCKS)))
    assert found["columns"] == ["point", "x", "y", "name", "error"]
    assert len(found["table"]) == 50
    assert found["table"][7] == [7, 7 / 3, math.exp(1.0), "n7", None]
