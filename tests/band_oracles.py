"""Independent ways to a band, for tests: slow, direct, and sharing no code with the service's route.

The service adds all lines in the time domain. Here every line is enumerated (ladder recursion over
all quanta of a block, amplitudes with a linear moment after the generating function), or chi(t) is
evaluated from the 2N-dimensional pairing integral in many digits.
"""

from __future__ import annotations

import itertools
import math

import mpmath
import numpy as np
from numba import njit
from scipy.signal import fftconvolve
from scipy.special import voigt_profile

from ladderband.numerics.generator import overlap_generator, transition_generator
from ladderband.numerics.transition import Transition
from ladderband.numerics.units import BOLTZMANN_CM1_K, boltzmann_exponent


@njit(cache=False)
def _ladder(W, w, start, shape, strides, table):
    """S over all multi-indices: raise the index with most quanta (stable for few quanta)."""
    n = len(shape)
    k = np.zeros(n, np.int64)
    table[0] = start
    for flat in range(1, len(table)):
        rest = flat
        for i in range(n):
            k[i] = rest // strides[i]
            rest -= k[i] * strides[i]
        top = 0
        for i in range(n):
            if k[i] > k[top]:
                top = i
        lower = flat - strides[top]
        value = w[top] * table[lower]
        for j in range(n):
            quanta = k[j] - (1 if j == top else 0)
            if quanta > 0:
                value += W[top, j] * math.sqrt(quanta) * table[lower - strides[j]]
        table[flat] = value / math.sqrt(k[top])
    return table


def amplitudes(transition: Transition, v_max: int, n_max: int) -> np.ndarray:
    """(components, v.., n..) transition amplitudes of every line, Boltzmann weight not included."""
    generator = transition_generator(transition)
    n = len(transition.modes)
    shape = np.array([v_max + 1] * n + [n_max + 1] * n)
    strides = np.array([math.prod(shape[i + 1 :].tolist()) for i in range(2 * n)])
    table = _ladder(
        generator.W,
        generator.w,
        math.exp(generator.log_c),
        shape,
        strides,
        np.zeros(math.prod(shape.tolist())),
    ).reshape(shape)
    if transition.moment is None:
        return table[None]
    g, f = transition.wavenumbers_initial, transition.wavenumbers_final
    mixing, shift = transition.mixing_matrix, transition.displacements / np.sqrt(f)
    components = []
    for axis in range(3):
        mu = transition.moment.slopes_debye[:, axis] * np.sqrt(g)
        rotated = (mixing @ mu) / np.sqrt(2.0 * f)
        m0 = transition.moment.constant_debye[axis] - mu @ mixing.T @ shift
        m0 += rotated @ generator.w[n:]
        m = rotated @ generator.W[n:]
        m[n:] += rotated
        amplitude = m0 * table
        for j in range(2 * n):
            lowered = np.zeros_like(table)
            target = [slice(None)] * (2 * n)
            source = [slice(None)] * (2 * n)
            target[j], source[j] = slice(1, None), slice(None, -1)
            lowered[tuple(target)] = table[tuple(source)]
            size = [1] * (2 * n)
            size[j] = int(shape[j])
            amplitude = amplitude + m[j] * lowered * np.sqrt(np.arange(shape[j])).reshape(size)
        components.append(amplitude)
    return np.array(components)


def histogram(transition: Transition, v_max: int, n_max: int) -> tuple[np.ndarray, int]:
    """Weight at each integer energy E_n - E_v and the index of energy 0; wavenumbers are integers.

    Not normalised: the sum falls short of <mu^2> by what lies beyond the quanta.
    """
    n = len(transition.modes)
    weight = (amplitudes(transition, v_max, n_max) ** 2).sum(axis=0)
    g = transition.wavenumbers_initial.astype(int)
    f = transition.wavenumbers_final.astype(int)
    energy = np.zeros(weight.shape, np.int64)
    for i in range(2 * n):
        size = [1] * (2 * n)
        size[i] = weight.shape[i]
        step = -g[i] if i < n else f[i - n]
        energy = energy + (step * np.arange(weight.shape[i])).reshape(size)
    for i in range(n):
        x = boltzmann_exponent(float(g[i]), transition.temperature_k)
        size = [1] * (2 * n)
        size[i] = v_max + 1
        populations = (
            np.exp(-x * np.arange(v_max + 1)) if math.isfinite(x) else np.eye(v_max + 1)[0]
        )
        weight = weight * (populations * -np.expm1(-x)).reshape(size)
    zero = int(v_max * g.sum())
    out = np.zeros(zero + int(n_max * f.sum()) + 1)
    np.add.at(out, energy.ravel() + zero, weight.ravel())
    return out, zero


def joined(parts: list[tuple[np.ndarray, int]]) -> tuple[np.ndarray, int]:
    """The histogram of independent blocks together."""
    total, zero = parts[0]
    for other, other_zero in parts[1:]:
        total, zero = fftconvolve(total, other), zero + other_zero
    return total, zero


