"""The overlap generator with every entry correct to the last bit of float64, by ball arithmetic.

The formulas are those of :mod:`ladderband.numerics.generator`, for the doubles of the transition taken
exactly and with J^-1 in place of J^T, so that a mixing matrix orthogonal only to rounding is treated as
exactly what it is (the change of variables stays unitary for any invertible J).
"""

from __future__ import annotations

from dataclasses import dataclass

import flint
import numpy as np

from ladderband.numerics.balls import working_precision
from ladderband.numerics.errors import DomainError
from ladderband.numerics.generator import OverlapGenerator
from ladderband.numerics.transition import Floats, Transition
from ladderband.numerics.units import BOLTZMANN_J_K, PLANCK_J_S, SPEED_OF_LIGHT_M_S

ENTRY_ERROR = 2.0**-52
"""Each entry of W and w is within this, relative, or within 1e-25 absolute; c likewise."""


@dataclass(frozen=True)
class MomentTerms:
    """A varying transition moment in the ladder's terms, relative to the root of its total.

    Amplitude = m_0 S(k) + sum_j m_j sqrt(k_j) S(k - e_j) in three components: ``constant`` (3,) and
    ``linear`` (3, 2N) over y then z, so that the squared amplitudes of a complete list sum to 1.
    ``total_debye2`` = <|mu|^2> in debye^2.
    """

    constant: Floats
    linear: Floats
    total_debye2: float


def certified_thermal_generator(
    transition: Transition,
) -> tuple[OverlapGenerator, MomentTerms | None]:
    """The generator at the transition's temperature, and its moment's terms when the moment varies.

    Entries within ``ENTRY_ERROR`` (proven); ``log_c`` is the logarithm of c, rounded. Cost: one
    inverse, two determinants and four products of balls of order N: 0.1 s at N = 60, 0.3 s at 100.

    Raises
    ------
    DomainError
        The matrices are too ill-conditioned to settle with 1000 bits (J singular).
    """
    bits = 128
    while bits <= 1024:
        with working_precision(bits):
            W, w, c = _generator(transition)
            terms = _moment_terms(transition, W, w) if transition.moment is not None else ()
            if _settled(W, w, c, *terms):
                generator = OverlapGenerator(_floats(W), _floats(w).ravel(), float(c.log()))
                return generator, _as_moment(*terms) if terms else None
        bits *= 2
    raise DomainError("The mixing matrix is singular to 1000 bits.", "/mixing")


def _diagonal(values: list[flint.arb]) -> flint.arb_mat:
    size = len(values)
    matrix = flint.arb_mat(size, size)
    for i, value in enumerate(values):
        matrix[i, i] = value
    return matrix


def _column(values: list[flint.arb]) -> flint.arb_mat:
    return flint.arb_mat(len(values), 1, values)


def _generator(transition: Transition) -> tuple[flint.arb_mat, flint.arb_mat, flint.arb]:
    n = len(transition.modes)
    g = [flint.arb(float(x)) for x in transition.wavenumbers_initial]
    f = [flint.arb(float(x)) for x in transition.wavenumbers_final]
    delta = _column([flint.arb(float(x)) for x in transition.displacements])
    J = flint.arb_mat(n, n, [flint.arb(float(x)) for x in transition.mixing_matrix.ravel()])
    root_g, root_f = _diagonal([x.sqrt() for x in g]), _diagonal([x.sqrt() for x in f])
    scaled = root_f * J  # F^1/2 J
    P = (_diagonal(g) + scaled.transpose() * scaled).inv()
    half = scaled * P  # F^1/2 J P
    yy = 2 * (root_g * P * root_g)
    yz = 2 * (root_g * half.transpose())
    zz = 2 * (half * scaled.transpose())
    # F^1/2 K = Delta: w_y = -sqrt2 G^1/2 P J^T F^1/2 Delta, w_z = sqrt2 (1 - F^1/2 J P J^T F^1/2) Delta
    root_two = flint.arb(2).sqrt()
    pull = half.transpose() * delta
    w_y = -root_two * (root_g * pull)
    w_z = root_two * (delta - scaled * pull)
    exponent = (delta.transpose() * (scaled * pull - delta))[0, 0] / 2
    determinant = P.det() * J.det() ** 2
    for a, b in zip(g, f, strict=True):
        determinant *= 2 * (a * b).sqrt()
    c = abs(determinant).sqrt() * exponent.exp()
    return _scaled(transition, (yy, yz, zz), (w_y, w_z), c)


