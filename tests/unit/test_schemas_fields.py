"""The strict fields: what JSON Schema calls a number is taken, everything else is refused."""

from __future__ import annotations

import time
from fractions import Fraction

import jsonschema
import numpy as np
import pytest
from marshmallow import ValidationError

from ladderband.schemas.fields import (
    Choice,
    DecimalColumn,
    Matrix,
    Number,
    Numbers,
    Text,
    Truth,
    Whole,
    exact_decimal,
)
from ladderband.schemas.ranges import Range

FIELDS = {
    "number": Number("a", Range(0, 10)),
    "number, open": Number("a", Range(0, 10, low_open=True)),
    "whole": Whole("a", Range(0, 10)),
    "truth": Truth("a"),
    "text": Text("a", 5),
    "choice": Choice("a", ("up", "down")),
    "column": DecimalColumn("a", Range(0, 10), 3),
    "numbers": Numbers("a", Range(0, 10), max_size=3),
    "matrix": Matrix("a", Range(0, 10), rows=2, columns=2),
}
VALUES = [
    0, 1, 10, 11, -1, 0.5, 10.0, 95.0, 1e300, -0.0, True, False, None, "1", "1.5e0", "x", "", "up",
    "123456", "a\tb", [], [1], [1, 2, 3, 4], [1, True], [1, None], ["1"], [[1]], [[1, 2], [3, 4]],
    [[1], [2, 3]], [[1, 2], [3, "4"]], {}, {"a": 1},
]  # fmt: skip


@pytest.mark.parametrize("value", VALUES, ids=repr)
@pytest.mark.parametrize("name", FIELDS)
def test_accepts_what_its_schema_accepts(name, value):
    """jsonschema is the outside judge. Not expressible: rows of one length, a decimal's range."""
    field = FIELDS[name]
    valid = jsonschema.Draft202012Validator(field.json_schema()).is_valid(value)
    if (name, value) in [("matrix", [[1], [2, 3]]), ("column", "123456")]:
        valid = False
    try:
        field.deserialize(value)
        taken = True
    except ValidationError:
        taken = False
    assert taken == valid


def test_whole_takes_95_point_0_as_an_int():
    value = Whole("a", Range(0, 100)).deserialize(95.0)
    assert (value, type(value)) == (95, int)


@pytest.mark.parametrize("value", [float("nan"), float("inf"), -float("inf")])
@pytest.mark.parametrize("name", ["number", "whole", "column", "numbers"])
def test_refuses_what_is_not_finite(name, value):
    for candidate in (value, [value], [1.0, value]):
        with pytest.raises(ValidationError):
            FIELDS[name].deserialize(candidate)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("0.1", Fraction(1, 10)),
        ("-1.50e-3", Fraction(-3, 2000)),
        ("+12E2", Fraction(1200)),
        ("1e999", Fraction(10**999)),
        ("007", Fraction(7)),
    ],
)
def test_a_decimal_string_is_taken_exactly(text, value):
    assert exact_decimal(text) == value


@pytest.mark.parametrize(
    "text",
    ["1e999999999", "1e1000", "9" * 1101, "9" * 100_000, "nan", "inf", "1/3", "0x1", "1_000", " 1",
     "1.", ".5", "1e", "--1", "١", "1\n"],
)  # fmt: skip
def test_other_strings_are_refused_before_any_arithmetic(text):
    began = time.thread_time()
    assert exact_decimal(text) is None
    assert time.thread_time() - began < 1.0  # 10^999999999 would take hours, not a fraction of this


def test_a_number_is_taken_as_the_double_it_is():
    given = DecimalColumn("a", Range(0, 10), 3).deserialize([0.1, "0.1"])
    assert given.column == (Fraction(0.1), Fraction(1, 10))
    assert given.column[0] != given.column[1]


def test_a_column_of_numbers_is_an_array():
    given = DecimalColumn("a", Range(0, 10), 3).deserialize([1, 2.5])
    assert given.is_list
    assert given.column.dtype == np.float64
    assert (given.repeated(2) == [1.0, 2.5]).all()


def test_a_single_value_stands_for_all():
    given = DecimalColumn("a", Range(0, 10), 3).deserialize("0.5")
    assert not given.is_list
    assert given.repeated(3) == (Fraction(1, 2),) * 3


@pytest.mark.parametrize(
    ("name", "value", "where"),
    [
        ("column", [1, 2, 11], 2),
        ("column", ["1", "2", "x"], 2),
        ("numbers", [1, -1], 1),
        ("numbers", [1, "1"], 1),
        ("matrix", [[1, 2], [3]], 1),
    ],
)
def test_points_at_the_first_bad_entry(name, value, where):
    with pytest.raises(ValidationError) as caught:
        FIELDS[name].deserialize(value)
    assert list(caught.value.messages) == [where]


def test_open_and_closed_ranges():
    assert Range(0, 1).holds(0)
    assert not Range(0, 1, low_open=True).holds(0)
    assert Range(0, 1, low_open=True).text() == "0 < x <= 1"
    assert Range(0, 1).first_outside(np.array([0.0, np.nan, 2.0])) == 1
    assert Range(0, 1).first_outside(np.array([0.0, 1.0])) is None
