"""The transform onto an axis: bounds hold, plans keep their promise, interpolation is exact enough."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import special

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.band import (
    density,
    interpolated,
    plan_sampling,
    reference_density,
)
from ladderband.numerics.correlation import correlation_function, coupled_modes
from ladderband.numerics.energy_tails import energy_range
from ladderband.numerics.line_shape import Bath, InstrumentFunction, broadening
from ladderband.numerics.transition import Mode, Transition

HUANG_RHYS, F = 1.7, 900.0
MODES = coupled_modes(Transition((Mode(F, F, float(np.sqrt(2.0 * HUANG_RHYS))),)))
QUANTA = np.arange(60)
WEIGHTS = np.exp(-HUANG_RHYS + QUANTA * np.log(HUANG_RHYS) - special.gammaln(QUANTA + 1))


def chi(step, count):
    return correlation_function(MODES, step, 0, count, Deadline.none())


def evaluate(shape, energies, tolerance):
    lines = energy_range(MODES, 1e-13, F * 1.3)
    reference = reference_density(lines, shape)
    sampling = plan_sampling(
        lines, shape, float(energies.min()), float(energies.max()), tolerance * reference
    )
    return density(chi, shape, sampling, energies), reference, sampling


@pytest.mark.parametrize("tolerance", [1e-2, 1e-4, 1e-7, 1e-10])
@pytest.mark.parametrize(
    "widths", [(300.0, 0.0), (20.0, 0.0), (0.0, 200.0), (0.0, 12.0), (60.0, 0.5), (5.0, 50.0)]
)
@pytest.mark.parametrize("axis", [(-3000.0, 9000.0), (500.0, 1200.0), (1e5, 1.2e5)], ids=str)
def test_band_is_the_sum_of_profiles_within_its_bound(widths, tolerance, axis):
    shape = broadening(*widths, None, None, 0.0, 1.0)
    energies = np.linspace(*axis, 311)
    found, reference, _ = evaluate(shape, energies, tolerance)
    expected = special.voigt_profile(energies[:, None] - F * QUANTA, shape.sigma, shape.gamma)
    expected = expected @ WEIGHTS
    error = np.abs(found.value - expected).max()
    assert error <= found.bound + 1e-13 * expected.max()
    # the reference density is certain to be reached, and the tolerance is kept
    assert found.bound <= max(tolerance, 1e-7) * reference
    top = special.voigt_profile(F * np.arange(6)[:, None] - F * QUANTA, shape.sigma, shape.gamma)
    assert (top @ WEIGHTS).max() >= reference


def test_instrument_is_a_convolution():
    table = InstrumentFunction(np.array([-90.0, -30.0, 60.0]), np.array([0.0, 2.0, 0.0]))
    energies = np.linspace(-500.0, 4000.0, 173)
    offsets = np.linspace(-90.0, 60.0, 6001)
    weights = np.interp(offsets, table.offset_cm1, table.weight) / table.area
    for sign in (1.0, -1.0):
        shape = broadening(50.0, 10.0, None, table, 0.0, sign)
        found, _, _ = evaluate(shape, energies, 1e-8)
        moved = energies[:, None, None] - F * QUANTA[:12] - sign * offsets[:, None]
        profile = np.trapezoid(
            special.voigt_profile(moved, shape.sigma, shape.gamma) * weights[:, None],
            offsets,
            axis=1,
        )
        assert found.value == pytest.approx(profile @ WEIGHTS[:12], abs=1e-8)


def test_brownian_and_lorentzian_together_keep_the_bound():
    """A finer plan must agree with a coarse one to the coarse one's bound."""
    shape = broadening(0.0, 8.0, Bath("brownian", 120.0, 50.0), None, 300.0, 1.0)
    energies = np.linspace(-1000.0, 5000.0, 200)
    coarse, _, one = evaluate(shape, energies, 1e-3)
    fine, _, two = evaluate(shape, energies, 1e-6)
    assert one.count < two.count
    assert fine.bound < coarse.bound
    assert np.abs(fine.value - coarse.value).max() <= coarse.bound + fine.bound


def test_points_outside_a_gaussian_band_are_zero_and_cost_nothing():
    shape = broadening(50.0, 0.0, None, None, 0.0, 1.0)
    energies = np.array([-1e9, -1e5, 900.0, 1e5, 1e9])
    found, _, sampling = evaluate(shape, energies, 1e-6)
    assert sampling.count < 2000
    assert found.value[[0, 1, 3, 4]].tolist() == [0.0] * 4
    assert found.value[2] > 1e-3


@pytest.mark.parametrize("frequency", [1.0, 7.0, 30.0, 31.9])
def test_interpolation_error_is_that_of_the_proof(frequency):
    """A wave of phase step a <= pi/4 on the grid: error at most a^16 (15!!/256)^2/16!."""
    length = 256
    grid = np.cos(2.0 * np.pi * frequency * np.arange(length) / length + 0.4)
    if frequency == int(frequency):
        place = np.random.default_rng(1).uniform(0.0, 3.0 * length, 2000)
        exact = np.cos(2.0 * np.pi * frequency * place / length + 0.4)
        value, lebesgue = interpolated(grid, place)
    else:  # not periodic: stay inside
        place = np.random.default_rng(1).uniform(8.0, 240.0, 2000)
        exact = np.cos(2.0 * np.pi * frequency * place / length + 0.4)
        value, lebesgue = interpolated(grid, place)
    a = 2.0 * np.pi * frequency / length
    double_factorial = 15 * 13 * 11 * 9 * 7 * 5 * 3
    limit = a**16 * (double_factorial / 256.0) ** 2 / float(special.factorial(16))
    assert np.abs(value - exact).max() <= limit + 1e-13
    assert lebesgue < 4.0


def test_no_points_is_no_work():
    assert len(interpolated(np.ones(8), np.empty(0))[0]) == 0
