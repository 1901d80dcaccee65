"""The certificate takes the cheapest route that meets the request, and says which."""

from __future__ import annotations

import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.errors import DeadlineExceeded, PrecisionNotReached
from ladderband.numerics.oscillators import OscillatorColumns, one_pair
from overlap_oracles import exact_pair, worst_error

FOREVER = Deadline.none()


@pytest.mark.parametrize(
    ("delta", "quanta", "tolerance", "route"),
    [
        pytest.param(1.0, 20, 1e-10, "ladder", id="small"),
        pytest.param(5.0, 60, 1e-10, "grid", id="displaced"),
        pytest.param(1.0, 20, 3e-13, "grid", id="fine"),
        pytest.param(1.0, 20, 1e-15, "balls", id="finest"),
    ],
)
def test_route_follows_the_request(delta: float, quanta: int, tolerance: float, route: str) -> None:
    found = certified_tables(one_pair(1.0, 1.0, delta), quanta, quanta, tolerance, FOREVER)
    assert found.route == route
    assert found.bounds[0] <= tolerance
    assert worst_error(found.tables[0], exact_pair(1, int(delta))) <= found.bounds[0]


def test_a_batch_may_mix_routes() -> None:
    pairs = OscillatorColumns(np.full(3, 1.0), np.full(3, 1.0), np.array([0.5, 9.0, 1.0]))
    found = certified_tables(pairs, 10, 10, 1e-10, FOREVER)
    assert found.routes == ("ladder", "grid", "ladder")
    assert found.route == "grid+ladder"


def test_a_tolerance_no_float64_can_hold_is_refused() -> None:
    with pytest.raises(PrecisionNotReached, match="ask for digits"):
        certified_tables(one_pair(1.0, 1.0, 1.0), 2, 2, 1e-18, FOREVER)


def test_the_deadline_is_seen() -> None:
    with pytest.raises(DeadlineExceeded):
        certified_tables(one_pair(1.0, 1.0, 9.0), 50, 50, 1e-10, Deadline(at=0.0))


def test_a_table_too_large_for_balls_says_what_was_reached() -> None:
    pair = one_pair(1000.0, 1000.0, 3.0, "shift_angstrom_sqrt_u")
    with pytest.raises(PrecisionNotReached, match="best proven bound"):
        certified_tables(pair, 600, 600, 1e-13, FOREVER)
