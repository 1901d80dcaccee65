"""Certified overlap tables against the same recursion in mpmath: ratios measured in one run.

Run: python tests/benchmarks/overlaps.py

mpmath runs the weighted recursion with its gmpy2 backend and no bound; everything of ours includes
its proven bound. Each figure is the best of several repeats, the two sides interleaved.
"""

from __future__ import annotations

import os

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # as `ladderband serve` sets it

import time
from collections.abc import Callable
from fractions import Fraction

import mpmath
import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.balls import ExactPair, ball_table, working_precision
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.decimal_tables import decimal_tables, start_bits
from ladderband.numerics.grid import grid_tables
from ladderband.numerics.ladder import ladder_tables, pair_coefficients
from ladderband.numerics.oscillators import one_pair
from ladderband.numerics.warm import warm

RATIO, DELTA = 0.9, 2.0
PAIR = one_pair(1000.0, 1000.0 * RATIO, DELTA)
EXACT = ExactPair(Fraction(1000.0 * RATIO) / 1000, Fraction(DELTA) ** 2, 1, False)


def mpmath_table(top: int, dps: int) -> list[list[mpmath.mpf]]:
    """The weighted recursion, coefficients of rows and columns worked out once."""
    mp = mpmath.MPContext()
    mp.dps = dps
    t, delta = mp.mpf(RATIO), mp.mpf(DELTA)
    w_yy, w_yz = (1 - t) / (1 + t), 2 * mp.sqrt(t) / (1 + t)
    w_z = mp.sqrt(2) * delta / (1 + t)
    w_y = -mp.sqrt(t) * w_z
    root = [mp.sqrt(k) for k in range(top + 1)]
    inverse = [mp.mpf(1) / k if k else mp.mpf(0) for k in range(2 * top + 1)]
    along = [w_z * root[n] for n in range(top + 1)]
    along_two = [-w_yy * root[n] * root[n - 1] if n else mp.mpf(0) for n in range(top + 1)]
    zero = [mp.mpf(0)] * (top + 1)
    below, two_below, table = zero, zero, []
    for v in range(top + 1):
        a, b = w_y * root[v], w_yy * root[v] * root[max(v - 1, 0)]
        cross = [2 * w_yz * root[v] * root[n] for n in range(top + 1)]
        row: list[mpmath.mpf] = []
        for n in range(top + 1):
            if v == n == 0:
                row.append(mp.sqrt(w_yz) * mp.exp(-(delta**2) / (2 * (1 + t))))
                continue
            value = a * below[n] + b * two_below[n]
            if n:
                value += cross[n] * below[n - 1] + along[n] * row[n - 1]
            if n > 1:
                value += along_two[n] * row[n - 2]
            row.append(value * inverse[v + n])
        table.append(row)
        below, two_below = row, below
    return table


def best(action: Callable[[], object], repeats: int) -> float:
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        action()
        times.append(time.perf_counter() - start)
    return min(times)


def compare(
    name: str, ours: Callable[[], object], theirs: Callable[[], object], goal: float
) -> None:
    ours()
    mine = other = float("inf")
    for _ in range(3):
        mine = min(mine, best(ours, 5))
        other = min(other, best(theirs, 1))
    print(
        f"{name:58s} {1e3 * mine:9.3f} ms  {1e3 * other:9.1f} ms  {other / mine:7.1f}x  (goal {goal:g}x)"
    )


def strings(table: list[list[mpmath.mpf]], digits: int) -> list[list[str]]:
    return [[mpmath.nstr(value, digits) for value in row] for row in table]


def balls() -> None:
    with working_precision(start_bits(50, 198), 100):
        ball_table(EXACT, 99, 99, Deadline.none())


def route_times(top: int, repeats: int) -> tuple[float, float]:
    coefficients = pair_coefficients(PAIR)
    tables, bounds, which = np.zeros((1, top + 1, top + 1)), np.zeros(1), np.array([0])
    ladder = best(lambda: ladder_tables(coefficients, top, top), repeats)
    grid = best(lambda: grid_tables(coefficients, which, tables, bounds, 1e-10), repeats)
    return ladder, grid


def main() -> None:
    warm()
    forever = Deadline.none()
    print(f"mpmath {mpmath.__version__}, backend {mpmath.libmp.BACKEND}")
    print(f"{'':58s} {'ours':>12s} {'mpmath':>12s}")
    compare(
        "200 x 200 float64 with bound / mpmath 16 digits",
        lambda: certified_tables(PAIR, 199, 199, 1e-10, forever),
        lambda: mpmath_table(199, 16),
        200,
    )
    compare(
        "100 x 100, 50 digits: balls / numbers without a bound",
        balls,
        lambda: mpmath_table(99, 50),
        15,
    )
    compare(
        "100 x 100, 50 digits: all three tables as decided strings",
        lambda: decimal_tables(EXACT, 99, 99, 50, None, forever),
        lambda: [strings(mpmath_table(99, 50), 50) for _ in range(2)],
        0,
    )
    print("\nroutes, float64                 ladder            grid")
    for top in (20, 60, 200, 600, 2000):
        ladder, grid = route_times(top, 20 if top <= 200 else 2)
        elements = (top + 1) ** 2
        print(
            f"{top:5d} x {top:<5d} {1e3 * ladder:10.3f} ms {1e9 * ladder / elements:6.1f} ns/element"
            f" {1e3 * grid:10.3f} ms {1e9 * grid / elements:6.1f} ns/element"
        )


if __name__ == "__main__":
    main()
