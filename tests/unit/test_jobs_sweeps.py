"""Expanding a sweep: pointers, ranges, combinations, and what is refused."""

from __future__ import annotations

from typing import Any

import pytest

from ladderband.jobs.errors import SweepError
from ladderband.jobs.sweeps import Plan, Range, looked_up, parse_plan, tokens

BASE = {"temperature_k": 0.0, "modes": [{"huang_rhys": 1.0}, {"a/b": 1, "c~d": 2}], "flat": 3}


def plan(vary: list[dict[str, Any]] | None = None, **members: Any) -> Plan:
    document = {"resource": "lines", "request": BASE, "collect": ["/x"], **members}
    return parse_plan({**document, "vary": vary} if vary is not None else document)


def test_a_product_varies_the_last_member_fastest() -> None:
    found = plan(
        [
            {"pointer": "/temperature_k", "values": [10, 20]},
            {"pointer": "/modes/0/huang_rhys", "values": [1, 2, 3]},
        ]
    )
    assert found.total == 6
    assert [found.values(point) for point in range(6)] == [
        [10, 1],
        [10, 2],
        [10, 3],
        [20, 1],
        [20, 2],
        [20, 3],
    ]
    assert found.request(4)["modes"][0] == {"huang_rhys": 2}
    assert found.request(4)["temperature_k"] == 20
    assert BASE["temperature_k"] == 0.0


def test_lists_in_step_are_taken_together() -> None:
    found = plan(
        [{"pointer": "/temperature_k", "values": [1, 2]}, {"pointer": "/flat", "values": [3, 4]}],
        combine="zip",
    )
    assert [found.values(point) for point in range(found.total)] == [[1, 3], [2, 4]]


def test_a_table_gives_a_point_a_row() -> None:
    found = plan(table_csv="/temperature_k,/flat\r\n1.5,true\n\n3,word\n")
    assert [found.values(point) for point in range(found.total)] == [[1.5, True], [3, "word"]]


def test_an_optional_member_may_be_added() -> None:
    found = plan([{"pointer": "/modes/0/label", "values": ["a"]}])
    assert found.request(0)["modes"][0] == {"huang_rhys": 1.0, "label": "a"}


def test_escaped_pointers_reach_their_members() -> None:
    assert looked_up(BASE, tokens("/modes/1/a~1b")) == 1
    assert looked_up(BASE, tokens("/modes/1/c~0d")) == 2


@pytest.mark.parametrize(
    ("span", "expected"),
    [
        (Range(0.0, 1.0, 5), [0.0, 0.25, 0.5, 0.75, 1.0]),
        (Range(1.0, 100.0, 3, logarithmic=True), [1.0, 10.0, 100.0]),
        (Range(-1.0, -100.0, 3, logarithmic=True), [-1.0, -10.0, -100.0]),
        (Range(7.0, 9.0, 1), [7.0]),
    ],
    ids=["linear", "logarithmic", "negative", "one"],
)
def test_ranges_include_both_ends(span: Range, expected: list[float]) -> None:
    assert [span[i] for i in range(len(span))] == pytest.approx(expected, rel=1e-15)
    assert span[len(span) - 1] == expected[-1]


def test_the_samples_include_both_ends() -> None:
    found = plan([{"pointer": "/flat", "range": {"start": 0, "stop": 1, "points": 1000}}])
    assert found.samples()[0] == 0
    assert found.samples()[-1] == 999


BAD = {
    "nowhere": ([{"pointer": "/mods/0/x", "values": [1]}], "/vary/0/pointer", "no member 'mods'"),
    "no slash": ([{"pointer": "flat", "values": [1]}], "/vary/0/pointer", "starts with '/'"),
    "index": ([{"pointer": "/modes/7/x", "values": [1]}], "/vary/0/pointer", "not an index"),
    "negative index": ([{"pointer": "/modes/-1", "values": [1]}], "/vary/0/pointer", "index"),
    "into a number": ([{"pointer": "/flat/x", "values": [1]}], "/vary/0/pointer", "no members"),
    "both": (
        [{"pointer": "/flat", "values": [1], "range": {"start": 0, "stop": 1, "points": 2}}],
        "/vary/0",
        "exactly one",
    ),
    "neither": ([{"pointer": "/flat"}], "/vary/0", "exactly one"),
    "empty list": ([{"pointer": "/flat", "values": []}], "/vary", "at least one value"),
    "nothing": ([], "/vary", "at least one member"),
    "logarithm of zero": (
        [
            {
                "pointer": "/flat",
                "range": {"start": 0, "stop": 1, "points": 2, "spacing": "logarithmic"},
            }
        ],
        "/vary/0/range",
        "above 0",
    ),
    "twice": (
        [{"pointer": "/flat", "values": [1]}, {"pointer": "/flat", "values": [2]}],
        "/vary/1/pointer",
        "varied once",
    ),
    "inside another": (
        [{"pointer": "/modes", "values": [[]]}, {"pointer": "/modes/0/x", "values": [2]}],
        "/vary/1/pointer",
        "inside",
    ),
    "explodes": (
        [
            {"pointer": "/flat", "range": {"start": 0, "stop": 1, "points": 10_000}},
            {"pointer": "/temperature_k", "range": {"start": 0, "stop": 1, "points": 10_000}},
        ],
        "/vary",
        "10000 x 10000 = 100000000 points",
    ),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_members_are_named_with_their_place(case: str) -> None:
    vary, where, message = BAD[case]
    with pytest.raises(SweepError, match=message) as caught:
        plan(vary)
    assert caught.value.pointer == where


def test_unequal_lists_in_step_are_refused() -> None:
    with pytest.raises(SweepError, match="one length"):
        plan(
            [{"pointer": "/temperature_k", "values": [1]}, {"pointer": "/flat", "values": [3, 4]}],
            combine="zip",
        )


@pytest.mark.parametrize(
    ("table", "message"),
    [
        ("/flat\n", "at least a row"),
        ("/flat,/temperature_k\n1\n", "Row 2 has 1 cells"),
        ("flat\n1\n", "starts with '/'"),
        ('/flat\n"' + "x" * 200_000, "not CSV"),
    ],
    ids=["no rows", "short row", "no pointer", "a cell beyond all measure"],
)
def test_a_broken_table_is_refused(table: str, message: str) -> None:
    with pytest.raises(SweepError, match=message):
        plan(table_csv=table)


def test_a_sweep_of_sweeps_is_refused() -> None:
    with pytest.raises(SweepError, match="another sweep"):
        plan([{"pointer": "/flat", "values": [1]}], resource="sweeps")
