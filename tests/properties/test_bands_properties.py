"""What must hold for any transition: positivity, area, symmetries, and that bounds are kept."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from band_oracles import exact_chi, rotation
from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.axis import Axis
from ladderband.numerics.correlation import correlation_function, coupled_modes, exact_step
from ladderband.numerics.energy_tails import energy_range
from ladderband.numerics.line_shape import kink_correction
from ladderband.numerics.moments import line_moments
from ladderband.numerics.transition import Mode, Moment, Transition
from ladderband.usecases.bands import bands
from ladderband.usecases.bands_question import BandsQuestion, LineShape, Species
from ladderband.usecases.limits import Limits

NEVER = Deadline.none()


@st.composite
def transitions(draw, max_modes=4, with_moment=True):
    n = draw(st.integers(1, max_modes))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    ratio = draw(st.floats(0.0, 0.5))
    g = rng.uniform(150.0, 2500.0, n)
    f = g * rng.uniform(1.0 - ratio, 1.0 + ratio, n)
    shifts = draw(st.floats(0.0, 2.0)) * rng.normal(size=n)
    mixing = rotation(n, rng, draw(st.floats(0.01, 1.5))) if draw(st.booleans()) else None
    moment = None
    if with_moment and draw(st.booleans()):
        moment = Moment(rng.normal(size=3), draw(st.floats(0.0, 1.0)) * rng.normal(size=(n, 3)))
    return Transition(
        tuple(Mode(float(a), float(b), float(c)) for a, b, c in zip(g, f, shifts, strict=True)),
        temperature_k=draw(st.sampled_from([0.0, 50.0, 300.0, 700.0])),
        mixing=mixing,
        moment=moment,
    )


@settings(max_examples=60, deadline=None)
@given(transitions(with_moment=False), st.floats(0.0, 0.3))
def test_chi_is_within_its_bound_of_thirty_digits(transition, time):
    step = exact_step(max(time, 1e-6))
    found = correlation_function(coupled_modes(transition), step, 1, 2, NEVER)
    assert abs(found.value[0] - exact_chi(transition, step, 30)) <= found.bound[0]


@settings(max_examples=60, deadline=None)
@given(transitions())
def test_chi_is_the_transform_of_a_probability(transition):
    """chi(0) = 1, |chi| <= 1, and the Hermitian matrix chi(t_i - t_j) has no negative eigenvalue."""
    step = exact_step(3.1e-4)
    found = correlation_function(coupled_modes(transition), step, 0, 24, NEVER)
    assert abs(found.value[0] - 1.0) <= found.bound[0]
    assert (np.abs(found.value) <= 1.0 + found.bound).all()
    index = np.arange(24)
    lag = index[:, None] - index
    matrix = np.where(lag >= 0, found.value[np.abs(lag)], found.value[np.abs(lag)].conj())
    assert np.linalg.eigvalsh(matrix).min() >= -24.0 * found.bound.max() - 1e-13


@settings(max_examples=40, deadline=None)
@given(transitions(), st.randoms())
def test_order_of_the_modes_does_not_matter(transition, random):
    n = len(transition.modes)
    order = list(range(n))
    random.shuffle(order)
    moved = replace(
        transition,
        modes=tuple(transition.modes[k] for k in order),
        mixing=None if transition.mixing is None else transition.mixing[np.ix_(order, order)],
        moment=None
        if transition.moment is None
        else replace(transition.moment, slopes_debye=transition.moment.slopes_debye[order]),
    )
    step = exact_step(2.7e-4)
    one = correlation_function(coupled_modes(transition), step, 0, 12, NEVER)
    two = correlation_function(coupled_modes(moved), step, 0, 12, NEVER)
    assert (np.abs(one.value - two.value) <= one.bound + two.bound).all()


@settings(max_examples=40, deadline=None)
@given(transitions(), st.integers(0, 3))
def test_sign_of_a_final_coordinate_does_not_matter(transition, index):
    """Q'_k -> -Q'_k turns row k of J and K_k; nothing measurable changes."""
    k = index % len(transition.modes)
    modes = list(transition.modes)
    modes[k] = replace(modes[k], displacement=-modes[k].displacement)
    mixing = transition.mixing_matrix.copy()
    mixing[k] *= -1.0
    turned = replace(transition, modes=tuple(modes), mixing=mixing)
    step = exact_step(2.7e-4)
    one = correlation_function(coupled_modes(transition), step, 0, 12, NEVER)
    two = correlation_function(coupled_modes(turned), step, 0, 12, NEVER)
    assert (np.abs(one.value - two.value) <= one.bound + two.bound).all()


@settings(max_examples=40, deadline=None)
@given(transitions(max_modes=3), st.sampled_from(["gaussian", "lorentzian", "voigt"]))
def test_band_is_positive_and_its_area_is_one(transition, kind):
    moments = line_moments(transition)
    lines = energy_range(coupled_modes(transition), 1e-6, max(moments.standard_deviation, 1.0))
    width = 0.05 * (lines.high - lines.low) + 20.0
    margin = 4.0 * width if kind == "gaussian" else 40.0 * width
    axis = Axis("cm-1", np.linspace(lines.low - margin, lines.high + margin, 3001))
    question = BandsQuestion(
        (Species(transition),), axis, LineShape(kind, width, width if kind == "voigt" else 0.0),
        "unit_area",
    )  # fmt: skip
    band = bands(question, Limits(work_s=60.0), NEVER).bands[0]
    assert band.intensity.min() >= -band.accuracy.bound
    area = float(np.trapezoid(band.intensity, axis.values))
    # a Lorentzian of half width w/2 leaves w/(2 pi margin) outside on either side
    missing = 1e-5 if kind == "gaussian" else width / (np.pi * margin) + 1e-5
    assert 1.0 - missing - 1e-4 <= area <= 1.0 + 1e-4


@settings(max_examples=30, deadline=None)
@given(transitions(max_modes=3), st.floats(3.0, 400.0), st.floats(1.0, 300.0))
def test_coarse_and_fine_plans_agree_to_their_bounds(transition, gaussian, lorentzian):
    axis = Axis("cm-1", np.linspace(-3000.0, 9000.0, 257))
    found = [
        bands(
            BandsQuestion(
                (Species(transition),), axis, LineShape("voigt", gaussian, lorentzian),
                "unit_area", tolerance=tolerance,
            ),
            Limits(work_s=60.0),
            NEVER,
        ).bands[0]
        for tolerance in (1e-2, 1e-8)
    ]  # fmt: skip
    limit = found[0].accuracy.bound + found[1].accuracy.bound
    assert np.abs(found[0].intensity - found[1].intensity).max() <= limit


@settings(max_examples=200, deadline=None)
@given(st.floats(1e-9, 0.0833), st.floats(-0.42, 0.42))
def test_kink_correction_holds_everywhere(g, v):
    """In fifty digits, so that the test rounds nothing."""
    import mpmath

    q, error, _ = kink_correction(g)
    ctx = mpmath.MPContext()
    ctx.dps = 50
    gg, vv = ctx.mpf(g), ctx.mpf(v)
    whole = ctx.sinh(2 * ctx.pi * gg) / (
        2 * (ctx.sinh(ctx.pi * gg) ** 2 + ctx.sin(ctx.pi * vv) ** 2)
    )
    own = gg / ctx.pi / (vv**2 + gg**2)
    fit = sum(ctx.mpf(c) * ctx.cos(2 * ctx.pi * k * vv) for k, c in enumerate(q))
    assert abs(whole - own - fit) <= error
