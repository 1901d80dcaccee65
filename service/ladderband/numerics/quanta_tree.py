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

from dataclasses import dataclass

import numpy as np
from numba import njit
from numpy.typing import NDArray

from ladderband.numerics.ladder import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

COST_UNIT = 2.0**-20
"""Costs and budgets are multiples of this, so every sum of costs is exact in float64 and a set is
below the budget or not whatever the order of its quanta: smaller sets are never missing."""


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


@njit(cache=True, nogil=True)
def _family(q, span, again, stop, last, first, old, M, w, amplitude, error, scale, step):  # type: ignore[no-untyped-def]
    """Amplitudes and errors of all children of q; factor[e] = sqrt(q_j) of its lower neighbours.

    ``scale`` = 1/sqrt(q_last + 1) for the child that raises the last index; ``step`` = gamma.
    """
    a, b = span
    index, _, place, factor = old
    begin = last + 1
    base = first + (1 if again else 0)
    own = amplitude[q]
    own_error = error[q] + step * abs(own)
    for up in range(begin, stop):
        amplitude[base + up - begin] = w[up] * own
        error[base + up - begin] = abs(w[up]) * own_error
    value = 0.0
    bound = 0.0
    if again:
        value = w[last] * own
        bound = abs(w[last]) * own_error
    for e in range(a, b):
        other = place[e]
        size = factor[e] * amplitude[other]
        size_error = factor[e] * error[other] + step * abs(size)
        row = index[e]
        for up in range(begin, stop):
            coefficient = M[row, up]
            amplitude[base + up - begin] += coefficient * size
            error[base + up - begin] += abs(coefficient) * size_error
        if again:
            value += M[row, last] * size
            bound += abs(M[row, last]) * size_error
    if again:
        amplitude[first] = value * scale
        error[first] = bound * scale


@njit(cache=True, nogil=True)
def _moment_family(q, span, low, stop, old, child_base, raised, terms, found, step):  # type: ignore[no-untyped-def]
    """Moment amplitude of the children low..stop-1 of q: m_0 S(k) + sum_j m_j sqrt(k_j) S(k - e_j).

    k = q + e_l: S(k - e_l) = S(q), and S(k - e_j) is child up of q - e_j.
    """
    a, b = span
    index, _, place, factor = old
    constant, linear = terms
    amplitude, error, moment, moment_error = found
    last = index[b - 1] if b > a else -1
    for up in range(low, stop):
        child = child_base[q] + up
        root_up = raised if up == last else 1.0
        for x in range(3):
            term = constant[x] * amplitude[child]
            value = term
            size = abs(term)
            bound = abs(constant[x]) * error[child]
            term = linear[x, up] * root_up * amplitude[q]
            value += term
            size += abs(term)
            bound += abs(linear[x, up]) * root_up * error[q]
            for e in range(a, b):
                if index[e] == up:
                    continue
                other = child_base[place[e]] + up
                term = linear[x, index[e]] * factor[e] * amplitude[other]
                value += term
                size += abs(term)
                bound += abs(linear[x, index[e]]) * factor[e] * error[other]
            moment[child, x] = value
            moment_error[child, x] = 1.01 * bound + step * size


@njit(cache=True, nogil=True)
def _lower_neighbours(q, up, a, b, old, child_base, root, new, entry):  # type: ignore[no-untyped-def]
    """Lower neighbours of k = q + e_l into ``new`` from ``entry`` on; returns the next entry.

    k - e_j is child up of q - e_j, and stands at child_base[q - e_j] + up.
    ``old``, ``new``: (index, quanta, place, factor) columns.
    """
    index, quanta, place, factor = old
    new_index, new_quanta, new_place, new_factor = new
    own = 0
    end = b
    if b > a and index[b - 1] == up:
        own = quanta[b - 1]
        end = b - 1
    for e in range(a, end):
        new_index[entry] = index[e]
        new_quanta[entry] = quanta[e]
        new_place[entry] = child_base[place[e]] + up
        new_factor[entry] = factor[e]
        entry += 1
    new_index[entry] = up
    new_quanta[entry] = own + 1
    new_place[entry] = q
    new_factor[entry] = root[own + 1]
    return entry + 1


