"""The proven tails against enumerated lines: never below, and near enough to be of use."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from band_oracles import histogram, rotation
from ladderband.numerics.correlation import coupled_modes
from ladderband.numerics.energy_tails import energy_range, log_growth
from ladderband.numerics.moments import line_moments
from ladderband.numerics.transition import Mode, Moment, Transition


def case(temperature, *, mixed, slopes):
    rng = np.random.default_rng(2)
    modes = (Mode(900.0, 1010.0, 0.9), Mode(1500.0, 1300.0, -0.7))
    return Transition(
        modes,
        temperature_k=temperature,
        mixing=rotation(2, rng, 0.4) if mixed else None,
        moment=Moment(np.array([0.1, 0.0, -0.6]), rng.normal(size=(2, 3))) if slopes else None,
    )


@pytest.mark.parametrize("temperature", [0.0, 300.0, 600.0])
@pytest.mark.parametrize("mixed", [False, True], ids=["uncoupled", "mixed"])
@pytest.mark.parametrize("slopes", [False, True], ids=["constant-moment", "linear-moment"])
@pytest.mark.parametrize("theta", [-4e-4, -1e-4, 1e-4, 4e-4, 9e-4])
def test_growth_is_an_upper_bound_and_close(temperature, mixed, slopes, theta):
    transition = case(temperature, mixed=mixed, slopes=slopes)
    weights, zero = histogram(transition, 0 if temperature == 0.0 else 12, 24)
    modes = coupled_modes(transition)
    energies = np.arange(len(weights)) - zero
    exact = float(np.log(weights @ np.exp(theta * energies) / modes.total))
    found = log_growth(modes, theta)
    assert found >= exact - 1e-9
    # only the moment's cross terms are bounded roughly
    assert found <= exact + (1.0 if slopes else 1e-6)


@pytest.mark.parametrize("temperature", [0.0, 300.0, 600.0])
@pytest.mark.parametrize("slopes", [False, True], ids=["constant-moment", "linear-moment"])
@pytest.mark.parametrize("outside", [1e-3, 1e-6, 1e-9])
def test_range_holds_all_but_the_share(temperature, slopes, outside):
    transition = case(temperature, mixed=True, slopes=slopes)
    weights, zero = histogram(transition, 0 if temperature == 0.0 else 12, 24)
    modes = coupled_modes(transition)
    moments = line_moments(transition)
    found = energy_range(modes, outside, moments.standard_deviation)
    energies = np.arange(len(weights)) - zero
    beyond = (energies < found.low) | (energies > found.high)
    assert weights[beyond].sum() / modes.total <= outside
    # narrower by half it would not hold: the range is of the right size
    middle = 0.5 * (found.low + found.high)
    half = 0.25 * (found.high - found.low)
    narrow = (energies < middle - half) | (energies > middle + half)
    assert weights[narrow].sum() / modes.total > outside


def test_poisson_tail_is_chernoffs():
    """One displaced cold mode: ln <e^(theta E)> = S (e^(theta f) - 1), and scipy's Poisson tail."""
    huang_rhys, f = 3.0, 1000.0
    modes = coupled_modes(Transition((Mode(f, f, float(np.sqrt(2.0 * huang_rhys))),)))
    for theta in (2e-4, 1e-3, 2e-3):
        expected = huang_rhys * np.expm1(theta * f)
        assert log_growth(modes, theta) == pytest.approx(expected, rel=1e-9)
    found = energy_range(modes, 1e-8, f * np.sqrt(huang_rhys))
    assert found.low == 0.0
    assert stats.poisson.sf(np.floor(found.high / f), huang_rhys) <= 1e-8


@pytest.mark.parametrize("mixed", [False, True])
def test_no_growth_is_claimed_where_the_sum_diverges(mixed):
    """g >> f: <e^(theta E)> is infinite from the theta on at which A stops being positive."""
    modes = (Mode(400.0, 1200.0, 0.3), Mode(400.0, 1300.0, 0.1))
    mixing = rotation(2, np.random.default_rng(1), 0.3) if mixed else None
    assert log_growth(coupled_modes(Transition(modes, mixing=mixing)), 5e-3) == np.inf
    hot = Transition(modes, temperature_k=300.0, mixing=mixing)
    assert log_growth(coupled_modes(hot), -1.0) == np.inf


def test_any_guess_of_the_width_gives_a_true_range():
    transition = case(300.0, mixed=True, slopes=False)
    modes = coupled_modes(transition)
    ranges = [energy_range(modes, 1e-8, scale) for scale in (1.0, 300.0, 1e5)]
    weights, zero = histogram(transition, 12, 24)
    energies = np.arange(len(weights)) - zero
    for found in ranges:
        beyond = (energies < found.low) | (energies > found.high)
        assert weights[beyond].sum() <= 1e-8
        assert found.high - found.low < 1.5 * (ranges[1].high - ranges[1].low)


def test_a_range_nobody_can_prove_is_refused():
    from ladderband.numerics.errors import PrecisionNotReached

    modes = coupled_modes(Transition((Mode(1e-9, 1e5, 60.0),), temperature_k=1e5))
    with pytest.raises(PrecisionNotReached, match="No range of energies"):
        energy_range(modes, 1e-300, 1e-3)