def _scaled(
    transition: Transition,
    blocks: tuple[flint.arb_mat, flint.arb_mat, flint.arb_mat],
    vectors: tuple[flint.arb_mat, flint.arb_mat],
    c: flint.arb,
) -> tuple[flint.arb_mat, flint.arb_mat, flint.arb]:
    """Put the blocks together and scale the y part by d_k = exp(-h c g_k / (2 k T))."""
    yy, yz, zz = blocks
    n = zz.nrows()
    d = _boltzmann(transition)
    W = flint.arb_mat(2 * n, 2 * n)
    w = flint.arb_mat(2 * n, 1)
    for i in range(n):
        for j in range(n):
            unit = 1 if i == j else 0
            W[i, j] = d[i] * d[j] * (yy[i, j] - unit)
            W[i, n + j] = d[i] * yz[i, j]
            W[n + j, i] = W[i, n + j]
            W[n + i, n + j] = zz[i, j] - unit
        w[i, 0] = d[i] * vectors[0][i, 0]
        w[n + i, 0] = vectors[1][i, 0]
        c *= (1 - d[i] ** 2).sqrt()
    return W, w, c


def _boltzmann(transition: Transition) -> list[flint.arb]:
    if transition.temperature_k == 0.0:
        return [flint.arb(0)] * len(transition.modes)
    unit = PLANCK_J_S * SPEED_OF_LIGHT_M_S * 100 / BOLTZMANN_J_K / 2  # exact, kelvin per cm^-1
    scale = flint.arb(flint.fmpq(unit.numerator, unit.denominator)) / float(
        transition.temperature_k
    )
    return [(-scale * float(g)).exp() for g in transition.wavenumbers_initial]


def _moment_terms(
    transition: Transition, W: flint.arb_mat, w: flint.arb_mat
) -> tuple[flint.arb_mat, flint.arb_mat, flint.arb]:
    """constant (3, 1), linear (3, 2N), both over sqrt(total), and the total in debye^2.

    mu = mu_0 + sum_k s_k q_k, q_k = Q_k sqrt(g_k), Q = J^-1 (Q' - K), Q'_j = (a_j + a_j^+)/sqrt(2 f_j):
    lambda_j = sum_k (J^-1)_kj s_k sqrt(g_k) / sqrt(2 f_j), m_0 = mu_0 - sum_k s_k sqrt(g_k) (J^-1 K)_k
    + lambda . w_z, m = lambda . ([0 1] + W_z:) (Herzberg-Teller; <q_k^2> = coth(x_k/2)/2).
    """
    assert transition.moment is not None
    n = len(transition.modes)
    slopes = flint.arb_mat(
        n, 3, [flint.arb(float(x)) for x in transition.moment.slopes_debye.ravel()]
    )
    constant = _column([flint.arb(float(x)) for x in transition.moment.constant_debye])
    g = [flint.arb(float(x)) for x in transition.wavenumbers_initial]
    f = [flint.arb(float(x)) for x in transition.wavenumbers_final]
    J = flint.arb_mat(n, n, [flint.arb(float(x)) for x in transition.mixing_matrix.ravel()])
    inverse = J.inv()
    scaled = _diagonal([x.sqrt() for x in g]) * slopes  # mu_k, (n, 3)
    shift = _column(
        [flint.arb(float(d)) / x.sqrt() for d, x in zip(transition.displacements, f, strict=True)]
    )
    weights = _diagonal([1 / (2 * x).sqrt() for x in f]) * (inverse.transpose() * scaled)  # lambda
    w_z = _column([w[n + i, 0] for i in range(n)])
    m_0 = constant - scaled.transpose() * (inverse * shift) + weights.transpose() * w_z
    rows = flint.arb_mat(n, 2 * n)
    for i in range(n):
        for j in range(2 * n):
            rows[i, j] = W[n + i, j] + (1 if j == n + i else 0)
    linear = weights.transpose() * rows
    total = sum((x * x for x in constant.entries()), flint.arb(0))
    for k, d in enumerate(_boltzmann(transition)):
        coth = (1 + d**2) / (1 - d**2)
        total += coth / 2 * sum((slopes[k, x] ** 2 for x in range(3)), flint.arb(0))
    if not total > 0:
        raise DomainError("The transition moment is zero: nothing is allowed.", "/moment")
    return m_0 * (1 / total.sqrt()), linear * (1 / total.sqrt()), total


def _as_moment(constant: flint.arb_mat, linear: flint.arb_mat, total: flint.arb) -> MomentTerms:
    return MomentTerms(_floats(constant).ravel(), _floats(linear), float(total))


def _settled(*parts: flint.arb_mat | flint.arb) -> bool:
    """Whether every entry is known to 2^-60 relative or 1e-26 absolute."""
    for part in parts:
        entries = [part] if isinstance(part, flint.arb) else part.entries()
        for entry in entries:
            if entry.rel_accuracy_bits() < 60 and not bool(entry.rad() < flint.arb("1e-26")):
                return False
    return True


def _floats(matrix: flint.arb_mat) -> Floats:
    values = [float(entry) for entry in matrix.entries()]
    return np.array(values).reshape(matrix.nrows(), matrix.ncols())
