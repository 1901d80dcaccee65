r"""Amplitudes of all sets of quanta below a cost, row by row in compiled code.

The sets are the pairs of :mod:`quanta_lists`: a row holds the amplitudes S(q, b) of one outer set q
with the inner sets b of lowest cost. Raising an outer index l makes a row from the rows below it,

.. math::
   \sqrt{q_l+1}\,S(q+e_l, b) = w_l S(q, b) + \sum_j M_{lj}\sqrt{q_j}\,S(q-e_j, b)
                               + \sum_i M_{li}\sqrt{b_i}\,S(q, b-e_i),

j over the outer and i over the inner indices: the first two terms are products of whole rows, the last
reads one short row at places that are the same for all rows. The rows below are never shorter, so no
amplitude is missing and nothing is taken as zero. The index raised is the one with the most quanta: the
division by its root damps what errors came in. Memory: two float64 a set.

Every amplitude carries a running error bound (Higham, Accuracy and Stability of Numerical Algorithms,
2nd ed., sec. 3.3), proved by induction. Let U(k) >= |S^(k) - S(k)| + gamma |S^(k)| with gamma covering
the roundings of one step (a product and a sum for each of at most |k| terms, the root, the division and
the relative error of the coefficients M, w). Then

.. math::
   U(q+e_l) = \Bigl[|w_l| U(q) + \sum_j |M_{lj}|\sqrt{q_j}\,U(q-e_j)\Bigr] / \sqrt{q_l+1}
              + \gamma |\hat S(q+e_l)|,

the sum over outer and inner indices alike: a term c S^ computed with relative error gamma is wrong by at
most |c| (|S^ - S| + gamma |S^|) <= |c| U. The bound's own roundings, all of positive numbers, are below
the factor ``1 + gamma`` it is given. It grows with the quanta in one mode (that is why one-dimensional
tables take other routes) and stays small for the sets of a polyatomic band; the result says how large
it is.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from contextlib import nullcontext
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from ladderband.numerics.quanta_lists import QuantaPairs, lower_neighbours
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

THREADED_FROM = 100_000
"""Sets of a shell of rows from which a second thread takes half of it (1 ms; waking it takes 0.1)."""


@dataclass(frozen=True)
class Ladder:
    """What the recursion needs: M (D, D), w (D,), the vacuum's amplitude ``start`` and its error.

    constant (3,), linear (3, D): the transition moment's terms; linear (0, D) when it is constant.
    """

    M: Floats
    w: Floats
    start: float
    start_error: float
    constant: Floats
    linear: Floats


@dataclass(frozen=True)
class QuantaTable:
    """N amplitudes in the order of ``pairs``.

    amplitude, error (N,): S(k) and the proven bound of its error. moment, moment_error (3, N):
    amplitudes of the transition moment's components; empty (0, N) when it is constant.
    """

    pairs: QuantaPairs
    amplitude: Floats
    error: Floats
    moment: Floats
    moment_error: Floats


@njit(cache=True, nogil=True)
def _raised(p, length, own, rows, outer, inner, start, found, out, out_bound):  # type: ignore[no-untyped-def]
    """own S(p, b) + sum_j rows[0]_j sqrt(p_j) S(p - e_j, b) + sum_i rows[1]_i sqrt(b_i) S(p, b - e_i)
    and its bound for b < length, into ``out`` and ``out_bound``."""
    outer_at, outer_place, outer_index, outer_root = outer
    inner_at, inner_place, inner_index, inner_root = inner
    cross = rows[1]
    value, bound = found[0][start[p] :], found[1][start[p] :]
    size = abs(own)
    first = inner_at[0]
    for b in range(length):
        total = own * value[b]
        limit = size * bound[b]
        last = inner_at[b + 1]
        for e in range(first, last):
            factor = cross[inner_index[e]] * inner_root[e]
            place = inner_place[e]
            total += factor * value[place]
            limit += abs(factor) * bound[place]
        first = last
        out[b] = total
        out_bound[b] = limit
    for e in range(outer_at[p], outer_at[p + 1]):
        factor = rows[0][outer_index[e]] * outer_root[e]
        size = abs(factor)
        below = start[outer_place[e]]
        value, bound = found[0][below : below + length], found[1][below : below + length]
        for b in range(length):
            out[b] += factor * value[b]
            out_bound[b] += size * bound[b]


@njit(cache=True, nogil=True)
def _largest(entries, neighbours):  # type: ignore[no-untyped-def]
    """The entry with the most quanta."""
    best = entries[0]
    for e in range(entries[0], entries[1]):
        if neighbours[3][e] > neighbours[3][best]:
            best = e
    return best


@njit(cache=True, nogil=True)
def _first_row(length, M, w, inner, found, step):  # type: ignore[no-untyped-def]
    """The row of the outer vacuum, by raising inner indices; the sets below stand before each set."""
    value, bound = found
    at, place, index, root = inner
    for b in range(1, length):
        best = _largest((at[b], at[b + 1]), inner)
        p, up = place[best], index[best]
        total = w[up] * value[p]
        limit = abs(w[up]) * bound[p]
        for e in range(at[p], at[p + 1]):
            factor = M[up, index[e]] * root[e]
            total += factor * value[place[e]]
            limit += abs(factor) * bound[place[e]]
        value[b] = total / root[best]
        bound[b] = (1.0 + step) * (limit / root[best]) + step * abs(value[b])


@njit(cache=True, nogil=True)
def _rows(begin, end, M_outer, M_cross, w, outer, inner, start, found, step):  # type: ignore[no-untyped-def]
    """The rows begin..end-1 of one shell, which read only finished shells."""
    value, bound = found
    for q in range(begin, end):
        best = _largest((outer[0][q], outer[0][q + 1]), outer)
        p, up = outer[1][best], outer[2][best]
        rows = (M_outer[up], M_cross[up])
        row, row_bound = value[start[q] : start[q + 1]], bound[start[q] : start[q + 1]]
        _raised(p, len(row), w[up], rows, outer, inner, start, found, row, row_bound)
        scale = 1.0 / outer[3][best]
        for b in range(len(row)):
            row[b] *= scale
            row_bound[b] = (1.0 + step) * (scale * row_bound[b]) + step * abs(row[b])


@njit(cache=True, nogil=True)
def _moment_rows(begin, end, constant, rows, outer, inner, start, found, target, step):  # type: ignore[no-untyped-def]
    """Moment amplitudes m_0 S(k) + sum_j m_j sqrt(k_j) S(k - e_j) of one component."""
    for q in range(begin, end):
        row, row_bound = target[0][start[q] : start[q + 1]], target[1][start[q] : start[q + 1]]
        _raised(q, len(row), constant, rows, outer, inner, start, found, row, row_bound)
        for b in range(len(row)):
            row_bound[b] *= 1.0 + step


def amplitude_table(pairs: QuantaPairs, ladder: Ladder) -> QuantaTable:
    """Amplitudes of all pairs; large shells of rows are shared by two threads.

    Cost: 10 to 25 ns a set with its bound, neighbours of the two lists included.
    """
    with ThreadPoolExecutor(1) if pairs.count >= THREADED_FROM else nullcontext() as second:
        return _table(pairs, ladder, second)


def _table(pairs: QuantaPairs, ladder: Ladder, second: ThreadPoolExecutor | None) -> QuantaTable:
    outer, inner = lower_neighbours(pairs.outer.quanta), lower_neighbours(pairs.inner.quanta)
    shell = pairs.outer.shell
    most = int(shell[-1]) + int(pairs.inner.shell.max())
    # a product and a sum for each of at most ``most`` terms, root, product, scale, and 16 for the
    # coefficients M, w themselves
    step = 1.01 * (2.0 * most + 24.0) * UNIT_ROUNDOFF
    found = np.empty(pairs.count), np.empty(pairs.count)
    found[0][0] = ladder.start
    found[1][0] = (ladder.start_error + step) * abs(ladder.start)
    M_inner, M_outer, M_cross = _blocks(ladder.M, pairs)
    w_inner, w_outer = ladder.w[pairs.inner_index], ladder.w[pairs.outer_index]
    _first_row(int(pairs.start[1]), M_inner, w_inner, inner, found, step)
    edges = np.searchsorted(shell, np.arange(1, shell[-1] + 2)).tolist()
    arguments = (M_outer, M_cross, w_outer, outer, inner, pairs.start, found, step)
    for begin, end in pairwise(edges):
        _shared(second, pairs.start, begin, end, _rows, *arguments)
    moment = _moments(second, pairs, ladder, outer, inner, found, step)
    return QuantaTable(pairs, *found, *moment)


def _blocks(M: Floats, pairs: QuantaPairs) -> tuple[Floats, Floats, Floats]:
    """M among the inner indices, among the outer ones, and from outer (rows) to inner."""
    inner, outer = pairs.inner_index, pairs.outer_index
    groups = ((inner, inner), (outer, outer), (outer, inner))
    first, second, cross = (np.ascontiguousarray(M[np.ix_(*group)]) for group in groups)
    return first, second, cross


def _moments(
    second: ThreadPoolExecutor | None,
    pairs: QuantaPairs,
    ladder: Ladder,
    outer: Any,
    inner: Any,
    found: tuple[Floats, Floats],
    step: float,
) -> tuple[Floats, Floats]:
    """The moment's amplitudes and their bounds, (3, N), or (0, N) without a moment."""
    components = len(ladder.linear)
    value, bound = np.empty((components, pairs.count)), np.empty((components, pairs.count))
    for x in range(components):
        linear = ladder.linear[x]
        rows = (linear[pairs.outer_index], linear[pairs.inner_index])
        arguments = (rows, outer, inner, pairs.start, found, (value[x], bound[x]), step)
        every = len(pairs.outer.cost)
        _shared(second, pairs.start, 0, every, _moment_rows, ladder.constant[x], *arguments)
    return value, bound


def _shared(
    second: ThreadPoolExecutor | None,
    start: NDArray[np.int64],
    begin: int,
    end: int,
    kernel: Callable[..., None],
    *arguments: Any,
) -> None:
    """Run a kernel over the rows begin..end-1; half of the work in a second thread when worth it."""
    if second is None or start[end] - start[begin] < THREADED_FROM:
        kernel(begin, end, *arguments)
        return
    middle = int(np.searchsorted(start, (start[begin] + start[end]) // 2))
    other = second.submit(kernel, middle, end, *arguments)
    kernel(begin, middle, *arguments)
    other.result()
