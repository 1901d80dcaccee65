"""Progressions of uncoupled modes: sticks, positions and what is missing."""

from __future__ import annotations

import math

import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.errors import DomainError
from ladderband.numerics.line_list import LineList, assignments
from ladderband.numerics.progression import thermal_populations, thermal_quanta
from ladderband.numerics.transition import Mode, Transition
from ladderband.usecases.limits import CostLimitExceeded, Limits
from ladderband.usecases.progressions import ProgressionsQuestion, progressions


def ask(*modes: Mode, **options: object) -> LineList:
    names = {"process", "origin_cm1", "temperature_k", "mixing"}
    transition = Transition(modes, **{k: v for k, v in options.items() if k in names})  # type: ignore[arg-type]
    rest = {k: v for k, v in options.items() if k not in names}
    return progressions(ProgressionsQuestion(transition, **rest), Limits(), Deadline.none())  # type: ignore[arg-type]


def test_cold_displaced_mode_is_a_poisson_row() -> None:
    """e^-S S^n / n!, S = 0.8, at n quanta above the origin."""
    delta = math.sqrt(1.6)
    lines = ask(Mode(500.0, 500.0, delta), origin_cm1=20000.0, v_final_max=8, threshold=0.0)
    expected = [math.exp(-0.8) * 0.8**n / math.factorial(n) for n in range(9)]
    assert np.abs(lines.intensity - expected).max() <= lines.accuracy.bound
    assert np.array_equal(lines.position_cm1, 20000.0 + 500.0 * np.arange(9))
    missing = 1 - sum(expected)
    assert missing <= lines.completeness.missing_at_most <= missing + 1e-10


def test_emission_runs_to_lower_wavenumbers() -> None:
    lines = ask(Mode(500.0, 450.0, 1.0), process="emission", origin_cm1=20000.0)
    strongest_quanta = lines.v_final[np.argmax(lines.position_cm1), 0]
    assert strongest_quanta == 0
    assert lines.position_cm1.min() < 20000.0 == lines.position_cm1.max()


def test_chosen_quanta_meet_the_tolerance() -> None:
    everything = {"temperature_k": 600.0, "threshold": 0.0, "max_lines": 10**6}
    lines = ask(Mode(200.0, 150.0, 1.4), tolerance=1e-8, **everything)
    assert lines.completeness.missing_at_most <= 1e-8
    again = ask(Mode(200.0, 150.0, 1.4), tolerance=1e-3, **everything)
    assert len(again) < len(lines)
    assert again.completeness.missing_at_most <= 1e-3


def test_missing_claim_against_a_larger_list() -> None:
    small = ask(Mode(300.0, 280.0, 2.0), temperature_k=300.0, threshold=1e-3)
    large = ask(Mode(300.0, 280.0, 2.0), temperature_k=300.0, tolerance=1e-11, threshold=0.0)
    truly_missing = large.intensity.sum() - small.intensity.sum()
    assert truly_missing <= small.completeness.missing_at_most <= truly_missing + 2e-9


def test_joint_lines_are_products_of_the_single_ones() -> None:
    a, b = Mode(1000.0, 900.0, 1.2), Mode(300.0, 310.0, -0.7)
    both = ask(a, b, threshold=0.0, v_final_max=3, v_initial_max=0)
    one = ask(a, threshold=0.0, v_final_max=3, v_initial_max=0)
    two = ask(b, threshold=0.0, v_final_max=3, v_initial_max=0)
    assert len(both) == 16
    for i in range(16):
        first = one.intensity[np.flatnonzero(one.v_final[:, 0] == both.v_final[i, 0])[0]]
        second = two.intensity[np.flatnonzero(two.v_final[:, 0] == both.v_final[i, 1])[0]]
        assert both.intensity[i] == pytest.approx(first * second, rel=1e-14)


def test_the_threshold_loses_no_line_above_it() -> None:
    modes = [Mode(1000.0, 900.0, 1.2), Mode(300.0, 310.0, -0.7), Mode(500.0, 450.0, 1.5)]
    all_lines = ask(*modes, threshold=0.0, max_lines=10**6, tolerance=1e-9)
    kept = ask(*modes, threshold=1e-3, max_lines=10**6, tolerance=1e-9)
    assert len(kept) == np.count_nonzero(all_lines.intensity >= 1e-3 * all_lines.intensity.max())


