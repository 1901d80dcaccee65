"""Bands against results from outside the project: scipy, QuTiP, and the literature's closed forms."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import scipy.constants as sc
from scipy import special

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.axis import Axis
from ladderband.numerics.correlation import correlation_function, coupled_modes, exact_step
from ladderband.numerics.line_shape import Bath
from ladderband.numerics.transition import Mode, Moment, Transition
from ladderband.numerics.units import BOLTZMANN_CM1_K
from ladderband.usecases.bands import bands
from ladderband.usecases.bands_question import BandsQuestion, LineShape, Species
from ladderband.usecases.limits import Limits

NEVER = Deadline.none()


def band(transition, axis, shape, scale="unit_area", **more):
    question = BandsQuestion((Species(transition),), axis, shape, scale, **more)
    return bands(question, Limits(work_s=60.0), NEVER).bands[0]


# --- Huang and Rhys 1950: one displaced mode at any temperature, modified Bessel functions ---


@pytest.mark.parametrize("temperature", [60.0, 300.0, 1200.0])
@pytest.mark.parametrize("huang_rhys", [0.3, 4.0, 15.0])
def test_one_displaced_mode_is_the_bessel_form(huang_rhys, temperature):
    """W_p = exp(-S coth x/2) exp(p x/2) I_p(S / sinh(x/2)), x = h nu / kT (scipy.special.ive)."""
    f = 320.0
    x = f / (BOLTZMANN_CM1_K * temperature)
    p = np.arange(-40, 121)
    argument = huang_rhys / np.sinh(0.5 * x)
    log = argument - huang_rhys / np.tanh(0.5 * x) + 0.5 * p * x
    weights = np.exp(log) * special.ive(p, argument)
    assert weights.sum() == pytest.approx(1.0, abs=1e-8)
    energies = np.linspace(-6000.0, 20000.0, 1301)
    mode = Mode(f, f, float(np.sqrt(2.0 * huang_rhys)))
    found = band(
        Transition((mode,), temperature_k=temperature),
        Axis("cm-1", energies),
        LineShape("voigt", 70.0, 20.0),
        tolerance=1e-10,
    )
    sigma = 70.0 / np.sqrt(8.0 * np.log(2.0))
    profile = special.voigt_profile(energies[:, None] - f * p, sigma, 10.0)
    expected = profile @ weights
    missing = abs(1.0 - weights.sum()) * special.voigt_profile(0.0, sigma, 10.0)
    error = np.abs(found.intensity - expected).max()
    assert error <= found.accuracy.bound + missing + 1e-12 * expected.max()


# --- one line: the profiles themselves ---


@pytest.mark.parametrize(
    "shape",
    [
        LineShape("gaussian", 33.0),
        LineShape("lorentzian", 33.0),
        LineShape("voigt", 33.0, 3.0),
        LineShape("voigt", 3.0, 33.0),
        LineShape("voigt", 20.0, 0.01),
    ],
    ids=["gaussian", "lorentzian", "even-voigt", "lorentz-like", "gauss-like"],
)
def test_one_line_is_scipys_voigt_profile(shape):
    line = Transition((Mode(500.0, 500.0, 0.0),), origin_cm1=15000.0)
    energies = np.linspace(14000.0, 16500.0, 999)
    found = band(line, Axis("cm-1", energies), shape, tolerance=1e-9)
    gaussian = 0.0 if shape.kind == "lorentzian" else shape.fwhm_cm1
    lorentzian = {"gaussian": 0.0, "lorentzian": shape.fwhm_cm1}.get(
        shape.kind, shape.fwhm_lorentzian_cm1
    )
    expected = special.voigt_profile(
        energies - 15000.0, gaussian / np.sqrt(8.0 * np.log(2.0)), 0.5 * lorentzian
    )
    error = np.abs(found.intensity - expected).max()
    assert error <= found.accuracy.bound + 1e-13 * expected.max()
    assert found.accuracy.bound < 1e-8 * expected.max()


def test_width_is_the_full_width_at_half_maximum():
    line = Transition((Mode(500.0, 500.0, 0.0),))
    for kind in ("gaussian", "lorentzian"):
        found = band(line, Axis("cm-1", np.array([-20.0, 0.0, 20.0])), LineShape(kind, 40.0))
        assert found.intensity[0] / found.intensity[1] == pytest.approx(0.5, abs=1e-5)
        assert found.intensity[2] / found.intensity[1] == pytest.approx(0.5, abs=1e-5)


# --- QuTiP: operators in a large truncated space, mixing and a linear moment included ---


@pytest.mark.parametrize("temperature", [0.0, 250.0])
def test_correlation_function_is_that_of_qutips_operators(temperature):
    """Tr[rho mu e^(iH_i t) mu e^(-iH_f t)] / Tr[rho mu mu] with 34 x 34 initial levels.

    The truncated space only has to hold the populated levels and what H_f couples them to; 26 and
    34 levels agree to 1e-9 here.
    """
    qutip = pytest.importorskip("qutip")
    g, f = np.array([1000.0, 700.0]), np.array([930.0, 780.0])
    angle = 0.35
    mixing = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    shifts = np.array([0.6, -0.5])
    slopes = np.array([[0.2, 0.0, -0.1], [0.0, 0.3, 0.05]])
    constant = np.array([0.5, -0.2, 0.1])
    transition = Transition(
        (Mode(g[0], f[0], shifts[0]), Mode(g[1], f[1], shifts[1])),
        temperature_k=temperature,
        mixing=mixing,
        moment=Moment(constant, slopes),
    )
    levels = 34
    one, lower = qutip.qeye(levels), qutip.destroy(levels)
    a = [qutip.tensor(lower, one), qutip.tensor(one, lower)]
    q = [((x + x.dag()) / np.sqrt(2.0)).full().real for x in a]  # dimensionless initial coordinates
    number = np.real([np.diag((x.dag() * x).full()) for x in a])
    energy = g @ number
    Q = [q[k] / np.sqrt(g[k]) for k in range(2)]
    shift = shifts / np.sqrt(f)
    kinetic = np.zeros((levels**2, levels**2))
    for k in range(2):
        p = (1j * (a[k].dag() - a[k]) / np.sqrt(2.0)).full() * np.sqrt(g[k])
        kinetic += 0.5 * (p @ p).real
    potential = np.zeros_like(kinetic)
    for i in range(2):
        final = mixing[i, 0] * Q[0] + mixing[i, 1] * Q[1] + shift[i] * np.eye(levels**2)
        potential += 0.5 * f[i] ** 2 * final @ final
    final_energy, states = np.linalg.eigh(kinetic + potential)
    final_energy = final_energy - 0.5 * f.sum()
    weight = np.zeros(levels**2)
    weight[0] = 1.0
    if temperature:
        weight = np.exp(-energy / (BOLTZMANN_CM1_K * temperature))
        weight /= weight.sum()
    mu = [
        constant[c] * np.eye(levels**2) + slopes[0, c] * q[0] + slopes[1, c] * q[1]
        for c in range(3)
    ]
    amplitude2 = sum((states.T @ m) ** 2 for m in mu)  # (final, initial)
    total = float(amplitude2.sum(axis=0) @ weight)
    step = exact_step(1.7e-4)
    found = correlation_function(coupled_modes(transition), step, 0, 80, NEVER)
    for index in (0, 1, 5, 20, 79):
        t = step * index
        expected = np.exp(-1j * final_energy * t) @ amplitude2 @ (weight * np.exp(1j * energy * t))
        assert found.value[index] == pytest.approx(expected / total, abs=2e-8)


# --- Marcus: many quanta of slow modes at high temperature ---


def test_slow_modes_at_high_temperature_tend_to_the_marcus_gaussian():
    """Mean lambda, variance 2 lambda kT (Marcus, J. Chem. Phys. 24, 966 (1956))."""
    temperature, reorganisation = 600.0, 900.0
    variance = 2.0 * reorganisation * BOLTZMANN_CM1_K * temperature
    energies = np.linspace(reorganisation - 2500.0, reorganisation + 2500.0, 301)
    worst = []
    for f in (160.0, 40.0, 10.0):
        n = 12
        mode = Mode(f, f, float(np.sqrt(2.0 * reorganisation / n / f)))
        found = band(
            Transition((mode,) * n, temperature_k=temperature),
            Axis("cm-1", energies),
            LineShape("gaussian", 60.0),
        )
        sigma2 = variance + (60.0 / np.sqrt(8.0 * np.log(2.0))) ** 2
        expected = np.exp(-((energies - reorganisation) ** 2) / (2.0 * sigma2))
        expected /= np.sqrt(2.0 * np.pi * sigma2)
        worst.append(np.abs(found.intensity - expected).max() / expected.max())
    assert worst[0] > worst[1] > worst[2]
    assert worst[2] < 0.01


def test_static_bath_is_the_same_gaussian_and_splits_absorption_from_emission():
    line = Transition((Mode(500.0, 500.0, 0.0),), origin_cm1=20000.0, temperature_k=300.0)
    shape = LineShape("gaussian", 0.0, bath=Bath("static", 450.0))
    energies = np.linspace(18000.0, 22500.0, 400)
    question = BandsQuestion(
        (Species(line),), Axis("cm-1", energies), shape, "unit_area", both_directions=True
    )
    answer = bands(question, Limits(), NEVER)
    variance = 2.0 * 450.0 * BOLTZMANN_CM1_K * 300.0
    for found, centre in zip(answer.bands, (20450.0, 19550.0), strict=True):
        expected = np.exp(-((energies - centre) ** 2) / (2.0 * variance))
        expected /= np.sqrt(2.0 * np.pi * variance)
        assert found.intensity == pytest.approx(expected, abs=found.accuracy.bound)
    assert answer.stokes_shift_cm1 == pytest.approx((900.0,))


def test_brownian_bath_is_the_integral_of_its_decay():
    """scipy.integrate.quad of (1/pi) Re int exp(-i lambda t - g(t)) e^(iEt) dt, Mukamel's g(t)."""
    from scipy.integrate import quad

    line = Transition((Mode(500.0, 500.0, 0.0),), temperature_k=300.0)
    reorganisation, rate = 200.0, 60.0
    a = complex(2.0 * reorganisation * BOLTZMANN_CM1_K * 300.0 / rate**2, -reorganisation / rate)
    energies = np.array([-900.0, -200.0, 0.0, 190.0, 350.0, 1000.0])
    for gaussian in (0.0, 50.0):
        shape = LineShape("gaussian", gaussian, bath=Bath("brownian", reorganisation, rate))
        found = band(line, Axis("cm-1", energies), shape, tolerance=1e-7)
        sigma = gaussian / np.sqrt(8.0 * np.log(2.0))

        def integrand(t, energy, sigma=sigma):
            g = a * (np.exp(-rate * t) + rate * t - 1.0)
            decay = np.exp(-1j * reorganisation * t - g - 0.5 * (sigma * t) ** 2)
            return float((decay * np.exp(1j * energy * t)).real) / np.pi

        for energy, value in zip(energies, found.intensity, strict=True):
            expected, error = quad(integrand, 0.0, 0.2, args=(energy,), limit=2000, epsabs=1e-12)
            assert abs(value - expected) <= found.accuracy.bound + error + 1e-11


