"""Polyatomic amplitudes and lists against things outside the project, each with its source."""

from __future__ import annotations

import math
import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
import qutip
from scipy.linalg import expm

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.generator import transition_generator
from ladderband.numerics.line_list import LineList
from ladderband.numerics.line_selection import EnumeratedLines, Selection, transition_lines
from ladderband.numerics.transition import Mode, Moment, Transition
from ladderband.numerics.units import boltzmann_exponent
from line_oracles import quadrature_amplitude, random_transition

EVERYTHING = Selection(max_lines=10**7)


def enumerate_lines(
    transition: Transition, tolerance: float, selection: Selection = EVERYTHING
) -> EnumeratedLines:
    return transition_lines(transition, tolerance, selection, 10**7, Deadline.none())


def intensities(lines: LineList) -> dict[tuple[tuple[int, ...], tuple[int, ...]], float]:
    return {
        (tuple(v), tuple(n)): float(i)
        for v, n, i in zip(
            lines.v_initial.tolist(), lines.v_final.tolist(), lines.intensity, strict=True
        )
    }


@pytest.mark.parametrize(("modes", "total"), [(2, 1.5), (3, 1.0)])
def test_amplitudes_by_direct_quadrature(modes: int, total: float) -> None:
    """Product Gauss-Hermite rule from scipy.special.roots_hermite: 1e-12 on the intensities."""
    transition = random_transition(modes, 3, total_huang_rhys=total, low=600, high=1300)
    found = intensities(enumerate_lines(transition, 1e-6).selected)
    cold = (0,) * modes
    strongest = sorted(found, key=lambda key: -found[key])[:12]
    for _, n in strongest:
        assert abs(found[cold, n] - quadrature_amplitude(transition, cold, n) ** 2) < 1e-12


def test_hot_amplitudes_by_direct_quadrature() -> None:
    """Boltzmann weight times the squared quadrature, initial quanta included."""
    transition = replace(
        random_transition(2, 8, total_huang_rhys=1.0, low=300, high=700), temperature_k=350.0
    )
    found = intensities(enumerate_lines(transition, 1e-4).selected)
    x = [boltzmann_exponent(g, 350.0) for g in transition.wavenumbers_initial]
    hot = [key for key in sorted(found, key=lambda key: -found[key]) if sum(key[0]) > 0][:10]
    for v, n in hot:
        weight = math.prod((1 - math.exp(-a)) * math.exp(-a * k) for a, k in zip(x, v, strict=True))
        exact = weight * quadrature_amplitude(transition, v, n) ** 2
        assert abs(found[v, n] - exact) < 1e-12


@pytest.mark.parametrize("temperature", [0.0, 400.0])
def test_two_mixed_modes_against_qutip_operators(temperature: float) -> None:
    """QuTiP: final state = D(alpha) S(r) R(theta)-like operators acting on the initial basis.

    <v|n> = <v| U |n>, where U carries q -> J^-1 (q - shift) with scaling. Built from QuTiP's
    displace, squeeze and a beam-splitter exponential with J the rotation between equal-frequency
    initial modes; temperature from qutip.thermal_dm. Truncated at 26 levels a mode, elements up to 4.
    """
    levels, theta = 26, 0.35
    g = 800.0
    ratio = np.array([1.21, 0.81])
    delta = np.array([0.7, -0.5])
    mixing = np.array([[np.cos(theta), np.sin(theta)], [-np.sin(theta), np.cos(theta)]])
    modes = tuple(Mode(g, g * t, d) for t, d in zip(ratio, delta, strict=True))
    transition = Transition(modes, mixing=mixing, temperature_k=temperature)
    one = qutip.qeye(levels)
    lower = qutip.destroy(levels)
    a, b = qutip.tensor(lower, one), qutip.tensor(one, lower)
    rotation = (theta * (a.dag() * b - a * b.dag())).full()
    local = qutip.tensor(
        *[
            qutip.displace(levels, -d / math.sqrt(2 * t)) * qutip.squeeze(levels, 0.5 * math.log(t))
            for t, d in zip(ratio, delta, strict=True)
        ]
    ).full()
    # rotated initial coordinates J q carry the separable final functions; R rotates them back
    for sign in (1.0, -1.0):
        operator = (expm(sign * rotation) @ local).reshape((levels,) * 4)
        c = np.exp(transition_generator(transition).log_c)
        w = transition_generator(transition).w
        if abs(operator[1, 0, 0, 0] - c * w[0]) < 1e-8:
            break
    else:
        raise AssertionError("neither sense of rotation fits the first overlap")
    found = intensities(enumerate_lines(transition, 1e-3).selected)
    population = np.ones((levels, levels)) * 0.0
    population[0, 0] = 1.0
    if temperature:
        mean = 1.0 / math.expm1(boltzmann_exponent(g, temperature))
        single = np.diag(qutip.thermal_dm(300, mean).full()).real[:levels]
        population = np.outer(single, single)
    checked = 0
    for (v, n), intensity in found.items():
        if max(v + n) <= 4:
            exact = population[v] * operator[v + n].real ** 2
            assert abs(intensity - exact) < 1e-8
            checked += 1
    assert checked > 10