@njit(cache=True, nogil=True)
def grow_tree(M, w, start, start_error, cost, budget, nodes, constant, linear):  # type: ignore[no-untyped-def]
    """Build the tree of exactly ``nodes`` sets (from :func:`count_nodes`) with their amplitudes.

    M (D, D), w (D,), cost (D, width): indices sorted by cost[:, 1], costs in ``COST_UNIT``s; start = c
    with relative error ``start_error``. constant (3,), linear (3, D): the moment's terms, or linear
    (0, D) without.
    Returns amplitude, error, parent, last, moment, moment_error.
    """
    width = cost.shape[1]
    single = cost[:, 1].copy()
    amplitude = np.zeros(nodes)
    error = np.zeros(nodes)
    parent = np.zeros(nodes, dtype=np.int32)
    last = np.full(nodes, -1, dtype=np.int16)
    # child up of node q stands at child_base[q] + up: the first of the family is the one that raises
    # the last index (if allowed), so up = last fits the same formula
    child_base = np.zeros(nodes, dtype=np.int32)
    root = np.sqrt(np.arange(width + 2, dtype=np.float64))
    amplitude[0] = start
    error[0] = start_error * abs(start)
    varies = len(linear) > 0
    moment = np.zeros((nodes if varies else 0, 3))
    moment_error = np.zeros((nodes if varies else 0, 3))
    if varies:
        for x in range(3):
            moment[0, x] = constant[x] * start
            moment_error[0, x] = abs(constant[x]) * (1.01 * error[0] + 30 * UNIT_ROUNDOFF * start)
    # the nodes of the shell before that have children, and their lower neighbours, cut by ``at``
    inner = np.zeros(1, dtype=np.int32)
    left = np.full(1, budget)
    at = np.zeros(2, dtype=np.int64)
    old = _columns(0)
    if _stop(-1, budget, single) == 0:
        inner = inner[:0]
    free = 1
    shell = 0
    while len(inner) > 0:
        shell += 1
        # roundings of one element: a product and a sum for each of at most ``shell`` neighbours,
        # sqrt, factor, scale, and 16 for the coefficients M, w themselves
        step = 1.01 * (shell + 22.0) * UNIT_ROUNDOFF
        places, lists = 0, 0
        for s in range(len(inner)):  # families: amplitudes, and where they stand
            q = inner[s]
            a, b = at[s], at[s + 1]
            own = old[1][b - 1] if b > a else 0
            raised = _again(last[q], own, left[s], cost)
            stop = _stop(last[q], left[s], single)
            child_base[q] = free - last[q] - (0 if raised else 1)
            span = (a, b)
            scale = 1.0 / root[own + 1]
            _family(q, span, raised, stop, last[q], free, old, M, w, amplitude, error, scale, step)
            if varies:
                low = last[q] if raised else last[q] + 1
                found = (amplitude, error, moment, moment_error)
                terms = (constant, linear)
                _moment_family(
                    q, span, low, stop, old, child_base, root[own + 1], terms, found, step
                )
            if raised:
                parent[free] = q
                last[free] = last[q]
                rest = left[s] - (cost[last[q], own + 1] - cost[last[q], own])
                if _has_children(last[q], own + 1, rest, cost, single):
                    places += 1
                    lists += b - a
                free += 1
            for up in range(last[q] + 1, stop):
                parent[free] = q
                last[free] = up
                rest = left[s] - single[up]
                if _has_children(up, 1, rest, cost, single):
                    places += 1
                    lists += b - a + 1
                free += 1
        new = _columns(lists)
        new_inner = np.empty(places, dtype=np.int32)
        new_left = np.empty(places)
        new_at = np.zeros(places + 1, dtype=np.int64)
        filled, entry = 0, 0
        for s in range(len(inner)):  # neighbours of those children that have children
            q = inner[s]
            a, b = at[s], at[s + 1]
            own = old[1][b - 1] if b > a else 0
            stop = _stop(last[q], left[s], single)
            raised = _again(last[q], own, left[s], cost)
            for up in range(last[q] if raised else last[q] + 1, stop):
                quanta = 1
                rest = left[s] - single[up]
                if up == last[q]:
                    quanta = own + 1
                    rest = left[s] - (cost[up, own + 1] - cost[up, own])
                if not _has_children(up, quanta, rest, cost, single):
                    continue
                new_inner[filled] = child_base[q] + up
                new_left[filled] = rest
                entry = _lower_neighbours(q, up, a, b, old, child_base, root, new, entry)
                filled += 1
                new_at[filled] = entry
        inner, left, at, old = new_inner, new_left, new_at, new
    return amplitude, error, parent, last, moment, moment_error


@njit(cache=True, nogil=True)
def _columns(size):  # type: ignore[no-untyped-def]
    return (
        np.empty(size, dtype=np.int16),
        np.empty(size, dtype=np.int16),
        np.empty(size, dtype=np.int32),
        np.empty(size, dtype=np.float64),
    )


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