# --- absolute scales, by hand with scipy.constants (CODATA 2022) ---

DEBYE = 1e-21 / sc.c


def test_lifetime_is_einsteins():
    """One line: A = omega^3 mu^2 / (3 pi eps0 hbar c^3); its area as photons and as power."""
    nu, mu = 22000.0, 4.0
    line = Transition(
        (Mode(500.0, 500.0, 0.0),),
        process="emission",
        origin_cm1=nu,
        moment=Moment(np.array([0.0, mu, 0.0]), np.zeros((1, 3))),
    )
    omega = 2.0 * np.pi * sc.c * 100.0 * nu
    rate = omega**3 * (mu * DEBYE) ** 2 / (3.0 * np.pi * sc.epsilon_0 * sc.hbar * sc.c**3)
    axis = Axis("cm-1", np.linspace(nu - 60.0, nu + 60.0, 2001))
    photons = band(line, axis, LineShape("gaussian", 10.0), "photon_rate")
    assert photons.strength.einstein_a_s == pytest.approx(rate, rel=1e-9)
    assert photons.strength.radiative_lifetime_s == pytest.approx(1.0 / rate, rel=1e-9)
    # nu^3 is not constant across the line: 3 sigma^2 / nu^2 = 1e-7
    assert np.trapezoid(photons.intensity, axis.values) == pytest.approx(rate, rel=1e-6)
    power = band(line, axis, LineShape("gaussian", 10.0), "radiated_power")
    quantum = sc.h * sc.c * 100.0 * nu
    assert np.trapezoid(power.intensity, axis.values) == pytest.approx(rate * quantum, rel=1e-6)