def so2_cases() -> list[dict[str, object]]:
    path = Path(__file__).parent / "data" / "so2_shen_2018.toml"
    return tomllib.loads(path.read_text())["case"]


@pytest.mark.parametrize("case", so2_cases(), ids=lambda case: case["where"])
def test_published_two_mode_set_closes(case: dict) -> None:
    """Shen et al., Chem. Sci. 9, 836 (2018), SI Table I: inputs only, so the sums are checked.

    Captured + missing = 1, mean energy = closed form, fewer than ten quanta a mode (as the source
    says) hold nearly all intensity.
    """
    t = case["angle"]
    mixing = np.array([[math.cos(t), math.sin(t)], [-math.sin(t), math.cos(t)]])
    assert np.abs(mixing - np.array(case["matrix_as_printed"])).max() < 6e-4
    modes = tuple(
        Mode(g, f, math.sqrt(2) * alpha)
        for g, f, alpha in zip(
            case["wavenumbers_initial"], case["wavenumbers_final"], case["alpha"], strict=True
        )
    )
    transition = Transition(modes, mixing=mixing)
    found = enumerate_lines(transition, 1e-9)
    assert found.enumerated.missing_at_most <= 1e-9
    assert found.enumerated.captured + found.enumerated.missing_at_most >= 1.0
    mean, _ = closed_moments(transition)
    assert listed_moments(found.selected)[0] == pytest.approx(mean, abs=1e-3)
    below_ten = found.selected.v_final.max(axis=1) < 10
    assert found.selected.intensity[below_ten].sum() > 0.999


def closed_moments(transition: Transition) -> tuple[float, float]:
    """First and second moment of E_n - E_v, M. Lax, J. Chem. Phys. 20, 1752 (1952), worked out by hand.

    H_f - H_i is quadratic in the initial coordinates: with A = J^T F^2 J - G^2 and b = J^T F^2 K,
    E_n - E_v + zero points = 1/2 Q A Q + b Q + 1/2 K F^2 K as an operator; the thermal state is
    Gaussian with <Q_k^2> = coth/(2 g_k), <P_k^2> = g_k coth/2, and [H_i, H_f] enters only from the
    third moment on.
    """
    g, f = transition.wavenumbers_initial, transition.wavenumbers_final
    J = transition.mixing_matrix
    K = transition.displacements / np.sqrt(f)
    x = np.array([boltzmann_exponent(a, transition.temperature_k) for a in g])
    variance = np.diag(0.5 / np.tanh(0.5 * x) / g)
    A = J.T @ np.diag(f**2) @ J - np.diag(g**2)
    b = J.T @ (f**2 * K)
    constant = 0.5 * K @ (f**2 * K) + 0.5 * g.sum() - 0.5 * f.sum()
    mean = 0.5 * np.trace(A @ variance) + constant
    second = 0.5 * np.trace(A @ variance @ A @ variance) + b @ variance @ b + mean**2
    return float(mean), float(second)


