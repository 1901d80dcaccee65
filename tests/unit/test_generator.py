"""The overlap generator: identities, limits, and a two-dimensional quadrature."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate

from ladderband.numerics.generator import overlap_generator, thermal_generator, transition_generator
from ladderband.numerics.transition import Mode, Transition

RNG = np.random.default_rng(20260101)


def random_transition(n: int, **extra: object) -> Transition:
    mixing = np.linalg.qr(RNG.normal(size=(n, n)))[0]
    modes = tuple(
        Mode(RNG.uniform(100, 3500), RNG.uniform(100, 3500), RNG.normal()) for _ in range(n)
    )
    return Transition(modes, mixing=mixing, **extra)  # type: ignore[arg-type]


@pytest.mark.parametrize("n", [1, 2, 5, 30, 100])
def test_the_change_of_basis_is_unitary(n: int) -> None:
    """W W = 1 and W w = -w, to rounding."""
    assert transition_generator(random_transition(n)).identity_residual < 1e-12 * n


def test_identical_oscillators_give_the_unit_matrix() -> None:
    generator = transition_generator(Transition((Mode(700.0, 700.0), Mode(1200.0, 1200.0))))
    assert np.allclose(generator.W, np.kron([[0, 1], [1, 0]], np.eye(2)), atol=1e-15)
    assert np.all(generator.w == 0)
    assert abs(generator.log_c) < 1e-15


def test_exchanging_the_states_exchanges_the_blocks() -> None:
    """Q = J^T Q' - J^T K: the reversed transition has y and z swapped."""
    n = 3
    t = random_transition(n)
    g, f, mixing = t.wavenumbers_initial, t.wavenumbers_final, t.mixing_matrix
    shift = t.displacements / np.sqrt(f)
    forward = overlap_generator(g, f, mixing, shift)
    back = overlap_generator(f, g, mixing.T, -mixing.T @ shift)
    swap = np.r_[n : 2 * n, 0:n]
    assert np.allclose(back.W[np.ix_(swap, swap)], forward.W, atol=1e-13)
    assert np.allclose(back.w[swap], forward.w, atol=1e-13)
    assert back.log_c == pytest.approx(forward.log_c, abs=1e-12)


def test_first_overlaps_of_two_mixed_modes_by_quadrature() -> None:
    """<00|00>, <10|00> and <00|01> against scipy.integrate.dblquad of the wavefunctions."""
    g, f = np.array([1.0, 1.7]), np.array([1.3, 0.9])
    angle = 0.6
    mixing = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
    shift = np.array([0.4, -0.7])
    generator = overlap_generator(g, f, mixing, shift)

    def ground(freq: np.ndarray, q: np.ndarray) -> float:
        return float(np.prod((freq / np.pi) ** 0.25 * np.exp(-0.5 * freq * q**2)))

    def integral(initial: int | None, final: int | None) -> float:
        def integrand(y: float, x: float) -> float:
            q = np.array([x, y])
            qf = mixing @ q + shift
            value = ground(g, q) * ground(f, qf)
            if initial is not None:
                value *= np.sqrt(2 * g[initial]) * q[initial]
            if final is not None:
                value *= np.sqrt(2 * f[final]) * qf[final]
            return value

        return integrate.dblquad(integrand, -9, 9, -9, 9, epsabs=1e-11, epsrel=1e-11)[0]

    c = np.exp(generator.log_c)
    assert integral(None, None) == pytest.approx(c, abs=1e-9)
    assert integral(0, None) == pytest.approx(c * generator.w[0], abs=1e-9)
    assert integral(None, 1) == pytest.approx(c * generator.w[3], abs=1e-9)


def test_thermal_weights_of_one_mode() -> None:
    """|c|^2 is the population of v = 0 times |<0|0>|^2, and d multiplies each initial quantum."""
    cold = transition_generator(Transition((Mode(500.0, 450.0, 0.8),)))
    warm = thermal_generator(Transition((Mode(500.0, 450.0, 0.8),), temperature_k=300.0))
    x = 500.0 / (0.6950348004861274 * 300.0)
    assert np.exp(2 * (warm.log_c - cold.log_c)) == pytest.approx(1 - np.exp(-x), rel=1e-13)
    assert warm.w[0] == pytest.approx(cold.w[0] * np.exp(-x / 2), rel=1e-13)
    assert warm.W[0, 0] == pytest.approx(cold.W[0, 0] * np.exp(-x), rel=1e-13)
    assert warm.w[1] == cold.w[1]


def test_zero_kelvin_is_the_cold_generator_without_initial_quanta() -> None:
    warm = thermal_generator(random_transition(3, temperature_k=0.0))
    assert np.all(warm.W[:3] == 0)
    assert np.all(warm.w[:3] == 0)