def test_photons_per_nanometre_carry_the_jacobian():
    line = Transition(
        (Mode(500.0, 500.0, 0.3),),
        process="emission",
        origin_cm1=20000.0,
        moment=Moment(np.array([1.0, 0.0, 0.0]), np.zeros((1, 3))),
    )
    shape = LineShape("gaussian", 200.0)
    nm = Axis("nm", np.linspace(480.0, 620.0, 4001))
    cm = Axis("cm-1", np.linspace(1e7 / 620.0, 1e7 / 480.0, 4001))
    per_nm, per_cm = (band(line, axis, shape, "photon_rate") for axis in (nm, cm))
    assert np.trapezoid(per_nm.intensity, nm.values) == pytest.approx(
        np.trapezoid(per_cm.intensity, cm.values), rel=1e-6
    )
    at = np.interp(500.0, nm.values, per_nm.intensity)
    other = np.interp(20000.0, cm.values, per_cm.intensity)
    assert at == pytest.approx(other * 1e7 / 500.0**2, rel=1e-5)


def test_absorption_scales_by_hand():
    """sigma = pi omega mu^2 / (3 eps0 hbar c) per angular frequency; epsilon = N_A sigma/ln 10."""
    nu, mu = 18000.0, 5.0
    line = Transition(
        (Mode(500.0, 500.0, 0.0),),
        origin_cm1=nu,
        moment=Moment(np.array([0.0, 0.0, mu]), np.zeros((1, 3))),
    )
    axis = Axis("cm-1", np.linspace(nu - 100.0, nu + 100.0, 2001))
    shape = LineShape("gaussian", 20.0)
    sigma = band(line, axis, shape, "cross_section").intensity
    omega = 2.0 * np.pi * sc.c * 100.0 * nu
    per_omega = np.pi * omega * (mu * DEBYE) ** 2 / (3.0 * sc.epsilon_0 * sc.hbar * sc.c)
    area = per_omega / (2.0 * np.pi * sc.c * 100.0) * 1e4  # cm^2 cm^-1
    assert np.trapezoid(sigma, axis.values) == pytest.approx(area, rel=1e-8)
    molar = band(line, axis, shape, "molar_absorption_coefficient")
    assert molar.intensity == pytest.approx(sigma * sc.N_A / (1000.0 * np.log(10.0)), rel=1e-12)
    # integral of epsilon / nu = 108.86 mu^2 (from memory)
    assert np.trapezoid(molar.intensity / axis.values, axis.values) == pytest.approx(
        108.86 * mu**2, rel=1e-4
    )
    strength = 2.0 * sc.m_e * omega * (mu * DEBYE) ** 2 / (3.0 * sc.hbar * sc.e**2)
    assert molar.strength.oscillator_strength == pytest.approx(strength, rel=1e-8)


# --- mirror image ---


@pytest.mark.parametrize("temperature", [0.0, 298.15])
def test_emission_mirrors_absorption_for_equal_frequencies(temperature):
    modes = (Mode(1300.0, 1300.0, 0.9), Mode(450.0, 450.0, -1.2), Mode(210.0, 210.0, 0.7))
    transition = Transition(modes, origin_cm1=20000.0, temperature_k=temperature)
    offsets = np.linspace(-3000.0, 6000.0, 700)
    shape = LineShape("voigt", 90.0, 30.0)
    up = band(transition, Axis("cm-1", 20000.0 + offsets), shape)
    down = band(
        replace(transition, process="emission"), Axis("cm-1", 20000.0 - offsets[::-1]), shape
    )
    assert down.intensity[::-1] == pytest.approx(
        up.intensity, abs=up.accuracy.bound + down.accuracy.bound
    )
