"""Exact marginals of one final mode, their bound and their tails."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.line_selection import Selection, transition_lines
from ladderband.numerics.marginals import GaussianMode, gaussian_modes, marginal
from ladderband.numerics.progression import mode_sticks
from ladderband.numerics.transition import Mode, Transition
from line_oracles import random_transition


@pytest.mark.parametrize("temperature", [0.0, 300.0])
@pytest.mark.parametrize(
    "mode",
    [Mode(500.0, 500.0, 1.7), Mode(400.0, 900.0, 0.0), Mode(900.0, 300.0, -3.0)],
    ids=["displaced", "distorted", "both"],
)
def test_one_mode_equals_its_summed_table(mode: Mode, temperature: float) -> None:
    """Column sums of the certified table, another route entirely."""
    (gaussian,) = gaussian_modes(Transition((mode,), temperature_k=temperature))
    found = marginal(gaussian)
    sticks = mode_sticks(mode, temperature, 60 if temperature else 0, 250, Deadline.none())
    summed = sticks.weights.sum(axis=0)
    length = min(len(summed), len(found.probabilities))
    slack = found.bound + sticks.sum_bound + math.exp(-300 / (0.695 * 300) * 61)
    assert np.abs(found.probabilities[:length] - summed[:length]).max() <= slack
    assert found.mean_quanta == pytest.approx(float(summed @ np.arange(251)), rel=1e-6)


def test_poisson() -> None:
    found = marginal(GaussianMode(math.sqrt(6.0), 0.5, 0.5))
    expected = [math.exp(-3.0) * 3.0**n / math.factorial(n) for n in range(30)]
    assert np.abs(found.probabilities[:30] - expected).max() <= found.bound < 1e-12


@pytest.mark.parametrize("count", [1, 5, 12, 40])
def test_the_tail_bound_covers_the_tail(count: int) -> None:
    for mode in (
        GaussianMode(2.0, 0.5, 0.5),
        GaussianMode(1.0, 2.0, 0.4),
        GaussianMode(0.0, 0.1, 3.0),
    ):
        found = marginal(mode)
        tail = float(found.probabilities[count:].sum())
        assert tail <= mode.tail(count) + 1e-12
        assert mode.tail(count) <= 1.0


def test_mixed_modes_against_the_enumerated_lines() -> None:
    transition = replace(random_transition(3, 2, total_huang_rhys=1.0), temperature_k=200.0)
    found = transition_lines(transition, 1e-5, Selection(max_lines=10**6), 10**6, Deadline.none())
    for k, gaussian in enumerate(gaussian_modes(transition)):
        summed = np.bincount(found.selected.v_final[:, k], found.selected.intensity)
        exact = marginal(gaussian).probabilities[: len(summed)]
        missing = exact - summed
        assert np.all(missing >= -1e-12)
        assert missing.sum() <= found.selected.completeness.missing_at_most + 1e-12
