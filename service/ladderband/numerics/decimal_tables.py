"""Tables of overlaps, factors and matrix elements with a promised number of significant digits."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import flint
import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.balls import (
    BallTable,
    ExactPair,
    ball_table,
    exactly_zero,
    working_precision,
)
from ladderband.numerics.decimals import BITS_PER_DIGIT, ZERO, Decimal, DecimalRounder
from ladderband.numerics.matrix_elements import Operator, apply_operator

EXACT_ZERO_QUANTA = 400
"""v + n up to which an undecided overlap is tried in rational arithmetic (about 10 ms there)."""


@dataclass(frozen=True, slots=True)
class Undecided:
    """An element whose digits were not decided; it is given as 0 and lies within ``bound`` of 0."""

    table: str
    v_initial: int
    v_final: int
    bound: str


@dataclass(frozen=True)
class DecimalTables:
    """Rows v_initial of columns v_final; every Decimal has exactly the digits asked for, or is 0."""

    overlaps: list[list[Decimal]]
    factors: list[list[Decimal]]
    sums: list[Decimal]
    elements: list[list[Decimal]] | None
    undecided: tuple[Undecided, ...]
    working_bits: int


def start_bits(digits: int, quanta: int) -> int:
    """First working precision: the digits, plus what a table of that many quanta usually loses."""
    return int(digits * BITS_PER_DIGIT) + 40 + quanta // 2


def last_bits(digits: int, quanta: int) -> int:
    """Highest working precision tried: the cost limit of an element close to zero."""
    return 2 * start_bits(digits, quanta) + 4 * quanta + 64


def decimal_tables(
    pair: ExactPair,
    v_initial_max: int,
    v_final_max: int,
    digits: int,
    operator: Operator | None,
    deadline: Deadline,
) -> DecimalTables:
    """All digits of all elements, by raising the working precision until they are decided.

    An overlap that is exactly zero is found as such, by parity or in rational arithmetic, so it is
    given as ``0`` and not as undecided. Elements still undecided at the last precision are listed.

    Cost: 0.6 microseconds an element and row operation at 50 digits, 4 more for rounding and text.
    """
    quanta = v_initial_max + v_final_max
    bits = start_bits(digits, quanta)
    zeros: dict[tuple[int, int], bool] = {}
    while True:
        last = bits >= last_bits(digits, quanta)
        tables = _attempt(
            pair, v_initial_max, v_final_max, digits, operator, bits, zeros, last, deadline
        )
        if tables is not None:
            return tables
        bits = min(2 * bits, last_bits(digits, quanta))


def _attempt(
    pair: ExactPair,
    v_initial_max: int,
    v_final_max: int,
    digits: int,
    operator: Operator | None,
    bits: int,
    zeros: dict[tuple[int, int], bool],
    last: bool,
    deadline: Deadline,
) -> DecimalTables | None:
    """One working precision; None when something is undecided and it was not the last."""
    rows, columns = v_initial_max + 1, v_final_max + 1
    extra_rows, extra_columns = operator.extra if operator else (0, 0)
    with working_precision(bits, columns + extra_columns):
        balls = ball_table(pair, v_initial_max + extra_rows, v_final_max + extra_columns, deadline)
        elements = _elements(balls, operator) if operator else None
        overlaps = [row[:columns] for row in balls[:rows]]
        _settle_zeros(pair, overlaps, zeros)
        rounder = _TableRounder(digits, deadline)
        squares = [[ball * ball for ball in row] for row in overlaps]
        answer = DecimalTables(
            overlaps=rounder.table("overlap_integrals", overlaps),
            factors=rounder.table("franck_condon_factors", squares),
            sums=[row[0] for row in rounder.table("sums", [[_total(row)] for row in squares])],
            elements=rounder.table("matrix_elements", elements) if elements else None,
            undecided=tuple(rounder.undecided),
            working_bits=bits,
        )
    return answer if last or not answer.undecided else None


class _TableRounder:
    """Rounds whole tables and remembers what could not be decided."""

    def __init__(self, digits: int, deadline: Deadline) -> None:
        self._round = DecimalRounder(digits)
        self._deadline = deadline
        self.undecided: list[Undecided] = []

    def table(self, name: str, balls: BallTable) -> list[list[Decimal]]:
        result = []
        for v, row in enumerate(balls):
            self._deadline.check()
            result.append(
                [
                    self._open(name, v, n, row[n]) if value is None else value
                    for n, value in enumerate(map(self._round, row))
                ]
            )
        return result

    def _open(self, name: str, v: int, n: int, ball: flint.arb) -> Decimal:
        bound = flint.arb(ball.abs_upper()).str(3, radius=False)
        self.undecided.append(Undecided(name, v, n, bound))
        return ZERO


def _settle_zeros(pair: ExactPair, overlaps: BallTable, zeros: dict[tuple[int, int], bool]) -> None:
    """Replace balls that contain zero by the exact zero where rational arithmetic proves it."""
    for v, row in enumerate(overlaps):
        for n, ball in enumerate(row):
            if not ball.contains(0) or ball.is_zero() or v + n > EXACT_ZERO_QUANTA:
                continue
            if (v, n) not in zeros:
                zeros[v, n] = exactly_zero(pair, v, n)
            if zeros[v, n]:
                row[n] = flint.arb(0)


def _total(row: list[flint.arb]) -> flint.arb:
    return sum(row, flint.arb(0))


def _elements(balls: BallTable, operator: Operator) -> BallTable:
    size = max(len(balls), len(balls[0])) + 1
    root: Any = np.array([flint.arb(k).sqrt() for k in range(size)], dtype=object)
    table: Any = np.array(balls, dtype=object)
    result: BallTable = apply_operator(table, operator, root, flint.arb(0.5).sqrt()).tolist()
    return result
