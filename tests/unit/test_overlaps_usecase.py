"""The overlaps use case: what it admits, what it refuses, and what rides along."""

from __future__ import annotations

import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.matrix_elements import Operator
from ladderband.numerics.oscillators import OscillatorColumns, one_pair
from ladderband.usecases.limits import CostLimitExceeded, Limits
from ladderband.usecases.overlaps import OverlapsQuestion, estimate_seconds, overlaps

FOREVER = Deadline.none()


@pytest.mark.parametrize("ratio", [1.0, 0.5, 0.02, 50.0])
@pytest.mark.parametrize("shift", [0.0, 1.0, 20.0, 63.0])
def test_the_largest_table_is_admitted_whatever_the_oscillators(ratio: float, shift: float) -> None:
    """2000 x 2000 with the default tolerance stays below the limit of one request."""
    question = OverlapsQuestion(one_pair(1000.0, 1000.0 * ratio, shift), 2000, 2000)
    assert estimate_seconds(question) <= Limits().work_s


def test_ten_thousand_oscillators_are_admitted() -> None:
    rng = np.random.default_rng(0)
    g, f = rng.uniform(100, 3000, 10_000), rng.uniform(100, 3000, 10_000)
    question = OverlapsQuestion(OscillatorColumns(g, f, rng.normal(size=10_000) * 3), 0, 19)
    answer = overlaps(question, Limits(), FOREVER)
    assert np.asarray(answer.overlap_integrals).shape == (10_000, 1, 20)
    assert np.max(answer.accuracy.bound) <= 1e-10


@pytest.mark.parametrize(
    ("quanta", "options"),
    [
        pytest.param(2000, {"digits": 30}, id="digits"),
        pytest.param(2000, {"tolerance": 1e-13}, id="tolerance"),
    ],
)
def test_what_would_take_long_is_refused_with_the_estimate(quanta: int, options: dict) -> None:
    question = OverlapsQuestion(one_pair(1000.0, 900.0, 1.0), quanta, quanta, **options)
    with pytest.raises(CostLimitExceeded, match="estimated") as caught:
        overlaps(question, Limits(), FOREVER)
    assert caught.value.estimate_s > caught.value.limit_s


def test_matrix_elements_and_populations_ride_along() -> None:
    question = OverlapsQuestion(
        one_pair(1000.0, 900.0, 0.0),
        3,
        3,
        operator=Operator("coordinate_power", 2, "initial"),
        temperature_k=500.0,
    )
    answer = overlaps(question, Limits(), FOREVER)
    assert np.asarray(answer.matrix_elements).shape == (1, 4, 4)
    assert answer.populations is not None
    assert answer.populations.shape == (1, 4)
    assert 0.9 < answer.populations.sum() <= 1.0


def test_numbers_that_json_can_not_hold_are_told() -> None:
    """Factors below 1e-308 with 12 digits asked for: zero would be a lie without a word."""
    answer = overlaps(
        OverlapsQuestion(one_pair(1000.0, 1000.0, 40.0), 0, 0, digits=12), Limits(), FOREVER
    )
    assert any("1e-308" in warning for warning in answer.warnings)
    longer = overlaps(
        OverlapsQuestion(one_pair(1000.0, 1000.0, 40.0), 0, 0, digits=16), Limits(), FOREVER
    )
    assert longer.franck_condon_factors[0][0][0].endswith("e-348")
    assert not longer.warnings
