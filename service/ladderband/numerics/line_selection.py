"""Lines of a whole transition: blocks enumerated, multiplied, and the strongest lines picked."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.signal import fftconvolve

from ladderband.numerics.accuracy import Accuracy, Completeness, Deadline
from ladderband.numerics.enumeration import BlockLines, Places, enumerate_block
from ladderband.numerics.line_list import LineList, Quanta
from ladderband.numerics.mode_blocks import BlockIndices, block_transition, mode_blocks
from ladderband.numerics.progression import ModeSticks, complete_mode_sticks
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats, Transition

CHUNK = 1 << 16


@dataclass(frozen=True)
class Selection:
    """Which lines a list keeps: at least ``threshold`` times the strongest, inside the window
    [low, high] of positions, and of those the ``max_lines`` strongest."""

    threshold: float = 0.0
    max_lines: int = 10_000
    low_cm1: float = -math.inf
    high_cm1: float = math.inf

    @property
    def has_window(self) -> bool:
        """True when lines may lie outside of it."""
        return not (math.isinf(self.low_cm1) and math.isinf(self.high_cm1))


def transition_blocks(transition: Transition) -> list[BlockIndices]:
    """Blocks that multiply; a moment that varies couples all modes into one."""
    count = len(transition.modes)
    if transition.moment is not None:
        every = tuple(range(count))
        return [BlockIndices(every, every)]
    return mode_blocks(transition.mixing, count)


def block_lines(
    transition: Transition, block: BlockIndices, tolerance: float, limit: int, deadline: Deadline
) -> BlockLines:
    """Lines of one block: a certified table for a mode alone, the quanta table for mixed modes."""
    if len(block.final) == 1 and transition.moment is None:
        part = block_transition(transition, block)
        sticks = complete_mode_sticks(
            part.modes[0], part.temperature_k, None, None, tolerance, deadline
        )
        return _of_sticks(sticks)
    part = transition if transition.moment is not None else block_transition(transition, block)
    return enumerate_block(part, tolerance, limit, deadline)


def uncoupled_lines(
    transition: Transition,
    sticks: list[ModeSticks],
    threshold: float,
    max_lines: int,
    deadline: Deadline,
) -> LineList:
    """Joint lines of uncoupled modes, one list of sticks each: at least ``threshold`` of the strongest.

    Rising position first.
    """
    if len(sticks) == 1:
        return _one_mode_lines(transition, sticks[0], threshold, max_lines)
    parts = [_of_sticks(mode) for mode in sticks]
    joint = _products(parts, threshold, deadline)
    kept = _strongest(joint.intensity, max_lines)
    blocks = [BlockIndices((k,), (k,)) for k in range(len(sticks))]
    v, n = _quanta(transition, blocks, parts, joint.places[kept])
    position = positions(transition, v, n)
    order = np.lexsort((-joint.intensity[kept], position))
    return _line_list(parts, joint, kept[order], (position[order], v[order], n[order]))


def _one_mode_lines(
    transition: Transition, sticks: ModeSticks, threshold: float, max_lines: int
) -> LineList:
    """The same for one mode, the commonest question, without the products: a third of the time."""
    mode, weights = transition.modes[0], sticks.weights
    v, n = np.nonzero(weights >= max(threshold * float(weights.max()), 5e-324))
    intensity = weights[v, n]
    if len(intensity) > max_lines:
        kept = _strongest(intensity, max_lines)
        v, n, intensity = v[kept], n[kept], intensity[kept]
    shift = n * mode.wavenumber_final_cm1 - v * mode.wavenumber_initial_cm1
    position = transition.origin_cm1 + transition.direction * shift
    order = np.lexsort((-intensity, position))
    intensity = intensity[order]
    return LineList(
        position_cm1=position[order],
        intensity=intensity,
        v_initial=v[order, None].astype(np.int32),
        v_final=n[order, None].astype(np.int32),
        completeness=_completeness(intensity, _sum_error([sticks])),
        accuracy=Accuracy(sticks.bound if len(intensity) else 0.0, "proven", sticks.route),
    )


def _strongest(intensity: Floats, count: int) -> Places:
    if len(intensity) <= count:
        return np.arange(len(intensity))
    return np.argpartition(-intensity, count - 1)[:count]


def _of_sticks(sticks: ModeSticks) -> BlockLines:
    """A single mode's table as block lines (the sign of J does not matter: a square follows)."""
    intensity = sticks.weights.ravel()
    columns = sticks.weights.shape[1]

    def quanta(chosen: Places) -> tuple[Quanta, Quanta]:
        v, n = np.divmod(chosen, columns)
        return v[:, None].astype(np.int32), n[:, None].astype(np.int32)

    return BlockLines(
        intensity=intensity,
        bound=np.full(len(intensity), sticks.bound),
        quanta=quanta,
        sum_bound=sticks.sum_bound,
        missing_at_most=sticks.missing_at_most,
        route=sticks.route,
        examined=len(intensity),
    )


