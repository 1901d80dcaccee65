r"""Two geometries of one molecule in one frame: Eckart alignment and the order of the atoms.

The final state's geometry is turned by the proper rotation R that minimises the mass-weighted
distance sum_a m_a |R x'_a - x_a|^2 from the centres of mass. Setting the derivative with respect to
an infinitesimal turn to zero gives sum_a m_a x_a x (R x'_a) = 0, the Eckart condition: the minimum
removes the rotation that geometries of different states hide ("axis switching"; Hougen and Watson,
Can. J. Phys. 43, 298 (1965); Kudin and Dymarsky, J. Chem. Phys. 122, 224105 (2005)). R comes from a
singular value decomposition (Kabsch, Acta Cryst. A 32, 922 (1976); A 34, 827 (1978)).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from scipy.optimize import linear_sum_assignment
from scipy.spatial.transform import Rotation

from ladderband.numerics.molecule import Molecule
from ladderband.numerics.transition import Floats

NEARLY_EQUAL_MOMENTS = 0.02
"""Relative difference below which two principal axes have no direction of their own."""

ORDER_SLACK_ANGSTROM = 0.1
"""Another order of the atoms counts as better only when it brings them nearer by this much."""


@dataclass(frozen=True)
class Alignment:
    """``rotation`` (3, 3) turns the final frame: x = R x'; distances in angstrom.

    ``axis_switching_deg``: turn between the principal axes of the two aligned geometries, None
    where two moments of inertia nearly coincide. ``mirror_distance`` is what a reflection of the
    final geometry would reach.
    """

    rotation: Floats
    distance: float
    mirror_distance: float
    angle_deg: float
    axis_switching_deg: float | None
    eckart_residual: float


def best_rotation(reference: Molecule, moving: Molecule, *, mirrored: bool = False) -> Floats:
    """The rotation R (3, 3) nearest in the mass-weighted sense; ``mirrored``: with det R = -1.

    Two linear molecules leave the turn about the axis open; the shortest turn of axis onto axis is
    taken, so that frames that agree already are left alone.
    """
    covariance = (reference.centred.T * reference.masses_u) @ moving.centred
    if reference.linear and moving.linear and not mirrored:
        return _shortest_turn(covariance)
    left, _, right = np.linalg.svd(covariance)
    sign = math.copysign(1.0, float(np.linalg.det(left @ right))) * (-1.0 if mirrored else 1.0)
    return np.asarray(left @ np.diag([1.0, 1.0, sign]) @ right)


def _shortest_turn(covariance: Floats) -> Floats:
    """The smallest rotation that takes one axis onto the other; covariance = s (to) (from)^T."""
    left, _, right = np.linalg.svd(covariance)
    to, from_ = left[:, 0], right[0]
    normal, cosine = np.cross(from_, to), float(from_ @ to)
    sine = float(np.linalg.norm(normal))
    if sine < 1e-12:  # parallel, or opposite: half a turn about any axis across
        half_turn = Rotation.from_rotvec(math.pi * right[1]).as_matrix()
        return np.eye(3) if cosine > 0.0 else np.asarray(half_turn)
    return np.asarray(Rotation.from_rotvec(normal / sine * math.atan2(sine, cosine)).as_matrix())


def turned(molecule: Molecule, rotation: Floats) -> Molecule:
    """The molecule at its centre of mass, turned by ``rotation``."""
    return replace(molecule, geometry_angstrom=molecule.centred @ rotation.T)


def distance(reference: Molecule, moving: Molecule) -> float:
    """Mass-weighted root mean square distance of the atoms, centres of mass together."""
    squares = ((reference.centred - moving.centred) ** 2).sum(axis=1)
    return math.sqrt(float(reference.masses_u @ squares / reference.masses_u.sum()))


def align(reference: Molecule, moving: Molecule) -> tuple[Molecule, Alignment]:
    """Turn ``moving`` into the Eckart frame of ``reference``; the same atoms in the same order.

    Where the rotation is not unique (a linear molecule may be spun about its axis) any of the best
    is taken; the modes of such a molecule do not depend on it.
    """
    rotation = best_rotation(reference, moving)
    aligned = turned(moving, rotation)
    mirror = turned(moving, best_rotation(reference, moving, mirrored=True))
    torque = reference.masses_u @ np.cross(reference.centred, aligned.centred)
    scale = float(reference.masses_u @ (reference.centred**2).sum(axis=1))
    return aligned, Alignment(
        rotation,
        distance(reference, aligned),
        distance(reference, mirror),
        rotation_angle_deg(rotation),
        axis_switching_deg(reference, aligned),
        float(np.linalg.norm(torque)) / scale,
    )


def rotation_angle_deg(rotation: Floats) -> float:
    """Angle of a rotation matrix, 0..180 degrees."""
    return math.degrees(float(Rotation.from_matrix(rotation).magnitude()))


def axis_switching_deg(reference: Molecule, aligned: Molecule) -> float | None:
    """Angle of the rotation that takes the principal axes of one into those of the other.

    An axis has no sign, so the signs that make the angle smallest are taken.
    """
    frames = []
    for molecule in (reference, aligned):
        moments, axes = molecule.principal_axes
        near = [high - low < NEARLY_EQUAL_MOMENTS * moments[2] for low, high in pairwise(moments)]
        if any(near):
            return None
        frames.append(axes)
    overlap = frames[0] @ frames[1].T
    # Of the eight sign choices the proper ones with the largest trace give the smallest angle.
    signs = [np.array(s) for s in np.ndindex(2, 2, 2)]
    traces = [
        float(np.diag(overlap) @ (1 - 2 * s))
        for s in signs
        if np.linalg.det(overlap) * np.prod(1 - 2 * s) > 0
    ]
    return math.degrees(math.acos(min(1.0, max(-1.0, 0.5 * (max(traces) - 1.0)))))


def reordered(molecule: Molecule, order: tuple[int, ...]) -> Molecule:
    """The molecule with atom ``order[k]`` in place k."""
    index = list(order)
    return Molecule(
        tuple(molecule.atomic_numbers[k] for k in order),
        molecule.geometry_angstrom[index],
        molecule.masses_u[index],
    )


def better_order(reference: Molecule, moving: Molecule) -> tuple[int, ...] | None:
    """An order of the final atoms that fits clearly better than the given one, or None.

    A search, not a proof: from each of several starting rotations the nearest atoms of the same
    element are assigned (Hungarian method) and the rotation is refined until the assignment stays.
    The elements must be the same up to order; where they stand in a different order some order is
    always returned.
    """
    as_given = moving.atomic_numbers == reference.atomic_numbers
    given = distance(reference, align(reference, moving)[0]) if as_given else math.inf
    if given < ORDER_SLACK_ANGSTROM:
        return None
    found = [_refined(reference, moving, start) for start in _starting_rotations(reference, moving)]
    reached, order = min(found, key=lambda pair: pair[0])
    return order if reached < given - ORDER_SLACK_ANGSTROM else None


def _starting_rotations(reference: Molecule, moving: Molecule) -> list[Floats]:
    """No turn, and the principal axes on each other followed by the 60 of the icosahedral group.

    The group covers molecules whose axes are not unique; a start need only be near enough for the
    assignment to be right.
    """
    axes_to, axes_from = reference.principal_axes[1], moving.principal_axes[1]
    axes_to = axes_to * math.copysign(1.0, float(np.linalg.det(axes_to)))
    axes_from = axes_from * math.copysign(1.0, float(np.linalg.det(axes_from)))
    flips = [np.diag(d) for d in ([1, 1, 1], [1, -1, -1], [-1, 1, -1], [-1, -1, 1])]
    turns = flips + list(Rotation.create_group("I").as_matrix())
    return [np.eye(3)] + [axes_to.T @ turn @ axes_from for turn in turns]


def _refined(
    reference: Molecule, moving: Molecule, rotation: Floats
) -> tuple[float, tuple[int, ...]]:
    order: tuple[int, ...] = ()
    for _ in range(20):
        placed = moving.centred @ rotation.T
        gaps = ((reference.centred[:, None] - placed[None]) ** 2).sum(axis=2)
        same = np.equal.outer(reference.atomic_numbers, moving.atomic_numbers)
        new = tuple(int(k) for k in linear_sum_assignment(np.where(same, gaps, 1e6))[1])
        if new == order:
            break
        order = new
        rotation = best_rotation(reference, reordered(moving, order))
    return distance(reference, turned(reordered(moving, order), rotation)), order