def listed_moments(lines: LineList) -> tuple[float, float]:
    shift = lines.position_cm1
    return float(lines.intensity @ shift), float(lines.intensity @ shift**2)


@pytest.mark.parametrize("temperature", [0.0, 150.0])
@pytest.mark.parametrize("modes", [2, 3])
def test_moments_equal_the_closed_forms(modes: int, temperature: float) -> None:
    """What is missing has an energy within a few 10^4 cm^-1: the moments differ by that times it."""
    transition = replace(
        random_transition(modes, 4, total_huang_rhys=1.0, low=500, high=1100),
        temperature_k=temperature,
    )
    found = enumerate_lines(transition, 1e-7)
    mean, second = closed_moments(transition)
    first_listed, second_listed = listed_moments(found.selected)
    missing = found.selected.completeness.missing_at_most
    assert missing <= 1e-7
    assert abs(first_listed - mean) <= missing * 4e4
    assert abs(second_listed - second) <= missing * 1.6e9


def test_shell_sums_do_not_depend_on_the_rotation_of_degenerate_modes() -> None:
    """Two equal final modes and two equal initial modes: any J gives the same sums over shells."""

    def shells(angle: float) -> np.ndarray:
        mixing = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
        modes = (Mode(700.0, 900.0, 1.1), Mode(700.0, 900.0, -0.4))
        found = enumerate_lines(Transition(modes, mixing=mixing), 1e-9).selected
        return np.bincount(found.v_final.sum(axis=1), found.intensity)[:8]

    reference = shells(0.0)
    for angle in (0.3, 1.0, 2.5):
        assert np.abs(shells(angle) - reference).max() < 1e-9


def test_herzberg_teller_total_and_intensities_by_quadrature() -> None:
    """The moment as a function of the coordinate inside the same product rule."""
    transition = random_transition(2, 6, total_huang_rhys=0.5, low=600, high=1300)
    moment = Moment(np.array([0.2, 0.0, 0.05]), np.array([[0.1, 0.3, 0.0], [0.0, -0.2, 0.1]]))
    varying = replace(transition, moment=moment)
    found = enumerate_lines(varying, 1e-8)
    assert found.enumerated.missing_at_most <= 1e-8
    lines = intensities(found.selected)
    total = float(np.sum(moment.constant_debye**2) + 0.5 * np.sum(moment.slopes_debye**2))
    for n in [(0, 0), (1, 0), (0, 1), (2, 1)]:
        components = moment.constant_debye * quadrature_amplitude(transition, (0, 0), n)
        for k in range(2):  # q_k |00> = |1_k> / sqrt2
            v = tuple(int(k == j) for j in range(2))
            amplitude = quadrature_amplitude(transition, v, n)
            components = components + moment.slopes_debye[k] * amplitude / math.sqrt(2)
        assert abs(lines[(0, 0), n] - float(np.sum(components**2)) / total) < 1e-12


CASES = {
    "3-modes-600K": (
        replace(random_transition(3, 0, total_huang_rhys=2.0), temperature_k=600.0),
        1e-3,
    ),
    "12-modes-random-J": (
        random_transition(12, 0, total_huang_rhys=4.0, low=700, high=1300),
        1e-3,
    ),
    "60-modes-full-J": (
        random_transition(60, 0, total_huang_rhys=1.5, low=300, high=1600, angle=0.1),
        0.02,
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_the_stated_cases_reach_their_tolerance(name: str) -> None:
    transition, tolerance = CASES[name]
    found = enumerate_lines(transition, tolerance)
    assert found.enumerated.missing_at_most <= tolerance


@pytest.mark.parametrize("name", ["3-modes-600K", "12-modes-random-J"])
def test_missing_claims_against_a_larger_enumeration(name: str) -> None:
    transition, tolerance = CASES[name]
    small = enumerate_lines(transition, 30 * tolerance)
    large = enumerate_lines(transition, tolerance)
    gained = large.enumerated.captured - small.enumerated.captured
    assert 0 < gained <= small.enumerated.missing_at_most
    left = gained + large.enumerated.missing_at_most
    assert small.enumerated.missing_at_most <= left + 1e-9
