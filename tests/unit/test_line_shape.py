"""Line shapes: decays are the transforms of the profiles, bounds are bounds."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import special
from scipy.integrate import quad

from ladderband.numerics.errors import DomainError
from ladderband.numerics.line_shape import (
    FIT_ORDER,
    FIT_REACH,
    Bath,
    InstrumentFunction,
    broadening,
    kink_correction,
)


def shape(gaussian=0.0, lorentzian=0.0, bath=None, instrument=None, temperature=300.0, sign=1.0):
    return broadening(gaussian, lorentzian, bath, instrument, temperature, sign)


ALL = {
    "gaussian": shape(40.0),
    "lorentzian": shape(0.0, 30.0),
    "voigt": shape(40.0, 10.0),
    "brownian-fast": shape(bath=Bath("brownian", 30.0, 150.0)),
    "brownian-slow": shape(bath=Bath("brownian", 400.0, 10.0)),
    "brownian-voigt": shape(20.0, 5.0, bath=Bath("brownian", 100.0, 40.0)),
}


@pytest.mark.parametrize("name", ALL)
def test_time_truncation_is_bounded(name):
    found = ALL[name]
    for allowed in (1e-4, 1e-9):
        end = found.end(allowed)
        assert found.beyond(end) <= allowed
        steps = np.linspace(end, 3.0 * end, 20001)
        tail = np.trapezoid(found.size(steps), steps) / np.pi
        assert tail <= allowed * (1.0 + 1e-6)  # the trapezoid is a little above a convex function
        assert found.beyond(0.5 * end) > allowed  # not far more than needed


@pytest.mark.parametrize("name", ALL)
def test_size_bounds_the_decay(name):
    found = ALL[name]
    times = np.linspace(0.0, found.end(1e-6), 400)
    decay = found.smooth_decay(times) * np.exp(-found.gamma * times)
    assert (np.abs(decay) <= found.size(times) * (1.0 + 1e-12)).all()


@pytest.mark.parametrize("name", ALL)
def test_peak_bounds_the_profile(name):
    found = ALL[name]
    times = np.linspace(0.0, found.end(1e-7), 40001)
    decay = found.smooth_decay(times) * np.exp(-found.gamma * times)
    energies = found.shift + np.linspace(-50.0, 50.0, 21)
    profile = [np.trapezoid((decay * np.exp(1j * e * times)).real, times) / np.pi for e in energies]
    assert max(profile) <= found.peak * (1.0 + 1e-4)
    assert max(profile) > 0.3 * found.peak


@pytest.mark.parametrize("name", ["brownian-fast", "brownian-slow"])
def test_brownian_wing_is_below_its_cubic_bound(name):
    found = ALL[name]
    a, rate = found.slow, found.rate

    def integrand(t, part):
        value = np.exp(-a * (np.exp(-rate * t) + rate * t - 1.0))
        return value.real if part == "re" else value.imag

    end = found.end(1e-12)
    for distance in (2000.0, -2000.0, 6000.0, -6000.0):
        # Re int F e^(iut) = int Re F cos - Im F sin, each by the weighted rule of QUADPACK
        cosine = quad(integrand, 0.0, end, ("re",), weight="cos", wvar=distance, limit=400)[0]
        sine = quad(integrand, 0.0, end, ("im",), weight="sin", wvar=distance, limit=400)[0]
        profile = abs(cosine - sine) / np.pi
        assert profile <= found.cubic_tail / abs(distance) ** 3 + 1e-11
    assert ALL["gaussian"].cubic_tail == 0.0


def test_mass_bounds_the_brownian_profile():
    for name in ("brownian-fast", "brownian-slow", "brownian-voigt"):
        assert 1.0 <= ALL[name].mass < 20.0
    assert ALL["voigt"].mass == 1.0


@pytest.mark.parametrize("left", [0.01, 1e-6, 1e-12])
def test_reach_holds_all_but_the_share(left):
    found = shape(40.0)
    assert special.erfc(found.light_reach(left) / found.sigma / np.sqrt(2.0)) <= left


@pytest.mark.parametrize("g", [1e-7, 1e-4, 1e-2, 0.05, 0.083])
def test_kink_correction_leaves_the_plain_lorentzian(g):
    q, error, largest = kink_correction(g)
    v = np.linspace(-FIT_REACH, FIT_REACH, 20001)  # not the points of the fit
    own = g / np.pi / (v * v + g * g)
    whole = np.sinh(2.0 * np.pi * g) / (2.0 * (np.sinh(np.pi * g) ** 2 + np.sin(np.pi * v) ** 2))
    fit = np.cos(2.0 * np.pi * np.outer(v, np.arange(FIT_ORDER + 1))) @ np.array(q)
    # the proof is about exact functions; here the difference itself is rounded
    assert (np.abs(whole - fit - own) <= error + 1e-15 * whole).all()
    assert error < 1e-9 / (np.pi * g)
    everywhere = np.linspace(-0.5, 0.5, 2001)
    images = np.cos(2.0 * np.pi * np.outer(everywhere, np.arange(FIT_ORDER + 1))) @ np.array(q)
    assert np.abs(images).max() + 1.0 / np.tanh(np.pi * g) <= largest * (1.0 + 1e-12)


def test_instrument_transform_is_its_integral():
    table = InstrumentFunction(np.array([-7.0, -2.0, 0.0, 5.0]), np.array([0.0, 3.0, 1.0, 0.5]))
    times = np.array([0.0, 1e-6, 1e-3, 0.3, 2.0, 40.0])
    found = table.transform(times)
    offsets = np.linspace(-7.0, 5.0, 240001)
    weights = np.interp(offsets, table.offset_cm1, table.weight)
    weights /= np.trapezoid(weights, offsets)
    expected = [np.trapezoid(weights * np.exp(-1j * offsets * t), offsets) for t in times]
    assert found == pytest.approx(np.array(expected), abs=1e-6)
    assert found[0] == pytest.approx(1.0, abs=1e-14)
    assert table.reach == 7.0


def test_static_bath_has_the_classical_width():
    found = shape(bath=Bath("static", 300.0), temperature=200.0)
    assert found.sigma == pytest.approx(np.sqrt(2.0 * 300.0 * 0.695034800 * 200.0), rel=1e-8)
    assert found.shift == 300.0


def test_no_width_is_refused():
    with pytest.raises(DomainError, match="line width above zero") as caught:
        shape()
    assert caught.value.pointer == "/line_shape/fwhm_cm1"
    with pytest.raises(DomainError, match="line width above zero"):
        shape(bath=Bath("static", 300.0), temperature=0.0)
    with pytest.raises(DomainError, match="Brownian bath needs a temperature"):
        shape(bath=Bath("brownian", 300.0, 10.0), temperature=0.0)