@dataclass(frozen=True)
class EnumeratedLines:
    """A selected list, and what the whole enumeration it comes from holds."""

    selected: LineList
    enumerated: Completeness
    count: int
    strongest: float


def transition_lines(
    transition: Transition,
    tolerance: float,
    selection: Selection,
    limit: int,
    deadline: Deadline,
) -> EnumeratedLines:
    """All lines until at most ``tolerance`` is missing (or ``limit`` amplitudes), then the selection.

    Notes
    -----
    With e_b the sum bound of block b, the sum of |product - true| over all lines is at most
    prod(1 + e_b) - 1, because every block's lines sum to at most 1. A product's own bound: the sum
    over blocks of its bound times the other intensities, at most prod(I_b + d_b) - prod I_b.
    """
    blocks = transition_blocks(transition)
    share = tolerance / (2.0 * len(blocks)) if len(blocks) > 1 else tolerance
    parts = [block_lines(transition, block, share, limit, deadline) for block in blocks]
    joint = _joint(parts, tolerance, limit, deadline)
    return EnumeratedLines(
        _selected(transition, blocks, parts, joint, selection),
        _completeness(joint.intensity, _sum_error(parts)),
        len(joint.intensity),
        float(joint.intensity.max(initial=0.0)),
    )


def _sum_error(parts: Sequence[BlockLines | ModeSticks]) -> float:
    """Sum of |product - true| over all joint lines: prod(1 + e_b) - 1."""
    return 1.001 * (math.prod(1.0 + part.sum_bound for part in parts) - 1.0) + 1e-15


def _completeness(intensity: Floats, error: float) -> Completeness:
    """Captured sum, and the proven limit of what is not in it."""
    captured = float(intensity.sum())
    rounding = (len(intensity) / 64.0 + 60.0) * UNIT_ROUNDOFF
    missing = 1.0 - captured + error + rounding
    return Completeness(captured, 1.0, min(1.0, max(0.0, missing)))


@dataclass(frozen=True)
class _Joint:
    """Joint lines: intensity, bound (L,) and the place of each in every block's list (L, B)."""

    intensity: Floats
    bound: Floats
    places: NDArray[np.int32]


def _joint(parts: list[BlockLines], tolerance: float, limit: int, deadline: Deadline) -> _Joint:
    least = _least_for(parts, tolerance, limit) if len(parts) > 1 else 0.0
    return _products(parts, least, deadline)


def _least_for(parts: list[BlockLines], tolerance: float, limit: int) -> float:
    """Weakest joint line to keep, relative to the strongest: half the tolerance missing, or ``limit``.

    From the histogram of logarithms of the intensities, convolved over the blocks: a prediction.
    """
    bins, width = 4000, 0.02
    count = np.zeros(bins)
    caught = np.zeros(bins)
    count[0] = caught[0] = 1.0
    for part in parts:
        highest = part.intensity.max(initial=0.0) or 1.0
        with np.errstate(divide="ignore"):
            depth = -np.log(part.intensity / highest) / width
        inside = depth < bins - 1
        place = np.floor(depth[inside]).astype(int)
        number = np.bincount(place, np.ones(len(place)), minlength=bins)[:bins]
        count = _convolved(count, number)
        weights = np.bincount(place, part.intensity[inside], minlength=bins)[:bins]
        caught = _convolved(caught, weights)
    missing = caught.sum() - np.cumsum(caught)
    wanted = int(np.searchsorted(-missing, -0.5 * tolerance)) + len(parts)
    allowed = int(np.searchsorted(np.cumsum(count), limit)) - 1
    return math.exp(-width * max(1, min(wanted, allowed, bins - 1)))


def _convolved(a: Floats, b: NDArray[Any]) -> Floats:
    return np.maximum(np.asarray(fftconvolve(a, b), dtype=np.float64)[: len(a)], 0.0)


