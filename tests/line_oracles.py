"""Slow, plain references for polyatomic amplitudes, for tests only."""

from __future__ import annotations

from typing import Any

import mpmath
import numpy as np
from scipy import special
from scipy.linalg import expm

from ladderband.numerics.hermite import hermite_functions
from ladderband.numerics.transition import Mode, Transition

Key = tuple[int, ...]


def random_transition(
    n: int,
    seed: int,
    *,
    total_huang_rhys: float,
    low: float = 300.0,
    high: float = 1600.0,
    angle: float | None = None,
    **rest: Any,
) -> Transition:
    """Invented modes; a random orthogonal J, or the exponential of a random rotation of rms angle."""
    rng = np.random.default_rng(seed)
    if angle is None:
        mixing = np.linalg.qr(rng.normal(size=(n, n)))[0]
    else:
        generator = rng.normal(size=(n, n)) * angle / np.sqrt(2.0 * n)
        mixing = expm(generator - generator.T)
    g = np.sort(rng.uniform(low, high, n))
    f = g * rng.uniform(0.9, 1.05, n)
    s = rng.uniform(0.05, 1.0, n) ** 3
    delta = np.sqrt(2.0 * s * total_huang_rhys / s.sum()) * rng.choice([-1.0, 1.0], n)
    modes = tuple(Mode(a, b, d) for a, b, d in zip(g, f, delta, strict=True))
    return Transition(modes, mixing=mixing, **rest)


def dictionary_amplitudes(
    M: Any, w: Any, start: Any, keys: list[Key], root: Any = np.sqrt
) -> dict[Key, Any]:
    """The ladder recursion over a dictionary, raising the last index that is not zero."""
    found: dict[Key, Any] = {}
    for key in sorted(keys, key=sum):
        if sum(key) == 0:
            found[key] = start
            continue
        last = max(i for i, k in enumerate(key) if k)
        lower = list(key)
        lower[last] -= 1
        value = w[last] * found[tuple(lower)]
        for j, k in enumerate(lower):
            if k:
                lower[j] -= 1
                value += M[last][j] * root(k) * found[tuple(lower)]
                lower[j] += 1
        found[key] = value / root(key[last])
    return found


def multiprecision_amplitudes(transition: Transition, keys: list[Key]) -> dict[Key, mpmath.mpf]:
    """Cold amplitudes in 40 digits: the generator too is formed in mpmath, from the formulas as printed."""
    mp = mpmath.MPContext()
    mp.dps = 40
    n = len(transition.modes)
    g = mp.diag([mp.mpf(float(x)) for x in transition.wavenumbers_initial])
    f = mp.diag([mp.mpf(float(x)) for x in transition.wavenumbers_final])
    J = mp.matrix(transition.mixing_matrix.tolist())
    K = mp.matrix(
        [mp.mpf(float(d)) / mp.sqrt(f[i, i]) for i, d in enumerate(transition.displacements)]
    )
    P = (g + J.T * f * J) ** -1
    root_f = mp.diag([mp.sqrt(f[i, i]) for i in range(n)])
    W = 2 * root_f * J * P * J.T * root_f - mp.eye(n)
    w = mp.sqrt(2) * root_f * (mp.eye(n) - J * P * J.T * f) * K
    log_c = sum(mp.log(g[i, i] * f[i, i]) for i in range(n)) / 4 + mp.mpf(n) / 2 * mp.log(2)
    log_c += mp.log(mp.det(P)) / 2 + mp.log(abs(mp.det(J))) / 2
    log_c += ((K.T * f * J * P * J.T * f * K)[0] - (K.T * f * K)[0]) / 2
    rows = [[W[i, j] for j in range(n)] for i in range(n)]
    return dictionary_amplitudes(rows, list(w), mp.exp(log_c), keys, mp.sqrt)


def quadrature_amplitude(transition: Transition, v: Key, n: Key, points: int = 60) -> float:
    """<v|n> of one to three modes by a product Gauss-Hermite rule (scipy.special.roots_hermite)."""
    g, f = transition.wavenumbers_initial, transition.wavenumbers_final
    x, weight = special.roots_hermite(points)
    axes = np.meshgrid(*[x] * len(g), indexing="ij")
    weights = np.prod(np.meshgrid(*[weight] * len(g), indexing="ij"), axis=0).ravel()
    # stretched so that the rule's Gaussian is near the product of both states
    stretch = np.sqrt(
        2.0 / (g + np.diag(transition.mixing_matrix.T @ np.diag(f) @ transition.mixing_matrix))
    )
    q = np.stack([s * axis.ravel() for s, axis in zip(stretch, axes, strict=True)])
    shift = transition.displacements / np.sqrt(f)
    final = transition.mixing_matrix @ q + shift[:, None]
    value = weights * np.exp(np.sum((q / stretch[:, None]) ** 2, axis=0)) * np.prod(stretch)
    for k in range(len(g)):
        value *= g[k] ** 0.25 * hermite_functions(np.sqrt(g[k]) * q[k], v[k])[0][v[k]]
        value *= f[k] ** 0.25 * hermite_functions(np.sqrt(f[k]) * final[k], n[k])[0][n[k]]
    return float(value.sum())
