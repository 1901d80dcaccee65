"""JSON in pieces, CSV, NDJSON and npy: the numbers come back as they were."""

from __future__ import annotations

import csv
import io
import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from ladderband.formats.csv import csv_body, csv_columns, csv_head
from ladderband.formats.json_stream import BLOCK, NotFinite, json_chunks
from ladderband.formats.ndjson import column_rows, ndjson_body
from ladderband.formats.npy import npy_body
from ladderband.formats.sheet import Sheet
from ladderband.numerics.accuracy import Accuracy, Completeness

SHEET = Sheet("test", "0123", warnings=("one, with a comma",))
ACCURACY = Accuracy(np.array([1e-12, 2e-12]), "proven", "ladder")


def joined(chunks):
    return chunks if isinstance(chunks, bytes) else b"".join(chunks)


@pytest.mark.parametrize(
    "shape",
    [
        (0,),
        (1,),
        (3, 0),
        (5, 7),
        (BLOCK + 1,),
        (3, BLOCK),
        (2, 3, BLOCK),
        (3 * BLOCK, 2),
        (700, 300),
    ],
)
def test_arrays_of_any_shape_are_written_whole(shape):
    array = np.random.default_rng(1).standard_normal(shape)
    text = joined(json_chunks({"a": {"inner": array}, "b": [1, "x"]}))
    members = json.loads(text)
    assert (np.array(members["a"]["inner"]).reshape(shape) == array).all()
    assert members["b"] == [1, "x"]


@given(
    arrays.arrays(
        np.float64,
        arrays.array_shapes(max_dims=3),
        elements=st.floats(allow_nan=False, allow_infinity=False),
    )
)
def test_every_double_survives(array):
    assert (np.array(json.loads(joined(json_chunks({"a": array})))["a"]) == array).all()


def test_a_view_that_is_not_contiguous():
    array = np.arange(12.0).reshape(3, 4).T
    assert json.loads(joined(json_chunks({"a": array})))["a"] == array.tolist()


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize("place", ["scalar", "array", "large", "inner", "list", "accuracy"])
def test_no_number_that_is_not_finite_is_written(place, value):
    large = np.zeros(3 * BLOCK)
    large[-1] = value
    members = {
        "scalar": {"a": value},
        "array": {"a": np.array([1.0, value])},
        "large": {"a": large},
        "inner": {"a": {"b": [{"c": value}]}},
        "list": {"a": [1.0, value]},
        "accuracy": {"a": Accuracy(value, "proven", "ladder")},
    }[place]
    with pytest.raises(NotFinite):
        json_chunks(members)


def test_the_word_null_in_a_label_is_no_fault():
    assert json.loads(joined(json_chunks({"a": "null"}))) == {"a": "null"}


def test_csv_reads_back_with_its_head():
    columns = {
        "x": np.array([0.1, 1e-300, -2.0]),
        "quanta": np.array([[1, 2], [3, 4], [5, 6]]),
        "name": ["plain", 'with "quotes", commas', ""],
    }
    head = csv_head(SHEET, {"x": "cm^-1"}, ACCURACY, Completeness(0.5, 1.0, 0.5))
    text = b"".join(csv_body(head, csv_columns(columns))).decode()
    comments = [line for line in text.splitlines() if line.startswith("# ")]
    assert any("0123" in line for line in comments)
    assert any("proven" in line and "2e-12" in line for line in comments)
    assert any(line == "# warning: one, with a comma" for line in comments)
    rows = list(csv.reader(line for line in io.StringIO(text) if not line.startswith("# ")))
    assert rows[0] == ["x", "quanta", "name"]
    assert [float(row[0]) for row in rows[1:]] == columns["x"].tolist()
    assert rows[1][1] == "1 2"
    assert [row[2] for row in rows[1:]] == columns["name"]


def test_csv_of_many_rows():
    column = np.arange(10_001.0)
    lines = "".join(csv_columns({"x": column})).splitlines()
    assert len(lines) == 10_002
    assert float(lines[-1]) == 10_000.0


def test_ndjson_is_one_object_a_line():
    columns = {"x": np.arange(4001.0), "name": ["n"] * 4001}
    lines = b"".join(ndjson_body({"head": 1}, column_rows(columns))).splitlines()
    assert json.loads(lines[0]) == {"head": 1}
    assert [json.loads(line)["x"] for line in lines[1:]] == columns["x"].tolist()


@pytest.mark.parametrize("dtype", ["<f8", ">f8", "<i4"])
def test_npy_is_read_by_numpy(dtype):
    array = np.arange(600_000).reshape(2, 300, 1000).astype(dtype)[:, ::2]
    again = np.load(io.BytesIO(b"".join(npy_body(array))))
    assert (again == array).all()
    assert again.shape == array.shape