def broadened(histogram: tuple[np.ndarray, int], energies, sigma, gamma) -> np.ndarray:
    """Each line replaced by scipy's Voigt profile, summed over all lines above 1e-18."""
    weights, zero = histogram
    lines = np.flatnonzero(np.abs(weights) > 1e-18)
    total = np.zeros(len(energies))
    for block in itertools.batched(lines, 4000) if hasattr(itertools, "batched") else [lines]:
        block = np.asarray(block)
        profile = voigt_profile(energies[:, None] - (block - zero), sigma, gamma)
        total += profile @ weights[block]
    return total


def exact_chi(transition: Transition, t: float, digits: int = 40) -> complex:
    """chi(t) for a constant moment from the 2N pairing integral, in ``digits`` digits.

    The generator is rebuilt here in the same digits, so float64 rounding of the inputs is the only
    thing shared. An own mpmath context: the global one belongs to everybody.
    """
    ctx = mpmath.MPContext()
    ctx.dps = digits
    n = len(transition.modes)
    g = [ctx.mpf(x) for x in transition.wavenumbers_initial]
    f = [ctx.mpf(x) for x in transition.wavenumbers_final]
    J = ctx.matrix(transition.mixing_matrix.tolist())
    # exactly orthogonal: Newton's polar iteration, as the service's bound is for that matrix
    for _ in range(4):
        J = (J + ctx.inverse(J.T)) / 2
    G, F = ctx.diag(g), ctx.diag(f)
    P = ctx.inverse(G + J.T * F * J)
    K = ctx.matrix(
        [ctx.mpf(d) / ctx.sqrt(x) for d, x in zip(transition.displacements, f, strict=True)]
    )
    rg, rf = ctx.diag([ctx.sqrt(x) for x in g]), ctx.diag([ctx.sqrt(x) for x in f])
    eye = ctx.eye(n)
    blocks = [
        [2 * rg * P * rg - eye, 2 * rg * P * J.T * rf],
        [None, 2 * rf * J * P * J.T * rf - eye],
    ]
    blocks[1][0] = blocks[0][1].T
    W = ctx.matrix(2 * n)
    for a, b, i, j in itertools.product(range(2), range(2), range(n), range(n)):
        W[a * n + i, b * n + j] = blocks[a][b][i, j]
    wy = -ctx.sqrt(2) * rg * P * J.T * F * K
    wz = ctx.sqrt(2) * rf * (eye - J * P * J.T * F) * K
    w = ctx.matrix(list(wy) + list(wz))
    beta = None
    if transition.temperature_k > 0.0:
        beta = 1 / (ctx.mpf(BOLTZMANN_CM1_K) * ctx.mpf(transition.temperature_k))
    d2 = [ctx.exp(-beta * x) if beta is not None else ctx.mpf(0) for x in g]
    force = (J.T * F * K).T * P * (J.T * F * K)
    c2 = ctx.sqrt(math.prod(g) * math.prod(f)) * ctx.mpf(2) ** n * ctx.det(P)
    c2 *= ctx.exp(force[0] - (K.T * F * K)[0]) * math.prod(1 - x for x in d2)
    time = ctx.mpf(t)
    # the factor d^2 of both sides goes into E on one side
    E = [x * ctx.expj(y * time) for x, y in zip(d2, g, strict=True)]
    E += [ctx.expj(-y * time) for y in f]
    B = ctx.matrix(2 * n)
    for i, j in itertools.product(range(2 * n), repeat=2):
        B[i, j] = E[i] * W[i, j] * E[j]
    b = ctx.matrix([e * x for e, x in zip(E, w, strict=True)])
    M = ctx.eye(2 * n) - W * B
    z = ctx.lu_solve(M, W * b + w)
    zbar = ctx.lu_solve(ctx.eye(2 * n) - B * W, B * w + b)
    exponent = ((w.T * zbar)[0] + (b.T * z)[0]) / 2
    return complex(c2 * ctx.exp(exponent) / _continuous_root(ctx, W, E))


def _continuous_root(ctx, W, E):
    """sqrt det(1 - EWEW) by the eigenvalues' principal roots: all lie in the right half-plane."""
    half = ctx.diag([ctx.sqrt(e) for e in E])
    Y = half * W * half
    product = ctx.mpf(1)
    for eigenvalue in ctx.eig(Y, left=False, right=False):
        product *= ctx.sqrt(1 - eigenvalue) * ctx.sqrt(1 + eigenvalue)
    return product


def rotation(n: int, rng: np.random.Generator, size: float) -> np.ndarray:
    """A random orthogonal matrix, nearer to the identity for smaller ``size``."""
    skew = size * rng.normal(size=(n, n))
    q, r = np.linalg.qr(np.eye(n) + skew - skew.T)
    return q * np.sign(np.diag(r))


def weights_complete(histogram: tuple[np.ndarray, int]) -> float:
    return float(histogram[0].sum())


__all__ = [
    "amplitudes",
    "broadened",
    "exact_chi",
    "histogram",
    "joined",
    "overlap_generator",
    "rotation",
    "weights_complete",
]
