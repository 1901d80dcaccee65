"""The lines use case: selection, blocks, certainty above a threshold, refusals, mode reports."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.enumeration import enumerate_block
from ladderband.numerics.errors import DeadlineExceeded, DomainError
from ladderband.numerics.line_selection import Selection, transition_lines
from ladderband.numerics.mode_blocks import mode_blocks
from ladderband.numerics.transition import Mode, Moment, Transition
from ladderband.usecases.limits import CostLimitExceeded, Limits
from ladderband.usecases.lines import LinesAnswer, LinesQuestion, amplitude_limit, lines
from line_oracles import random_transition

FOREVER = Deadline.none()
PAIR = Transition(
    (Mode(992.0, 923.0, 1.6), Mode(608.0, 522.0, -0.4)),
    mixing=np.array([[0.8, 0.6], [-0.6, 0.8]]),
    origin_cm1=20000.0,
)


def ask(transition: Transition, **options: object) -> LinesAnswer:
    return lines(LinesQuestion(transition, **options), Limits(), FOREVER)  # type: ignore[arg-type]


def test_blocks_of_the_mixing_matrix() -> None:
    mixing = np.zeros((4, 4))
    mixing[0, 2] = mixing[2, 0] = 1.0
    mixing[np.ix_([1, 3], [1, 3])] = [[0.6, 0.8], [-0.8, 0.6]]
    blocks = mode_blocks(mixing, 4)
    assert [(b.final, b.initial) for b in blocks] == [((0,), (2,)), ((1, 3), (1, 3)), ((2,), (0,))]


@pytest.mark.parametrize("temperature", [0.0, 250.0])
def test_multiplied_blocks_equal_a_joint_enumeration(temperature: float) -> None:
    """Block structure by product against the same modes enumerated as one block."""
    mixing = np.eye(3)
    mixing[:2, :2] = [[0.8, 0.6], [-0.6, 0.8]]
    modes = (Mode(992.0, 923.0, 1.2), Mode(608.0, 522.0, -0.4), Mode(700.0, 750.0, 0.8))
    transition = Transition(modes, mixing=mixing, temperature_k=temperature)
    product = transition_lines(transition, 1e-5, Selection(max_lines=10**6), 10**6, FOREVER)
    joint = enumerate_block(transition, 1e-7, 10**6, FOREVER)
    v, n = joint.quanta(np.arange(len(joint.intensity)))
    table = dict(zip(map(tuple, np.hstack([v, n]).tolist()), joint.intensity.tolist(), strict=True))
    found = product.selected
    assert product.enumerated.missing_at_most <= 1e-5
    for key, intensity in zip(
        np.hstack([found.v_initial, found.v_final]).tolist(), found.intensity, strict=True
    ):
        assert table[tuple(key)] == pytest.approx(intensity, abs=1e-11)


def test_permuted_modes_are_the_same_transition() -> None:
    """J a permutation: final mode 0 is initial mode 1; quanta land on the right modes."""
    modes = (Mode(500.0, 910.0, 1.0), Mode(900.0, 520.0, 0.3))
    swapped = Transition(modes, mixing=np.array([[0.0, 1.0], [1.0, 0.0]]))
    plain = Transition((Mode(900.0, 910.0, 1.0), Mode(500.0, 520.0, 0.3)))
    a, b = ask(swapped, tolerance=1e-6).lines, ask(plain, tolerance=1e-6).lines
    assert np.allclose(a.intensity, b.intensity, atol=1e-12)
    assert np.array_equal(a.v_final, b.v_final)
    assert np.allclose(a.position_cm1, b.position_cm1)


def test_window_keeps_only_what_lies_inside() -> None:
    full = ask(PAIR, tolerance=1e-6).lines
    cut = ask(PAIR, tolerance=1e-6, low_cm1=20900.0, high_cm1=22000.0).lines
    inside = (full.position_cm1 >= 20900.0) & (full.position_cm1 <= 22000.0)
    assert np.array_equal(np.sort(cut.position_cm1), np.sort(full.position_cm1[inside]))
    few = ask(PAIR, tolerance=1e-6, low_cm1=20900.0, high_cm1=22000.0, max_lines=2).lines
    assert np.array_equal(few.intensity, np.sort(full.intensity[inside])[::-1][:2])


def test_a_window_without_lines_is_an_empty_list() -> None:
    answer = ask(PAIR, low_cm1=1.0, high_cm1=2.0)
    assert len(answer.lines) == 0
    assert answer.lines.completeness.missing_at_most >= 1.0


def test_threshold_alone_makes_every_line_above_it_certain() -> None:
    answer = ask(replace(PAIR, temperature_k=300.0), threshold=0.005)
    strongest = answer.lines.intensity.max()
    assert answer.enumerated.missing_at_most <= 0.005 * strongest
    larger = ask(replace(PAIR, temperature_k=300.0), tolerance=1e-7, max_lines=10**6)
    expected = np.count_nonzero(larger.lines.intensity >= 0.005 * strongest)
    assert len(answer.lines) == expected
    assert not answer.warnings


def test_sorting_and_direction() -> None:
    by_position = ask(replace(PAIR, process="emission"), by="position").lines
    assert np.all(np.diff(by_position.position_cm1) >= 0)
    assert by_position.position_cm1.max() == 20000.0
    assert np.all(np.diff(ask(PAIR).lines.intensity) <= 0)


def test_a_hundred_modes_say_at_once_what_would_be_left() -> None:
    transition = random_transition(100, 0, total_huang_rhys=3.0, angle=0.5)
    with pytest.raises(CostLimitExceeded, match=r"would stay missing.*POST /v1/bands"):
        ask(transition, tolerance=1e-3)
    best = ask(transition)
    assert best.enumerated.missing_at_most > 0.01
    assert any("POST /v1/bands" in warning for warning in best.warnings)
    assert best.enumerated_lines <= amplitude_limit(Limits()) + 1


def test_states_too_far_apart_for_a_list() -> None:
    modes = (Mode(1000.0, 1000.0, 60.0), Mode(900.0, 900.0, 1.0))
    mixing = np.array([[0.8, 0.6], [-0.6, 0.8]])
    with pytest.raises((DomainError, CostLimitExceeded)):
        ask(Transition(modes, mixing=mixing), tolerance=0.4)


def test_max_lines_is_told() -> None:
    answer = ask(PAIR, tolerance=1e-4, max_lines=3)
    assert len(answer.lines) == 3
    assert any("max_lines" in warning for warning in answer.warnings)


def test_the_deadline_is_seen() -> None:
    with pytest.raises(DeadlineExceeded):
        lines(LinesQuestion(PAIR), Limits(), Deadline(at=0.0))


def test_mode_reports() -> None:
    """Shares add up; the mean of the distribution is the mean quanta."""
    answer = ask(replace(PAIR, temperature_k=200.0))
    assert sum(mode.stokes_share for mode in answer.modes) == pytest.approx(1.0)
    for mode in answer.modes:
        mean = float(mode.quanta @ np.arange(len(mode.quanta)))
        assert mode.mean_quanta == pytest.approx(mean, abs=0.01)
    assert answer.modes[0].reorganisation_cm1 == pytest.approx(0.5 * 1.6**2 * 923.0)


def test_a_moment_couples_all_modes_and_stays_normalised() -> None:
    modes = (Mode(900.0, 800.0, 0.5), Mode(500.0, 550.0, 0.0), Mode(700.0, 690.0, 0.2))
    moment = Moment(np.zeros(3), np.array([[0.0, 0.0, 0.0], [0.0, 0.4, 0.0], [0.0, 0.0, 0.0]]))
    answer = ask(Transition(modes, moment=moment, temperature_k=200.0), tolerance=1e-4)
    assert answer.enumerated.missing_at_most <= 1e-4
    false_origin = answer.lines.v_final.sum(axis=1) + answer.lines.v_initial.sum(axis=1) == 0
    assert answer.lines.intensity[false_origin].sum() < 1e-15  # the 0-0 line is forbidden
    assert math.isclose(answer.lines.completeness.total, 1.0)


@pytest.mark.parametrize("threshold", [0.0, 1e-300])
def test_a_vanishing_threshold_is_the_best_list_there_is(threshold: float) -> None:
    answer = ask(PAIR, threshold=threshold)
    assert answer.enumerated.missing_at_most < 1e-10


def test_a_hardly_vibrating_hot_mode_is_refused_in_words() -> None:
    modes = (Mode(1e-3, 1e-3, 0.1), Mode(500.0, 450.0, 0.3))
    mixing = np.array([[0.8, 0.6], [-0.6, 0.8]])
    hot = Transition(modes, mixing=mixing, temperature_k=1e5)
    answer = ask(hot)
    assert answer.enumerated.missing_at_most > 0.5
    assert any("POST /v1/bands" in warning for warning in answer.warnings)
