r"""From the normal modes of two states to mixing, shifts and reorganisation energies.

With x the mass-weighted Cartesian coordinates in one (Eckart) frame, x = x_i + L_i Q and
x = x_f + L_f Q' define the normal coordinates of the two states, hence

.. math::  Q' = J Q + K,\qquad J = L_f^T L_i,\qquad K = L_f^T (x_i - x_f)

(Duschinsky, Acta Physicochim. URSS 7, 551 (1937); Sharp and Rosenstock, J. Chem. Phys. 41, 3453
(1964)). The columns of L_i and L_f span the vibrations at two different geometries; where these
differ, so do the rotations that each leaves out, and J is only nearly orthogonal. The distance is
reported and the nearest orthogonal matrix is what a transition takes.

Delta_k = K_k sqrt(f_k / hbar), S_k = Delta_k^2 / 2; the reorganisation energy of final mode k is
f_k S_k, that of initial mode j is g_j times half the square of its displacement -J^T K.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.optimize import linear_sum_assignment

from ladderband.numerics.errors import DomainError
from ladderband.numerics.molecule import Molecule
from ladderband.numerics.normal_modes import FORCE_CONSTANT_CM1, NormalModes
from ladderband.numerics.transition import Floats, Mode, Moment, orthogonal_mixing
from ladderband.numerics.units import BOHR_ANGSTROM, displacement_from_shift

MIXING_REFUSED = 0.5
"""Distance of J from orthogonal at which two sets of vibrations describe no common space."""


@dataclass(frozen=True)
class HarmonicState:
    """A molecule at a stationary point and its normal modes."""

    molecule: Molecule
    modes: NormalModes


@dataclass(frozen=True)
class Closure:
    """How well one set of modes describes the other.

    orthogonality : max |J J^T - 1| of J as projected, worst in final mode ``worst_mode``.
    smallest_singular_value : 1 when the two sets span one space.
    displacement_outside : share of |x_i - x_f|^2 that no final mode carries, 0..1.
    mean_change_cm1 : what replacing J by its nearest orthogonal matrix does to the mean energy of
        the cold band, 1/4 Tr[(J_o^T F^2 J_o - J^T F^2 J) G^-1].
    """

    orthogonality: float
    worst_mode: int
    smallest_singular_value: float
    displacement_outside: float
    mean_change_cm1: float


@dataclass(frozen=True)
class ModeMap:
    """n pairs of modes; all (n,) arrays are in the order of the INITIAL modes.

    Final modes are renumbered: final mode k is the one paired with initial mode k, and its sign is
    chosen so that J[k, k] >= 0. ``final_numbers[k]`` is its place among the final state's modes in
    ascending wavenumber. Shifts in angstrom sqrt(u); ``duschinsky`` is J as projected, ``mixing``
    the nearest orthogonal matrix. ``largest_move_angstrom``: the farthest any atom moves by K_k.
    """

    wavenumbers_initial: Floats
    wavenumbers_final: Floats
    final_numbers: tuple[int, ...]
    duschinsky: Floats
    mixing: Floats
    shift: Floats
    displacement: Floats
    displacement_initial: Floats
    largest_move_angstrom: Floats
    vectors_initial: Floats
    vectors_final: Floats
    closure: Closure

    @property
    def huang_rhys(self) -> Floats:
        """S_k on the final surface."""
        return 0.5 * self.displacement**2

    @property
    def reorganisation_final_cm1(self) -> Floats:
        """f_k S_k; their sum is the energy of the final surface at the initial minimum."""
        return self.wavenumbers_final * self.huang_rhys

    @property
    def reorganisation_initial_cm1(self) -> Floats:
        """The same on the initial surface at the final minimum, per initial mode."""
        return 0.5 * self.wavenumbers_initial * self.displacement_initial**2

    @property
    def pair_overlaps(self) -> Floats:
        """J[k, k]^2: the share of initial mode k that its partner has, 0..1."""
        return np.diag(self.duschinsky) ** 2

    @property
    def modes(self) -> tuple[Mode, ...]:
        """The modes of the transition, labelled by their number in the initial state."""
        return tuple(
            Mode(float(g), float(f), float(d), f"mode {k}")
            for k, (g, f, d) in enumerate(
                zip(
                    self.wavenumbers_initial, self.wavenumbers_final, self.displacement, strict=True
                )
            )
        )


def displacements(shift: Floats, wavenumbers: Floats) -> Floats:
    """Dimensionless displacements of shifts in angstrom sqrt(u), element by element."""
    return np.array(
        [
            displacement_from_shift(float(k), float(f))
            for k, f in zip(shift, wavenumbers, strict=True)
        ]
    )


def paired_order(duschinsky: Floats) -> tuple[int, ...]:
    """Final mode for each initial mode so that the sum of J^2 over the pairs is largest."""
    rows, columns = linear_sum_assignment(-(duschinsky**2))
    return tuple(int(row) for row in rows[np.argsort(columns)])


def map_modes(initial: HarmonicState, final: HarmonicState) -> ModeMap:
    """Relate two states in one frame (see :mod:`ladderband.numerics.alignment`).

    All wavenumbers must be positive. Cost: products of (3N, 3N) matrices.

    Raises
    ------
    DomainError
        The numbers of modes differ (one state is linear, the other is bent), or J is too far from
        orthogonal for the two sets to describe one space.
    """
    start, end = initial.modes, final.modes
    if start.vectors.shape != end.vectors.shape:
        raise DomainError(
            f"The initial state has {start.vectors.shape[1]} vibrations, the final state "
            f"{end.vectors.shape[1]}: a linear and a bent geometry cannot be joined by normal "
            "coordinates. Give a final gradient at the initial geometry instead, or freeze modes "
            "so that both keep the same number.",
            "/final",
        )
    order = list(paired_order(end.vectors.T @ start.vectors))
    vectors = end.vectors[:, order]
    vectors = vectors * np.where(np.sum(vectors * start.vectors, axis=0) < 0.0, -1.0, 1.0)
    difference = initial.molecule.weighted - final.molecule.weighted
    paired = HarmonicState(
        final.molecule, NormalModes(end.wavenumbers_cm1[order], vectors, end.rigid_residual_cm1)
    )
    shift = vectors.T @ difference
    outside = _share_outside(difference, shift)
    return _assemble(initial, paired, tuple(order), vectors.T @ start.vectors, shift, outside)


def map_gradient(initial: HarmonicState, gradient: Floats) -> ModeMap:
    """The displaced model: the final surface is the initial one shifted by its gradient.

    ``gradient`` (3N,): derivative of the final energy at the initial geometry, hartree/bohr, in
    the initial frame. With gamma = L^T M^{-1/2} grad the minimum of gamma Q + g^2 Q^2 / 2 lies at
    Q = -gamma / g^2, so K = gamma / g^2; J = 1 and f = g ("vertical gradient"; common practice).
    """
    modes, roots = initial.modes, initial.molecule.root_masses
    weighted = gradient / roots
    gamma = modes.vectors.T @ weighted
    squares = (modes.wavenumbers_cm1 / FORCE_CONSTANT_CM1) ** 2
    shift = gamma / squares * float(BOHR_ANGSTROM)
    n = len(shift)
    outside = _share_outside(weighted, gamma)
    return _assemble(initial, initial, tuple(range(n)), np.eye(n), shift, outside)


def _share_outside(whole: Floats, inside: Floats) -> float:
    """1 - |inside|^2 / |whole|^2, 0 for a whole that is rounding only."""
    total = float(whole @ whole)
    return max(0.0, 1.0 - float(inside @ inside) / total) if total > 1e-20 else 0.0


def _assemble(
    initial: HarmonicState,
    final: HarmonicState,
    numbers: tuple[int, ...],
    duschinsky: Floats,
    shift: Floats,
    outside: float,
) -> ModeMap:
    g, f = initial.modes.wavenumbers_cm1, final.modes.wavenumbers_cm1
    mixing, distance, worst = _nearest_mixing(duschinsky)
    mean_change = 0.25 * float(np.sum((mixing**2 - duschinsky**2) * (f**2)[:, None] / g[None]))
    moves = np.abs(final.modes.vectors) / initial.molecule.root_masses[:, None]
    farthest = np.linalg.norm(moves.reshape(-1, 3, len(shift)), axis=1).max(axis=0)
    singular = float(np.linalg.svd(duschinsky, compute_uv=False).min())
    return ModeMap(
        g,
        f,
        numbers,
        duschinsky,
        mixing,
        shift,
        displacements(shift, f),
        displacements(-(mixing.T @ shift), g),
        farthest * np.abs(shift),
        initial.modes.vectors,
        final.modes.vectors,
        Closure(distance, worst, singular, outside, mean_change),
    )


def _nearest_mixing(duschinsky: Floats) -> tuple[Floats, float, int]:
    distance = float(np.abs(duschinsky @ duschinsky.T - np.eye(len(duschinsky))).max())
    if distance > MIXING_REFUSED:
        raise DomainError(
            f"The vibrations of the two states do not span one space: |J J^T - 1| reaches "
            f"{distance:.3g} (at most {MIXING_REFUSED}). The geometries differ too much for normal "
            "coordinates in one frame; check the order of the atoms, freeze the large-amplitude "
            "mode in both states, or give a final gradient at the initial geometry.",
            "/final",
        )
    return orthogonal_mixing(duschinsky, repair=True)


def moment_of_modes(
    mapped: ModeMap,
    root_masses: Floats,
    constant_debye: Floats,
    derivatives: Floats,
    *,
    at_final: bool = False,
) -> Moment:
    """The transition moment along the dimensionless initial coordinates.

    ``derivatives`` (3N, 3): d mu / d x in debye per angstrom, in the common frame, at the initial
    geometry or, with ``at_final``, at the final one: mu_0 + m' Q' with Q' = J Q + K becomes
    (mu_0 + m' K) + (m' J) Q. Rotations and translations are left out with the modes.
    """
    vectors = mapped.vectors_final if at_final else mapped.vectors_initial
    per_mode = (vectors / root_masses[:, None]).T @ derivatives  # debye / (angstrom sqrt(u))
    constant = constant_debye
    if at_final:
        constant = constant_debye + mapped.shift @ per_mode
        per_mode = mapped.mixing.T @ per_mode
    lengths = displacements(np.ones(len(per_mode)), mapped.wavenumbers_initial)
    return Moment(constant, per_mode / lengths[:, None])


def turned_modes(modes: NormalModes, rotation: Floats) -> NormalModes:
    """The modes in a frame turned by ``rotation`` (3, 3): every atom's part is turned."""
    parts = modes.vectors.reshape(-1, 3, modes.vectors.shape[1])
    return replace(
        modes, vectors=np.einsum("xy,ayk->axk", rotation, parts).reshape(modes.vectors.shape)
    )
