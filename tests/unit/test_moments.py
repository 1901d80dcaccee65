"""Closed-form moments against enumerated lines."""

from __future__ import annotations

import numpy as np
import pytest

from band_oracles import histogram, rotation
from ladderband.numerics.moments import line_moments, vertical_energy
from ladderband.numerics.transition import Mode, Moment, Transition


@pytest.mark.parametrize("temperature", [0.0, 200.0, 600.0])
@pytest.mark.parametrize("mixed", [False, True], ids=["uncoupled", "mixed"])
@pytest.mark.parametrize("slopes", [False, True], ids=["constant-moment", "linear-moment"])
def test_moments_are_those_of_all_lines(temperature, mixed, slopes):
    rng = np.random.default_rng(7)
    transition = Transition(
        (Mode(1000.0, 1110.0, 0.8), Mode(1400.0, 1250.0, -0.6)),
        temperature_k=temperature,
        mixing=rotation(2, rng, 0.4) if mixed else None,
        moment=Moment(np.array([0.2, 0.5, 0.0]), 0.4 * rng.normal(size=(2, 3))) if slopes else None,
    )
    weights, zero = histogram(transition, 0 if temperature == 0.0 else 14, 26)
    weights = weights / weights.sum()
    energies = np.arange(len(weights)) - zero
    mean = float(weights @ energies)
    variance = float(weights @ (energies - mean) ** 2)
    third = float(weights @ (energies - mean) ** 3)
    found = line_moments(transition)
    assert found.mean == pytest.approx(mean, rel=1e-8)
    assert found.variance == pytest.approx(variance, rel=1e-7)
    assert found.third == pytest.approx(third, rel=1e-6)
    assert found.skewness == pytest.approx(third / variance**1.5, rel=1e-6)


def test_poisson_moments():
    """Displaced only, cold: mean S f, variance S f^2, third S f^3."""
    found = line_moments(Transition((Mode(400.0, 400.0, 2.0),)))
    assert (found.mean, found.variance, found.third) == pytest.approx(
        (2.0 * 400.0, 2.0 * 400.0**2, 2.0 * 400.0**3), rel=1e-14
    )


def test_vertical_energy_is_the_reorganisation_energy():
    transition = Transition((Mode(400.0, 500.0, 2.0), Mode(100.0, 100.0, -1.0)))
    assert vertical_energy(transition) == pytest.approx(2.0 * 500.0 + 0.5 * 100.0)


def test_single_line_has_no_skewness():
    found = line_moments(Transition((Mode(400.0, 400.0, 0.0),)))
    assert (found.mean, found.standard_deviation, found.skewness) == (0.0, 0.0, 0.0)


def test_rounding_makes_no_skewness():
    from ladderband.numerics.moments import skewness

    assert skewness(1e-300, 1e-120) == 0.0
    assert skewness(8.0, 2.0) == 1.0
