"""chi(t) against the 2N-dimensional pairing integral in forty digits, and what must hold exactly."""

from __future__ import annotations

import numpy as np
import pytest

from band_oracles import exact_chi, rotation
from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.correlation import (
    correlation_function,
    coupled_modes,
    exact_step,
)
from ladderband.numerics.errors import DeadlineExceeded, DomainError, PrecisionNotReached
from ladderband.numerics.mixed_modes import block_values
from ladderband.numerics.transition import Mode, Moment, Transition
from ladderband.numerics.uncoupled_modes import UncoupledModes, uncoupled_values

NEVER = Deadline.none()


def transition(n, temperature, seed, *, mixed, spread=0.25, size=0.3, low=60.0):
    rng = np.random.default_rng(seed)
    g = rng.uniform(low, 1600.0, n)
    f = g * rng.uniform(1.0 - spread, 1.0 + spread, n)
    shifts = rng.normal(size=n)
    modes = tuple(Mode(float(a), float(b), float(c)) for a, b, c in zip(g, f, shifts, strict=True))
    return Transition(
        modes,
        temperature_k=temperature,
        mixing=rotation(n, rng, size) if mixed else None,
    )


def chi(case, step, count, start=0):
    return correlation_function(coupled_modes(case), step, start, start + count, NEVER)


@pytest.mark.parametrize("temperature", [0.0, 77.0, 300.0, 600.0])
@pytest.mark.parametrize("n", [1, 2, 3, 5])
@pytest.mark.parametrize("mixed", [False, True], ids=["uncoupled", "mixed"])
def test_value_is_within_its_bound_of_forty_digits(n, temperature, mixed):
    case = transition(n, temperature, seed=n, mixed=mixed)
    step = exact_step(2.1e-4)
    found = chi(case, step, 60)
    for index in (0, 1, 7, 31, 59):
        error = abs(found.value[index] - exact_chi(case, index * step))
        assert error <= found.bound[index], (index, error, found.bound[index])
        assert found.bound[index] < 1e-9


def test_bound_holds_where_a_tangent_is_singular():
    # f t / 2 = pi/2 to the last bit of t: the tangent form has a pole there
    case = transition(3, 300.0, seed=8, mixed=True)
    f = case.wavenumbers_final
    for k in range(3):
        step = exact_step(np.pi / f[k])
        found = chi(case, step, 3)
        for index in (1, 2):
            assert abs(found.value[index] - exact_chi(case, index * step)) <= found.bound[index]


def test_bound_holds_in_extremes():
    """A wide change of wavenumbers, strong mixing, large shifts, and far in time."""
    modes = (Mode(50.0, 1500.0, 5.0), Mode(1400.0, 90.0, -4.0), Mode(700.0, 700.0, 0.0))
    rng = np.random.default_rng(5)
    case = Transition(modes, temperature_k=150.0, mixing=rotation(3, rng, 2.0))
    step = exact_step(1.3e-3)
    found = chi(case, step, 4, start=5000)
    for index in range(4):
        error = abs(found.value[index] - exact_chi(case, (5000 + index) * step))
        assert error <= found.bound[index]


@pytest.mark.parametrize("temperature", [0.0, 77.0, 300.0, 600.0])
@pytest.mark.parametrize("seed", range(4))
def test_inverse_is_bounded_as_proved(temperature, seed):
    """|X^-1| <= 2 / (1 - alpha) for every t and every leading block, cosines near zero included."""
    from ladderband.numerics.mixed_modes import contraction

    case = transition(6, temperature, seed=seed, mixed=True, spread=0.6, size=1.0)
    (block,) = coupled_modes(case).mixed
    kappa = 2.0 / (1.0 - contraction(block))
    rng = np.random.default_rng(seed)
    largest = 0.0
    for _ in range(300):
        q = np.exp(-block.exponents + 2j * np.pi * rng.uniform(size=6))
        phi = np.where(rng.uniform(size=6) < 0.3, 0.5 * np.pi, 2.0 * np.pi * rng.uniform(size=6))
        tau, c, s = (1.0 - q) / (1.0 + q), np.cos(phi) + 0j, np.sin(phi)
        for form, scale in ((block.g * tau, block.f**-0.5), (tau / block.g, block.f**0.5)):
            left = scale[:, None] * block.mixing
            x = np.sqrt(c)[:, None] * ((left * form) @ left.T) * np.sqrt(c) + 1j * np.diag(s)
            for size in (1, 3, 6):
                norm = np.linalg.norm(np.linalg.inv(x[:size, :size]), 2)
                largest = max(largest, norm / kappa)
    assert 0.05 < largest <= 1.0


def test_branch_of_twenty_modes_is_followed():
    """The root of the determinant turns many times; the value itself is smooth from step to step."""
    case = transition(20, 600.0, seed=3, mixed=True, spread=0.6, low=300.0)
    fine = chi(case, exact_step(1e-5), 400)
    turn = np.abs(np.diff(fine.value))
    slope = np.abs(fine.value[1] - fine.value[0])
    assert turn.max() < 100.0 * slope + 1e-3
    coarse = chi(case, 64.0 * exact_step(1e-5), 6)
    assert coarse.value == pytest.approx(fine.value[::64][:6], abs=1e-11)


