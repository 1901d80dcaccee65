"""Wavefunctions and potentials for a plot."""

from __future__ import annotations

import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.errors import DomainError
from ladderband.numerics.oscillators import one_pair
from ladderband.numerics.transition import Mode
from ladderband.usecases.limits import AnswerTooLarge, CostLimitExceeded, Limits
from ladderband.usecases.wavefunctions import WavefunctionsQuestion, wavefunctions


def test_sampled_functions_reproduce_the_overlaps() -> None:
    """Trapezoidal products of the plotted columns equal the certified table."""
    answer = wavefunctions(
        WavefunctionsQuestion(Mode(900.0, 700.0, 1.1), 4, 5, 801, -15.0, 15.0),
        Limits(),
        Deadline.none(),
    )
    step = answer.coordinate[1] - answer.coordinate[0]
    table = step * answer.wavefunction_initial @ answer.wavefunction_final.T
    exact = certified_tables(one_pair(900.0, 700.0, 1.1), 4, 5, 1e-10, Deadline.none()).tables[0]
    assert np.abs(table - exact).max() < 1e-11
    assert answer.accuracy.evidence == "proven"


def test_potentials_touch_zero_at_their_own_minimum_and_meet_the_turning_points() -> None:
    answer = wavefunctions(
        WavefunctionsQuestion(Mode(900.0, 700.0, 2.0), 0, 0, 2001, -5.0, 5.0),
        Limits(),
        Deadline.none(),
    )
    assert abs(answer.coordinate[np.argmin(answer.potential_initial_cm1)] - 2.0) < 1e-9
    assert abs(answer.coordinate[np.argmin(answer.potential_final_cm1)]) < 1e-9
    assert answer.level_final_cm1[0] == 350.0
    at_one = np.interp(1.0, answer.coordinate, answer.potential_final_cm1)
    assert at_one == pytest.approx(350.0, rel=1e-5)  # classical turning point of n = 0 is q' = 1


def test_default_range_shows_both_states() -> None:
    answer = wavefunctions(
        WavefunctionsQuestion(Mode(900.0, 700.0, 8.0)), Limits(), Deadline.none()
    )
    edge = np.abs(answer.wavefunction_initial[:, [0, -1]]).max()
    edge = max(edge, np.abs(answer.wavefunction_final[:, [0, -1]]).max())
    assert edge < 1e-3


def test_an_empty_range_is_refused() -> None:
    with pytest.raises(DomainError, match="below stop"):
        wavefunctions(
            WavefunctionsQuestion(Mode(900.0, 700.0), start=1.0, stop=1.0),
            Limits(),
            Deadline.none(),
        )


def test_too_many_numbers_are_refused_before_any_work() -> None:
    question = WavefunctionsQuestion(Mode(900.0, 700.0), 180, 50, 100_001)
    with pytest.raises(AnswerTooLarge, match="23200232 numbers"):
        wavefunctions(question, Limits(), Deadline.none())
    with pytest.raises(CostLimitExceeded, match="fewer points or levels"):
        wavefunctions(question, Limits(table_elements=10**8), Deadline.none())
