"""Which modes mix with which: connected blocks of the Duschinsky matrix."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from ladderband.numerics.transition import Floats, Mode, Transition


@dataclass(frozen=True)
class BlockIndices:
    """Final and initial modes (indices) of one connected block; as many of one as of the other."""

    final: tuple[int, ...]
    initial: tuple[int, ...]


def mode_blocks(mixing: Floats | None, count: int) -> list[BlockIndices]:
    """Blocks of J in the order of their first final mode (exact zeros do not connect)."""
    if mixing is None:
        return [BlockIndices((k,), (k,)) for k in range(count)]
    rows, columns = np.nonzero(mixing)
    graph = coo_array((np.ones(len(rows)), (rows, columns + count)), shape=(2 * count,) * 2)
    number, labels = connected_components(graph, directed=False)
    members: list[tuple[list[int], list[int]]] = [([], []) for _ in range(number)]
    for index, label in enumerate(labels.tolist()):
        members[label][index >= count].append(index % count)
    return [BlockIndices(tuple(final), tuple(initial)) for final, initial in members]


def block_transition(transition: Transition, block: BlockIndices) -> Transition:
    """The transition of one block alone: mode i pairs its i-th initial with its i-th final mode."""
    modes = tuple(
        Mode(
            transition.modes[column].wavenumber_initial_cm1,
            transition.modes[row].wavenumber_final_cm1,
            transition.modes[row].displacement,
        )
        for row, column in zip(block.final, block.initial, strict=True)
    )
    mixing = np.ascontiguousarray(transition.mixing_matrix[np.ix_(block.final, block.initial)])
    return replace(transition, modes=modes, mixing=mixing, moment=None)