@pytest.mark.parametrize("temperature", [0.0, 300.0])
@pytest.mark.parametrize("with_slopes", [False, True])
def test_uncoupled_route_equals_matrix_route(temperature, with_slopes):
    n = 12
    case = transition(n, temperature, seed=12, mixed=False, spread=0.5)
    rng = np.random.default_rng(1)
    if with_slopes:
        case = Transition(
            case.modes,
            temperature_k=temperature,
            moment=Moment(rng.normal(size=3), rng.normal(size=(n, 3))),
        )
    columns = coupled_modes(case).uncoupled
    block = columns_as_block(columns)
    step = exact_step(3e-4)
    one = uncoupled_values(columns, step, 0, 300, NEVER)
    two = block_values(block, step, 0, 300, NEVER)
    assert (np.abs(one.log - two.log) <= one.log_bound + two.log_bound).all()
    assert (np.abs(one.mean - two.mean) <= one.mean_bound + two.mean_bound).all()
    limit = one.covariance_bound + two.covariance_bound
    assert (np.abs(one.covariance - two.covariance) <= limit).all()


def columns_as_block(columns: UncoupledModes):
    from ladderband.numerics.mixed_modes import ModeBlock

    return ModeBlock(
        columns.g,
        columns.f,
        np.eye(len(columns.g)),
        columns.displacement,
        columns.exponents,
        columns.slopes,
    )


def test_blocks_of_the_mixing_multiply():
    rng = np.random.default_rng(4)
    small, other = rotation(2, rng, 0.4), rotation(3, rng, 0.4)
    mixing = np.zeros((6, 6))
    mixing[np.ix_([0, 3], [1, 4])] = small
    mixing[np.ix_([1, 2, 5], [0, 2, 5])] = other
    mixing[4, 3] = -1.0
    case = transition(6, 300.0, seed=2, mixed=False)
    case = Transition(
        case.modes,
        temperature_k=300.0,
        mixing=mixing,
        moment=Moment(np.array([0.4, 0.0, -1.0]), rng.normal(size=(6, 3))),
    )
    sorted_modes = coupled_modes(case)
    assert sorted(len(block) for block in sorted_modes.mixed) == [2, 3]
    assert len(sorted_modes.uncoupled.g) == 1
    whole = whole_block(case)
    step = exact_step(4e-4)
    found = correlation_function(sorted_modes, step, 0, 50, NEVER)
    other_way = correlation_function(whole, step, 0, 50, NEVER)
    assert (np.abs(found.value - other_way.value) <= found.bound + other_way.bound).all()


def whole_block(case):
    """The same transition as one block, zeros of J and all."""
    from dataclasses import replace

    from ladderband.numerics.mixed_modes import ModeBlock
    from ladderband.numerics.units import boltzmann_exponent

    g = case.wavenumbers_initial
    block = ModeBlock(
        g,
        case.wavenumbers_final,
        case.mixing_matrix,
        case.displacements,
        np.array([boltzmann_exponent(x, case.temperature_k) for x in g]),
        case.moment.slopes_debye * np.sqrt(g)[:, None],
    )
    return replace(coupled_modes(case), uncoupled=None, mixed=(block,))


def test_start_continues_the_same_function():
    case = transition(4, 300.0, seed=6, mixed=True)
    step = exact_step(2e-4)
    whole, late = chi(case, step, 200), chi(case, step, 77, start=123)
    assert np.array_equal(whole.value[123:], late.value)


def test_value_at_zero_is_one():
    for mixed in (False, True):
        found = chi(transition(8, 300.0, seed=1, mixed=mixed), exact_step(1e-4), 1)
        assert abs(found.value[0] - 1.0) <= found.bound[0] < 1e-9


def test_vanishing_moment_is_refused():
    case = Transition((Mode(100.0, 100.0),), moment=Moment(np.zeros(3), np.zeros((1, 3))))
    with pytest.raises(DomainError, match="moment is zero") as caught:
        coupled_modes(case)
    assert caught.value.pointer == "/moment"


def test_populations_beyond_double_precision_are_refused():
    case = transition(2, 1e5, seed=1, mixed=True)
    case = Transition(
        (Mode(1e-3, 1e-3, 0.1), Mode(1000.0, 900.0)), temperature_k=1e5, mixing=case.mixing
    )
    with pytest.raises(PrecisionNotReached, match="thermal populations"):
        chi(case, exact_step(1e-4), 1)
    lone = Transition((Mode(1e-9, 1e-9, 0.1),), temperature_k=1e5)
    with pytest.raises(PrecisionNotReached, match="too far below k T"):
        chi(lone, exact_step(1e-4), 1)


@pytest.mark.parametrize("mixed", [False, True])
def test_deadline_is_looked_at(mixed):
    case = transition(3, 300.0, seed=1, mixed=mixed)
    with pytest.raises(DeadlineExceeded):
        correlation_function(coupled_modes(case), exact_step(1e-4), 0, 100, Deadline.after(-1.0))


def test_step_is_exact():
    step = exact_step(1.2345678901e-4)
    assert step <= 1.2345678901e-4 < step * (1.0 + 2e-7)
    assert all(step * n == np.float64(step) * n == (step * n) for n in (3, 4097, 2**20 + 1))
    from fractions import Fraction

    assert Fraction(step * 262143.0) == 262143 * Fraction(step)