def _products(parts: list[BlockLines], least: float, deadline: Deadline) -> _Joint:
    """Joint lines of at least ``least`` times the strongest one, and not zero in float64.

    Everything is compared relative to the strongest line of each block, so a partial product below
    ``least`` can never recover and is dropped, and nothing underflows.
    """
    if len(parts) == 1:
        only = parts[0]
        smallest = max(least * float(only.intensity.max(initial=0.0)), 5e-324)
        (strong,) = np.nonzero(only.intensity >= smallest)
        place = strong.astype(np.int32)[:, None]
        return _Joint(only.intensity[strong], only.bound[strong], place)
    size = 1
    intensity, bound, relative = np.ones(1), np.zeros(1), np.ones(1)
    places = np.empty((1, 0), np.int32)
    for part in parts:
        ratio = part.intensity / (part.intensity.max(initial=0.0) or 1.0)
        useful = np.flatnonzero((ratio >= least) & (ratio > 0.0))
        pairs = [(np.empty(0, np.int64), np.empty(0, np.int64))]
        for begin in range(0, size, CHUNK):
            deadline.check()
            product = relative[begin : begin + CHUNK, None] * ratio[useful]
            row, column = np.nonzero((product >= least) & (product > 0.0))
            pairs.append((row + begin, useful[column]))
        row, column = (np.concatenate(part_of) for part_of in zip(*pairs, strict=True))
        relative = relative[row] * ratio[column]
        joint = intensity[row] * part.intensity[column]
        raised = (intensity[row] + bound[row]) * (part.intensity[column] + part.bound[column])
        bound = (raised - joint) * 1.001 + 4.0 * UNIT_ROUNDOFF * joint
        intensity, size = joint, len(joint)
        places = np.column_stack([places[row], column.astype(np.int32)])
    kept = intensity > 0.0
    return _Joint(intensity[kept], bound[kept], places[kept])


def _selected(
    transition: Transition,
    blocks: list[BlockIndices],
    parts: list[BlockLines],
    joint: _Joint,
    selection: Selection,
) -> LineList:
    """The strongest lines inside the selection, strongest first."""
    strong = np.flatnonzero(
        joint.intensity >= selection.threshold * joint.intensity.max(initial=0.0)
    )
    if not selection.has_window:  # most of the time would go into sorting what is not kept
        strong = strong[_strongest(joint.intensity[strong], selection.max_lines)]
    order = strong[np.argsort(-joint.intensity[strong], kind="stable")]
    chosen, v, n, position = _inside(transition, blocks, parts, joint, order, selection)
    return _line_list(parts, joint, chosen, (position, v, n))


def _line_list(
    parts: list[BlockLines], joint: _Joint, chosen: Places, columns: tuple[Floats, Quanta, Quanta]
) -> LineList:
    position, v, n = columns
    intensity = joint.intensity[chosen]
    return LineList(
        position_cm1=position,
        intensity=intensity,
        v_initial=v,
        v_final=n,
        completeness=_completeness(intensity, _sum_error(parts)),
        accuracy=Accuracy(
            float(joint.bound[chosen].max(initial=0.0)),
            "proven",
            "+".join(sorted({part.route for part in parts})),
        ),
    )


def _inside(
    transition: Transition,
    blocks: list[BlockIndices],
    parts: list[BlockLines],
    joint: _Joint,
    order: Places,
    selection: Selection,
) -> tuple[Places, Quanta, Quanta, Floats]:
    """Walk down the strongest lines until ``max_lines`` of them lie inside the window."""
    if not selection.has_window:
        chosen = order[: selection.max_lines]
        v, n = _quanta(transition, blocks, parts, joint.places[chosen])
        return chosen, v, n, positions(transition, v, n)
    found: list[tuple[Places, Quanta, Quanta, Floats]] = []
    count = 0
    for begin in range(0, max(1, len(order)), CHUNK):
        chosen = order[begin : begin + CHUNK]
        v, n = _quanta(transition, blocks, parts, joint.places[chosen])
        position = positions(transition, v, n)
        keep = (position >= selection.low_cm1) & (position <= selection.high_cm1)
        keep &= np.cumsum(keep) + count <= selection.max_lines
        count += int(keep.sum())
        found.append((chosen[keep], v[keep], n[keep], position[keep]))
        if count >= selection.max_lines:
            break
    chosen, v, n, position = (np.concatenate(column) for column in zip(*found, strict=True))
    return chosen, v, n, position


def _quanta(
    transition: Transition,
    blocks: list[BlockIndices],
    parts: list[BlockLines],
    places: NDArray[np.int32],
) -> tuple[Quanta, Quanta]:
    count = len(transition.modes)
    v = np.zeros((len(places), count), dtype=np.int32)
    n = np.zeros((len(places), count), dtype=np.int32)
    for block, part, place in zip(blocks, parts, places.T, strict=True):
        v[:, block.initial], n[:, block.final] = part.quanta(place.astype(np.int64))
    return v, n


def positions(transition: Transition, v: Quanta, n: Quanta) -> Floats:
    """Positions in cm^-1: origin + direction (sum f n - sum g v), within 1e-15 (N + 2) relative."""
    shift = n @ transition.wavenumbers_final - v @ transition.wavenumbers_initial
    position: Floats = transition.origin_cm1 + transition.direction * shift
    return position
