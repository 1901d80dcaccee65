"""Which route answers: the cheapest whose proven bound meets the request.

A float64 table is tried by the ladder (5 ns an element), then on the grid (about M/20 ns an element,
M grid points), then in balls rounded to float64. The routes are independent of one another, so their
tables must lie inside each other's bounds: a property test.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.balls import ExactPair, ball_table, working_precision
from ladderband.numerics.errors import PrecisionNotReached
from ladderband.numerics.grid import grid_tables
from ladderband.numerics.ladder import ladder_tables, pair_coefficients
from ladderband.numerics.oscillators import OscillatorColumns
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

SMALLEST_TOLERANCE = 2.0 * UNIT_ROUNDOFF
"""Half an ulp of a float64 overlap near 1 can not be undercut; twice that leaves room to prove it."""


@dataclass(frozen=True)
class CertifiedTables:
    """tables (B, V + 1, N + 1) with |true - value| <= bounds[b], (B,), and the route of each pair."""

    tables: Floats
    bounds: Floats
    routes: tuple[str, ...]

    @property
    def route(self) -> str:
        """The routes used, in one word or joined by ``+``."""
        return "+".join(sorted(set(self.routes)))


BALL_ELEMENTS = 200_000
"""Largest table (elements) that is tried in balls when the grid misses: about 0.5 s."""


def grid_reach(v_initial_max: int, v_final_max: int) -> float:
    """A tolerance the grid is sure to meet, from a fit: below it, expect balls (only for the cost)."""
    return 1e-12 + 4.9e-14 * max(v_initial_max, v_final_max)


def ladder_is_hopeless(v_initial_max: int, v_final_max: int, tolerance: float) -> bool:
    """Whether the ladder's bound is sure to miss: rho_l >= 24 u l |S_{l-2}| with shells of about 0.3.

    Only saves the try; the bound itself decides. A single row or column decays and is never hopeless.
    """
    shells = 2 * min(v_initial_max, v_final_max)
    return 4.0 * UNIT_ROUNDOFF * shells * shells > tolerance


def certified_tables(
    pairs: OscillatorColumns,
    v_initial_max: int,
    v_final_max: int,
    tolerance: float,
    deadline: Deadline,
) -> CertifiedTables:
    """Overlap integrals <v|n> of every pair, each within a proven absolute bound <= tolerance.

    Raises
    ------
    PrecisionNotReached
        The tolerance is below what float64 can hold, or below the grid's bound for a table too large
        for balls.
    """
    if tolerance < SMALLEST_TOLERANCE:
        raise PrecisionNotReached(
            f"An absolute bound of {tolerance:g} is finer than a float64 result can hold "
            f"({SMALLEST_TOLERANCE:.2g}); ask for digits instead.",
            requested=f"{tolerance:g}",
            reached=f"{SMALLEST_TOLERANCE:.2g}",
        )
    coefficients = pair_coefficients(pairs)
    names = ["ladder"] * len(pairs)
    if ladder_is_hopeless(v_initial_max, v_final_max, tolerance):
        tables = np.zeros((len(pairs), v_initial_max + 1, v_final_max + 1))
        bounds = np.full(len(pairs), np.inf)
    else:
        tables, bounds = ladder_tables(coefficients, v_initial_max, v_final_max)
    (missed,) = (bounds > tolerance).nonzero()
    for begin in range(0, len(missed), 64):  # the deadline is seen between chunks
        deadline.check()
        grid_tables(coefficients, missed[begin : begin + 64], tables, bounds, tolerance)
    for index in missed.tolist():
        names[index] = "grid"
        if bounds[index] > tolerance:
            deadline.check()
            _admit_balls(tables[index].size, float(bounds[index]), tolerance)
            pair = ExactPair.of(pairs, index)
            tables[index], bounds[index] = _rounded_balls(
                pair, v_initial_max, v_final_max, tolerance, deadline
            )
            names[index] = "balls"
    return CertifiedTables(tables, bounds, tuple(names))


def _admit_balls(elements: int, bound: float, tolerance: float) -> None:
    if elements > BALL_ELEMENTS:
        raise PrecisionNotReached(
            f"The best proven bound of this table in float64 is {bound:.2g}, above the tolerance "
            f"{tolerance:.2g}, and it is too large for exact arithmetic. Raise the tolerance or ask "
            "for fewer quanta.",
            requested=f"{tolerance:.2g}",
            reached=f"{bound:.2g}",
        )


def _rounded_balls(
    pair: ExactPair, v_initial_max: int, v_final_max: int, tolerance: float, deadline: Deadline
) -> tuple[Floats, float]:
    """One table in balls, rounded to float64; the precision is raised until the radii suffice."""
    bits = 96 + (v_initial_max + v_final_max)
    while True:
        with working_precision(bits, v_final_max + 1):
            rows = ball_table(pair, v_initial_max, v_final_max, deadline)
            radius = max(float(ball.rad().upper()) for row in rows for ball in row)
            table = np.array([[float(ball) for ball in row] for row in rows])
        # midpoint to double: half an ulp of a number below 1; 1e-300: underflow
        bound = 1.0001 * (radius + UNIT_ROUNDOFF * float(np.abs(table).max())) + 1e-300
        if bound <= tolerance:
            return table, bound
        bits *= 2
