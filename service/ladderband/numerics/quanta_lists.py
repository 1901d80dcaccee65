r"""All sets of quanta below a cost, as pairs of two short lists.

A set of quanta k = (k_1..k_D) has the cost sum_i c_i(k_i), c_i(0) = 0, c_i non-decreasing. The indices
are dealt into two groups, *outer* and *inner*; the sets with cost <= C are the pairs of an outer and an
inner set whose costs add up to at most C. With the inner list in order of rising cost, the partners of
an outer set are a beginning of that list: a *row*. So D indices and N sets need two lists of some
N^(1/2) entries, and a set is a place in a row.

All sets below a set are in the list with it (costs do not decrease), so a recursion that lowers quanta
never meets a missing one.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

from ladderband.numerics.transition import Floats

COST_UNIT = 2.0**-20
"""Costs and budgets are multiples of this, so every sum of costs is exact in float64 and a set is
below the budget or not whatever the order of its quanta: smaller sets are never missing."""

Places = NDArray[np.uint64]
Neighbours = tuple[Places, Places, Places, Floats]
"""(at, place, index, root): the sets one quantum below set k are the entries e with
at[k] <= e < at[k+1]: the set at ``place[e]`` has one quantum less of ``index[e]``, and root[e] is the
square root of the quanta that k has of it."""


@dataclass(frozen=True)
class QuantaList:
    """K sets of one group of d indices: quanta (K, d), cost (K,), shell (K,), the total quanta; set 0
    is the vacuum."""

    quanta: NDArray[np.uint16]
    cost: Floats
    shell: NDArray[np.int64]

    def sorted_by(self, first: NDArray[np.int64], second: NDArray[np.int64]) -> QuantaList:
        """The same sets in rising order of two columns of integers below 2^31."""
        order = np.argsort((first << 32) | second)
        return QuantaList(self.quanta[order], self.cost[order], self.shell[order])

    @property
    def price(self) -> NDArray[np.int64]:
        """The costs in whole ``COST_UNIT``s."""
        return np.asarray(self.cost / COST_UNIT, dtype=np.int64)


@dataclass(frozen=True)
class QuantaPairs:
    """All sets with cost <= budget. Outer sets stand shell by shell, inner ones by cost.

    Outer set q begins at place start[q] and has start[q+1] - start[q] partners. inner_index,
    outer_index: which of the D indices belong to each group.
    """

    outer: QuantaList
    inner: QuantaList
    start: NDArray[np.int64]
    outer_index: NDArray[np.int64]
    inner_index: NDArray[np.int64]

    @property
    def count(self) -> int:
        """Number of sets."""
        return int(self.start[-1])

    def quanta(self, chosen: NDArray[np.int64]) -> NDArray[np.int32]:
        """Quanta (len(chosen), D) of the sets at chosen places."""
        row = np.searchsorted(self.start, chosen, side="right") - 1
        found = np.empty(
            (len(chosen), len(self.outer_index) + len(self.inner_index)), dtype=np.int32
        )
        found[:, self.outer_index] = self.outer.quanta[row]
        found[:, self.inner_index] = self.inner.quanta[chosen - self.start[row]]
        return found


def quanta_pairs(cost: Floats, budget: float, limit: int) -> QuantaPairs | None:
    """The sets with cost <= budget; None when they are more than ``limit``.

    cost (D, width): indices sorted by the cost of one quantum, infinite where a quantum is never
    taken; dealt out in turn, so that both groups get cheap ones. Time and memory: those of the two
    lists.
    """
    indices = np.arange(len(cost))
    inner_index, outer_index = indices[::2], indices[1::2]
    inner = quanta_list(cost[inner_index], budget, limit)
    outer = None if inner is None else quanta_list(cost[outer_index], budget, limit)
    if inner is None or outer is None:
        return None
    # ties by shell: the sets below a set stand before it
    inner = inner.sorted_by(inner.price, inner.shell)
    outer = outer.sorted_by(outer.shell, outer.price)
    length = np.searchsorted(inner.cost, budget - outer.cost, side="right")
    start = np.concatenate([[0], np.cumsum(length)])
    if start[-1] > limit:
        return None
    return QuantaPairs(outer, inner, start, outer_index, inner_index)


def quanta_list(cost: Floats, budget: float, limit: int) -> QuantaList | None:
    """The sets of one group with cost <= budget, in no promised order; None above ``limit``."""
    count = count_sets(cost, budget, limit)
    if count > limit:
        return None
    quanta, left = np.empty((count, len(cost)), dtype=np.uint16), np.empty(count)
    shell = np.empty(count, dtype=np.int64)
    _walk(cost, budget, count, quanta, left, shell)
    return QuantaList(quanta, budget - left, shell)


def count_sets(cost: Floats, budget: float, limit: int) -> int:
    """Number of sets with cost <= budget, or limit + 1 when they are more; no memory."""
    no_quanta = np.empty((0, len(cost)), dtype=np.uint16)
    return int(_walk(cost, budget, limit, no_quanta, np.empty(0), np.empty(0, dtype=np.int64)))


@njit(cache=True, nogil=True)
def _walk(cost, budget, limit, quanta_out, left_out, shell_out):  # type: ignore[no-untyped-def]
    """Walk the sets with cost <= budget depth first, at most limit + 1; returns their number and writes
    (quanta, budget left, shell) of each while there is room. Some 10 ns a set: from a set only its
    last raised index and later ones are raised, and the first that is too dear ends the row."""
    indices, width = cost.shape
    quanta = np.zeros(indices, dtype=np.uint16)
    trail = np.empty(indices * width, dtype=np.int64)
    left, total, shell, up = budget, 0, 0, 0
    while total <= limit:
        if total < len(left_out):
            for i in range(indices):
                quanta_out[total, i] = quanta[i]
            left_out[total], shell_out[total] = left, shell
        total += 1
        while True:
            step = np.inf
            if up < indices and quanta[up] + 1 < width:
                step = cost[up, quanta[up] + 1] - cost[up, quanta[up]]
            if step <= left:
                break
            if up < indices and quanta[up] > 0:
                up += 1
                continue
            if shell == 0:
                return total
            shell -= 1
            up = trail[shell]
            left += cost[up, quanta[up]] - cost[up, quanta[up] - 1]
            quanta[up] -= 1
            up += 1
        trail[shell] = up
        shell += 1
        left -= step
        quanta[up] += 1
    return total


def lower_neighbours(quanta: NDArray[np.uint16]) -> Neighbours:
    """Where the sets one quantum below each set stand in a list (K, d) that holds them all.

    Every set has a key: the sum of its quanta times a random integer of each index, modulo 2^64. When
    all keys differ, which is checked, a key finds the right set. They are looked up in a table of open
    addresses. Some 50 ns a neighbour.
    """
    at = np.zeros(len(quanta) + 1, dtype=np.uint64)
    at[1:] = np.cumsum(np.count_nonzero(quanta, axis=1))
    place, index = np.empty(int(at[-1]), np.uint64), np.empty(int(at[-1]), np.uint64)
    root = np.empty(int(at[-1]))
    random = np.random.default_rng(1)
    bits = int(2 * len(quanta)).bit_length()
    while True:
        factor = random.integers(0, 2**64, size=quanta.shape[1], dtype=np.uint64)
        slots = np.full(1 << bits, -1, dtype=np.int64)
        if _look_up(quanta, factor, slots, 64 - bits, place, index, root):
            return at, place, index, root


@njit(cache=True, nogil=True)
def _look_up(quanta, factor, slots, shift, place, index, root):  # type: ignore[no-untyped-def]
    """Fill place, index and root; False when two sets have the same key."""
    count, indices = quanta.shape
    mask = len(slots) - 1
    key = np.empty(count, dtype=np.uint64)
    for k in range(count):
        own = np.uint64(0)
        for i in range(indices):
            own += np.uint64(quanta[k, i]) * factor[i]
        key[k] = own
        slot = np.int64(own >> np.uint64(shift))
        while slots[slot] >= 0:
            if key[slots[slot]] == own:
                return False
            slot = (slot + 1) & mask
        slots[slot] = k
    e = 0
    for k in range(count):
        for i in range(indices):
            if quanta[k, i] > 0:
                wanted = key[k] - factor[i]
                slot = np.int64(wanted >> np.uint64(shift))
                while key[slots[slot]] != wanted:
                    slot = (slot + 1) & mask
                place[e], index[e], root[e] = slots[slot], i, np.sqrt(np.float64(quanta[k, i]))
                e += 1
    return True