def test_max_lines_keeps_the_strongest() -> None:
    full = ask(Mode(500.0, 480.0, 2.0))
    few = ask(Mode(500.0, 480.0, 2.0), max_lines=3)
    assert sorted(few.intensity) == sorted(full.intensity)[-3:]
    assert few.completeness.captured == pytest.approx(sum(few.intensity), abs=1e-15)
    assert np.all(np.diff(few.position_cm1) >= 0)


@pytest.mark.parametrize("temperature", [0.0, 10.0, 300.0, 5000.0])
def test_populations(temperature: float) -> None:
    """Geometric series; against numpy in extended precision."""
    populations = thermal_populations(350.0, temperature, 40)
    if temperature == 0.0:
        assert populations[0] == 1
        assert populations[1:].sum() == 0
        return
    x = np.longdouble(350.0) / (np.longdouble("0.69503480048612740") * temperature)
    exact = (1 - np.exp(-x)) * np.exp(-x * np.arange(41))
    assert np.abs(populations - exact).max() <= 20 * 2.0**-53


def test_thermal_quanta_leave_out_no_more_than_asked() -> None:
    v = thermal_quanta(200.0, 500.0, 1e-6)
    left = 1 - thermal_populations(200.0, 500.0, v).sum()
    assert left <= 1e-6 < 1 - thermal_populations(200.0, 500.0, v - 1).sum()


@pytest.mark.parametrize(
    ("modes", "options", "message"),
    [
        ([Mode(1.0, 1.0)] * 7, {}, "1 to 6 modes"),
        ([Mode(1.0, 1.0)] * 2, {"mixing": np.eye(2)}, "no mixing"),
    ],
)
def test_refusals(modes: list[Mode], options: dict[str, object], message: str) -> None:
    with pytest.raises(DomainError, match=message):
        ask(*modes, **options)


def test_a_product_that_explodes_is_refused_with_the_estimate() -> None:
    modes = [Mode(100.0, 90.0, 3.0)] * 6
    with pytest.raises(CostLimitExceeded, match="estimated"):
        ask(*modes, temperature_k=300.0, threshold=0.0)


def test_assignment_notation() -> None:
    v, n = np.array([[0, 1, 0], [0, 0, 0]], np.int32), np.array([[2, 0, 0], [0, 0, 0]], np.int32)
    assert assignments(v, n) == ["1^2_0 2^0_1", "0^0_0"]


@pytest.mark.parametrize("quanta", [0, 200])
def test_a_mode_without_any_intensity_in_range_gives_no_lines(quanta: int) -> None:
    """A displacement of 49 with too few quanta: every stick is below 1e-300 or exactly zero."""
    lines = ask(
        Mode(66276.0, 78530.0, 1e-9),
        Mode(39406.0, 14830.0, -48.7),
        v_initial_max=0,
        v_final_max=quanta,
        threshold=0.5,
    )
    assert lines.completeness.missing_at_most >= 1.0 - 1e-9
    assert np.all(lines.intensity < 1e-20)


@pytest.mark.parametrize("process", ["absorption", "emission"])
def test_a_mode_alone_gives_what_it_gives_beside_one_that_does_nothing(process: str) -> None:
    """The short way of one mode and the products of several must list the same lines."""
    options = {"process": process, "origin_cm1": 2e4, "threshold": 1e-4, "v_final_max": 30}
    mode, idle = Mode(310.0, 270.0, 1.7), Mode(3000.0, 3000.0, 0.0)  # idle: 2e-5 are hot
    for max_lines in (1000, 12):
        chosen = {"temperature_k": 400.0, "v_initial_max": 9, "max_lines": max_lines, **options}
        alone, both = ask(mode, **chosen), ask(mode, idle, **chosen)
        limit = alone.accuracy.bound + both.accuracy.bound + 1e-4 * alone.intensity.max()
        assert len(alone) >= 12
        assert not both.v_final[:, 1].any()
        assert np.abs(alone.intensity - both.intensity).max() <= limit
        assert np.array_equal(alone.v_initial[:, 0], both.v_initial[:, 0])
        assert np.array_equal(alone.v_final[:, 0], both.v_final[:, 0])
        assert np.array_equal(alone.position_cm1, both.position_cm1)
