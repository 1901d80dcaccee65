r"""Amplitudes of all sets of quanta below a cost, as a tree walked shell by shell in compiled code.

A set of quanta k = (k_1..k_D) has the cost sum_i c_i(k_i), c_i(0) = 0, c_i non-decreasing. The sets
with cost <= C contain every smaller set, so the ladder recursion

.. math::
   \sqrt{q_l+1}\,S(q+e_l) = w_l S(q) + \sum_j M_{lj}\sqrt{q_j}\,S(q-e_j)

never meets a missing amplitude: nothing is taken as zero. A node q has as children q + e_l for its
last raised index up (if its cost allows) and for all later indices up to a limit, because the indices
are sorted by c_l(1). Children stand side by side, so the place of any q + e_l is computed, not
searched, and a whole family is one short product with rows of M. Only nodes with children keep the
places of their lower neighbours q - e_j. No hashing; memory grows with the nodes.

Every amplitude carries a running error bound (Higham, Accuracy and Stability of Numerical Algorithms,
2nd ed., sec. 3.3), proved by induction: with \gamma covering the roundings of one step and
U = E + \gamma |S^|,

.. math::
   E(q+e_l) = \Bigl[|w_l| U(q) + \sum_j |M_{lj}|\sqrt{q_j}\,U(q-e_j)\Bigr] / \sqrt{q_l+1}.

It grows with the quanta in one mode (that is why one-dimensional tables take other routes) and stays
small for the sets of a polyatomic band; the result says how large it is.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import nullcontext
from dataclasses import dataclass
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from ladderband.numerics.ladder import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

COST_UNIT = 2.0**-20
"""Costs and budgets are multiples of this, so every sum of costs is exact in float64 and a set is
below the budget or not whatever the order of its quanta: smaller sets are never missing."""


THREADED_FROM = 50_000
"""Nodes of a tree from which two threads are started (some 0.2 ms)."""

INNER_FROM = 2048
"""Inner nodes of a shell from which it is shared (a shell of that size takes about 0.3 ms)."""

Shell = tuple[NDArray[np.int32], Floats, NDArray[np.int64], NDArray[np.int64]]
"""Nodes of a shell that have children: place, budget left, cuts of the list, lower neighbours."""


@dataclass(frozen=True)
class QuantaTree:
    """K nodes in shell order; node 0 is the vacuum.

    amplitude, error (K,): S(k) and the proven bound of its error. parent, last (K,): k is the quanta
    of the parent plus one of index ``last``. moment (K, 3), moment_error (K, 3): amplitude of the
    transition moment's components, empty (0, 3) when it is constant.
    """

    amplitude: Floats
    error: Floats
    parent: NDArray[np.int32]
    last: NDArray[np.int16]
    moment: Floats
    moment_error: Floats


@njit(cache=True, nogil=True)
def _again(last, quanta, left, cost):  # type: ignore[no-untyped-def]
    """Whether the last raised index may be raised once more."""
    if last < 0 or quanta + 1 >= cost.shape[1]:
        return False
    return cost[last, quanta + 1] - cost[last, quanta] <= left


@njit(cache=True, nogil=True)
def _stop(last, left, single):  # type: ignore[no-untyped-def]
    """First index after ``last`` that may not be raised; ``single`` = sorted costs of one quantum."""
    return max(last + 1, np.searchsorted(single, left, side="right"))


@njit(cache=True, nogil=True)
def _has_children(last, quanta, left, cost, single):  # type: ignore[no-untyped-def]
    """Whether any index from ``last`` on may be raised."""
    if last + 1 < len(single) and single[last + 1] <= left:
        return True
    return _again(last, quanta, left, cost)


@njit(cache=True, nogil=True)
def count_nodes(cost, budget, limit):  # type: ignore[no-untyped-def]
    """Number of sets with cost <= budget, or more than limit: depth first, 8 ns a set, no memory."""
    indices, width = cost.shape
    quanta = np.zeros(indices, dtype=np.int64)
    left = np.empty(indices + 1)
    left[0] = budget
    total = 0
    depth = 0  # the quanta of indices < depth are fixed, all later ones are 0
    while True:
        if depth < indices and cost[depth, 1] <= left[depth]:
            left[depth + 1] = left[depth]
            quanta[depth] = 0
            depth += 1
            continue
        total += 1
        if total > limit:
            return total
        while depth > 0:
            i = depth - 1
            step = np.inf
            if quanta[i] + 1 < width:
                step = cost[i, quanta[i] + 1]
            if step <= left[i]:
                quanta[i] += 1
                left[depth] = left[i] - step
                break
            depth -= 1
        if depth == 0:
            return total


# A lower neighbour q - e_j is one number: its place, the index j and the quanta q_j.
_PLACE, _INDEX, _MASK = 24, 12, 0xFFF


@njit(cache=True, nogil=True)
def _packed(place, index, quanta):  # type: ignore[no-untyped-def]
    return (np.int64(place) << _PLACE) | (np.int64(index) << _INDEX) | np.int64(quanta)


@njit(cache=True, nogil=True)
def _family(q, low, stop, neighbours, M, w, root, nodes, step, value, bound):  # type: ignore[no-untyped-def]
    """sqrt(q_l + 1) times amplitude and error of the children l = low..stop-1 of q."""
    own = nodes[q, 0]
    own_error = nodes[q, 1] + step * abs(own)
    for up in range(low, stop):
        value[up] = w[up] * own
        bound[up] = abs(w[up]) * own_error
    for neighbour in neighbours:
        place = neighbour >> _PLACE
        row = (neighbour >> _INDEX) & _MASK
        factor = root[neighbour & _MASK]
        size = factor * nodes[place, 0]
        size_error = factor * nodes[place, 1] + step * abs(size)
        for up in range(low, stop):
            coefficient = M[row, up]
            value[up] += coefficient * size
            bound[up] += abs(coefficient) * size_error


@njit(cache=True, nogil=True)
def _child_neighbours(q, up, quanta, neighbours, nodes, out, at):  # type: ignore[no-untyped-def]
    """Lower neighbours of k = q + e_l into ``out`` from ``at`` on: k - e_j is child l of q - e_j."""
    for neighbour in neighbours:
        place = np.int64(nodes[neighbour >> _PLACE, 2]) + up
        out[at] = _packed(place, (neighbour >> _INDEX) & _MASK, neighbour & _MASK)
        at += 1
    out[at] = _packed(q, up, quanta)
    return at + 1


@njit(cache=True, nogil=True)
def _moment_of(child, neighbours, terms, root, found, step):  # type: ignore[no-untyped-def]
    """Moment amplitude m_0 S(k) + sum_j m_j sqrt(k_j) S(k - e_j) of one node, and its bound."""
    constant, linear = terms
    nodes, moment, moment_error = found
    for x in range(3):
        value = constant[x] * nodes[child, 0]
        size = abs(value)
        bound = abs(constant[x]) * nodes[child, 1]
        for neighbour in neighbours:
            place = neighbour >> _PLACE
            factor = linear[x, (neighbour >> _INDEX) & _MASK] * root[neighbour & _MASK]
            value += factor * nodes[place, 0]
            size += abs(factor * nodes[place, 0])
            bound += abs(factor) * nodes[place, 1]
        moment[child, x] = value
        moment_error[child, x] = 1.01 * bound + step * size


@njit(cache=True, nogil=True)
def _plan(begin, end, shell, last, cost, single):  # type: ignore[no-untyped-def]
    """(children, children that have children, their neighbours) of inner nodes begin..end-1."""
    inner, left, at, lists = shell
    children, parents, entries = 0, 0, 0
    for s in range(begin, end):
        tail = last[inner[s]]
        size = at[s + 1] - at[s]
        own = lists[at[s + 1] - 1] & _MASK if size else 0
        if _again(tail, own, left[s], cost):
            children += 1
            rest = left[s] - (cost[tail, own + 1] - cost[tail, own])
            if _has_children(tail, own + 1, rest, cost, single):
                parents += 1
                entries += size
        stop = _stop(tail, left[s], single)
        children += stop - tail - 1
        for up in range(tail + 1, stop):
            if _has_children(up, 1, left[s] - single[up], cost, single):
                parents += 1
                entries += size + 1
    return children, parents, entries


@njit(cache=True, nogil=True)
def _fill(begin, end, free, filled, entry, shell, below, tree, ladder, cost, moments, step):  # type: ignore[no-untyped-def]
    """Children of the inner nodes begin..end-1, written from ``free``, ``filled``, ``entry`` on.

    Reads only finished shells and writes only its own places, so slices may run side by side.
    """
    inner, left, at, lists = shell
    new_inner, new_left, new_at, new_lists = below
    nodes, parent, last = tree
    M, w, root, single = ladder
    constant, linear, moment, moment_error = moments
    varies = len(linear) > 0
    terms = (constant, linear)
    found = (nodes, moment, moment_error)
    value, bound = np.empty(len(w)), np.empty(len(w))
    own_list = np.empty(len(w) + 1, dtype=np.int64)
    for s in range(begin, end):
        q = inner[s]
        neighbours = lists[at[s] : at[s + 1]]
        tail = last[q]
        own = neighbours[-1] & _MASK if len(neighbours) else 0
        raised = _again(tail, own, left[s], cost)
        low = tail if raised else tail + 1
        stop = _stop(tail, left[s], single)
        nodes[q, 2] = free - low
        _family(q, low, stop, neighbours, M, w, root, nodes, step, value, bound)
        for up in range(low, stop):
            quanta = 1
            rest = left[s] - single[up]
            others = neighbours
            if up == tail:
                quanta = own + 1
                rest = left[s] - (cost[up, quanta] - cost[up, own])
                others = neighbours[:-1]
            scale = 1.0 / root[quanta]
            nodes[free, 0] = value[up] * scale
            nodes[free, 1] = bound[up] * scale
            parent[free] = q
            last[free] = up
            if varies:
                size = _child_neighbours(q, up, quanta, others, nodes, own_list, 0)
                _moment_of(free, own_list[:size], terms, root, found, step)
            if _has_children(up, quanta, rest, cost, single):
                entry = _child_neighbours(q, up, quanta, others, nodes, new_lists, entry)
                new_inner[filled] = free
                new_left[filled] = rest
                filled += 1
                new_at[filled] = entry
            free += 1


def grow_tree(
    M: Floats,
    w: Floats,
    start: float,
    start_error: float,
    cost: Floats,
    budget: float,
    nodes: int,
    constant: Floats,
    linear: Floats,
) -> QuantaTree:
    """Build the tree of exactly ``nodes`` sets (from :func:`count_nodes`) with their amplitudes.

    M (D, D), w (D,), cost (D, width): indices sorted by cost[:, 1], costs in ``COST_UNIT``s, at most 4095
    quanta and indices; start = c with relative error ``start_error``. constant (3,), linear (3, D): the
    moment's terms, or linear (0, D) without. Large shells are shared by two threads.
    """
    single = cost[:, 1].copy()
    root = np.sqrt(np.arange(cost.shape[1] + 2, dtype=np.float64))
    # amplitude, error, and the place of the (imagined) child 0: child l stands l places further.
    # Side by side, because they are read together at random places.
    records = np.empty((nodes, 3))
    parent, last = np.empty(nodes, dtype=np.int32), np.empty(nodes, dtype=np.int16)
    records[0], parent[0], last[0] = (start, start_error * abs(start), 0.0), 0, -1
    moment, moment_error = _moment_arrays(constant, linear, start, start_error * abs(start), nodes)
    tree = (records, parent, last)
    ladder = (M, w, root, single)
    moments = (constant, linear, moment, moment_error)
    shell = (
        np.zeros(1 if nodes > 1 else 0, dtype=np.int32),
        np.full(1, budget),
        np.zeros(2, dtype=np.int64),
        np.empty(0, dtype=np.int64),
    )
    free, quanta = 1, 0
    with ThreadPoolExecutor(2) if nodes >= THREADED_FROM else nullcontext() as pool:
        while len(shell[0]):
            quanta += 1
            # roundings of one element: a product and a sum for each of at most ``quanta``
            # neighbours, sqrt, factor, scale, and 16 for the coefficients M, w themselves
            step = 1.01 * (quanta + 22.0) * UNIT_ROUNDOFF
            shell, free = _next_shell(pool, shell, free, tree, ladder, cost, moments, step)
    amplitude, error = np.ascontiguousarray(records[:, :2].T)
    return QuantaTree(amplitude, error, parent, last, moment, moment_error)


def _next_shell(
    pool: ThreadPoolExecutor | None,
    shell: Shell,
    free: int,
    tree: tuple[Any, ...],
    ladder: tuple[Any, ...],
    cost: Floats,
    moments: tuple[Any, ...],
    step: float,
) -> tuple[Shell, int]:
    """The shell above ``shell``, its nodes written from place ``free`` on; and the next free place."""
    last, single = tree[2], ladder[3]
    slices = _slices(len(shell[0]), pool is not None)
    plans = _each(pool, lambda a, b: _plan(a, b, shell, last, cost, single), slices)
    offsets = np.cumsum([(0, 0, 0), *plans], axis=0).tolist()
    below = _empty_shell(offsets[-1][1], offsets[-1][2])
    jobs = [
        (*piece, free + offset[0], offset[1], offset[2])
        for piece, offset in zip(slices, offsets, strict=False)
    ]
    _each(pool, lambda *job: _fill(*job, shell, below, tree, ladder, cost, moments, step), jobs)
    return below, free + offsets[-1][0]


def _moment_arrays(
    constant: Floats, linear: Floats, start: float, start_error: float, nodes: int
) -> tuple[Floats, Floats]:
    """Arrays for the moment's amplitudes, the vacuum's filled in; empty without a moment."""
    if not len(linear):
        return np.empty((0, 3)), np.empty((0, 3))
    moment, error = np.empty((nodes, 3)), np.empty((nodes, 3))
    moment[0] = constant * start
    error[0] = np.abs(constant) * (1.01 * start_error + 30 * UNIT_ROUNDOFF * start)
    return moment, error


def _empty_shell(parents: int, entries: int) -> Shell:
    return (
        np.empty(parents, dtype=np.int32),
        np.empty(parents),
        np.zeros(parents + 1, dtype=np.int64),
        np.empty(entries, dtype=np.int64),
    )


def _slices(count: int, shared: bool) -> list[tuple[int, int]]:
    """One slice of a small shell, two of a large one when there are threads to share it."""
    if not shared or count < INNER_FROM:
        return [(0, count)]
    return [(0, count // 2), (count // 2, count)]


def _each(
    pool: ThreadPoolExecutor | None, action: Callable[..., Any], jobs: Sequence[tuple[int, ...]]
) -> list[Any]:
    """``action`` on every job, side by side when there are several (the kernels hold no lock)."""
    if pool is None or len(jobs) == 1:
        return [action(*job) for job in jobs]
    return list(pool.map(lambda job: action(*job), jobs))


@njit(cache=True, nogil=True)
def fill_quanta(chosen, parent, last, out):  # type: ignore[no-untyped-def]
    """Quanta of the chosen nodes, one row each, by walking to the root."""
    for row in range(len(chosen)):
        node = chosen[row]
        while node > 0:
            out[row, last[node]] += 1
            node = parent[node]


def quanta_of(tree: QuantaTree, chosen: NDArray[np.int64], indices: int) -> NDArray[np.int32]:
    """Quanta (len(chosen), D) of chosen nodes, in the tree's order of indices."""
    out = np.zeros((len(chosen), indices), dtype=np.int32)
    fill_quanta(chosen, tree.parent, tree.last, out)
    return out
