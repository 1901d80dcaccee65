"""Overlap integrals and Franck-Condon factors of pairs of one-dimensional oscillators."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from ladderband.numerics.accuracy import Accuracy, Deadline
from ladderband.numerics.balls import ExactPair
from ladderband.numerics.certificate import (
    CertifiedTables,
    certified_tables,
    grid_reach,
    ladder_is_hopeless,
)
from ladderband.numerics.decimal_tables import (
    DecimalTables,
    Undecided,
    decimal_tables,
    last_bits,
    start_bits,
)
from ladderband.numerics.decimals import Decimal
from ladderband.numerics.grid import grid_points
from ladderband.numerics.ladder import pair_coefficients
from ladderband.numerics.matrix_elements import Operator, float_matrix_elements
from ladderband.numerics.oscillators import OscillatorColumns, rounded
from ladderband.numerics.progression import thermal_populations
from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats
from ladderband.usecases.limits import Limits

MAX_JSON_DIGITS = 15
"""Up to here a float64 number carries all digits asked for; beyond, decimal strings do."""

DecimalTable = list[list[str]]


@dataclass(frozen=True)
class OverlapsQuestion:
    """v_initial 0..v_initial_max (rows) by v_final 0..v_final_max (columns), a table a pair.

    ``digits``: None for float64 with an absolute bound <= ``tolerance``; else significant digits of
    every element (1..1000). ``temperature_k`` asks for the thermal populations of the rows.
    """

    pairs: OscillatorColumns
    v_initial_max: int
    v_final_max: int
    digits: int | None = None
    tolerance: float = 1e-10
    operator: Operator | None = None
    temperature_k: float | None = None


@dataclass(frozen=True, slots=True)
class UndecidedElement:
    """One element, of one pair of the batch, whose digits the cost limit left open."""

    pair: int
    element: Undecided


@dataclass(frozen=True)
class OverlapsAnswer:
    """Tables of shape (B, v_initial_max + 1, v_final_max + 1).

    Float64 arrays; nested lists of decimal strings (one list a pair) when ``digits`` > 15. ``sums``
    (B, v_initial_max + 1) is each row's sum of Franck-Condon factors over the columns. Each table has
    its accuracy beside it, with one bound a pair. Elements whose digits could not be decided within
    the cost limit are listed in ``undecided`` and given as 0.
    """

    overlap_integrals: Floats | list[DecimalTable]
    sums: Floats | list[list[str]]
    accuracy: Accuracy
    factors_accuracy: Accuracy
    sums_accuracy: Accuracy
    matrix_elements: Floats | list[DecimalTable] | None = None
    matrix_elements_accuracy: Accuracy | None = None
    populations: Floats | None = None
    populations_accuracy: Accuracy | None = None
    undecided: tuple[UndecidedElement, ...] = ()
    warnings: tuple[str, ...] = ()
    decided_factors: Floats | list[DecimalTable] | None = None
    """Factors with ``digits``, each decided by itself; without, they are the squares."""

    @cached_property
    def franck_condon_factors(self) -> Floats | list[DecimalTable]:
        """The factors, made where they are asked for: an answer on record does without."""
        if self.decided_factors is not None:
            return self.decided_factors
        assert isinstance(self.overlap_integrals, np.ndarray)
        return self.overlap_integrals * self.overlap_integrals


def overlaps(question: OverlapsQuestion, limits: Limits, deadline: Deadline) -> OverlapsAnswer:
    """Answer one question.

    Raises
    ------
    AnswerTooLarge
        The tables hold more numbers than the limit.
    CostLimitExceeded
        The estimate is above the limit.
    PrecisionNotReached
        No route met the tolerance.
    DeadlineExceeded
        The deadline passed.
    """
    rows, columns = question.v_initial_max + 1, question.v_final_max + 1
    limits.admit_table(len(question.pairs) * rows * columns)
    limits.admit(
        estimate_seconds(question), "Ask for fewer quanta, digits or pairs in one request."
    )
    if question.digits is None:
        return _float_answer(question, deadline)
    return _decimal_answer(question, question.digits, deadline)


# --- what it costs ---


def estimate_seconds(question: OverlapsQuestion) -> float:
    """Estimated seconds of work, without doing any; the model is fitted in DEVELOPERS.md."""
    extra_rows, extra_columns = question.operator.extra if question.operator else (0, 0)
    rows = question.v_initial_max + 1 + extra_rows
    columns = question.v_final_max + 1 + extra_columns
    if question.digits is not None:
        return len(question.pairs) * _decimal_seconds(rows, columns, question.digits)
    return _float_seconds(question, rows, columns)


def _float_seconds(question: OverlapsQuestion, rows: int, columns: int) -> float:
    """Grid for every pair: an upper limit of what the certificate may choose below 1e-10."""
    count = len(question.pairs)
    elements = rows * columns
    if not ladder_is_hopeless(rows - 1, columns - 1, question.tolerance) and count > 1:
        # a batch of small tables: by the ladder, unless the displacements are large
        coefficients = pair_coefficients(question.pairs)
        strength = coefficients.w_y**2 + coefficients.w_z**2
        grid_share = float(np.mean(strength > 6.0))
    else:
        grid_share = 1.0
    if question.tolerance < grid_reach(rows - 1, columns - 1):
        return count * (1e-3 + 3e-6 * elements)  # balls
    points = grid_points(pair_coefficients(_widest(question.pairs)), 0, rows - 1, columns - 1)
    grid = 2e-5 + 5e-11 * elements * points + 1.5e-9 * (rows + columns) * points
    ladder = 1e-6 + 7e-9 * elements
    return count * (grid_share * grid + ladder) + 1e-8 * count * elements


def _widest(pairs: OscillatorColumns) -> OscillatorColumns:
    """A batch of one, like the pairs' first but undisplaced: its grid is the largest."""
    return OscillatorColumns(
        rounded(pairs.wavenumber_initial_cm1)[:1],
        rounded(pairs.wavenumber_final_cm1)[:1],
        np.zeros(1),
    )


def _decimal_seconds(rows: int, columns: int, digits: int) -> float:
    """Two working precisions of one table."""
    quanta = rows + columns
    bits = start_bits(digits, quanta) + 0.25 * last_bits(digits, quanta)
    element = 7e-6 + 1.5e-9 * bits + 4e-13 * bits * bits
    return 1e-3 + rows * columns * element


# --- float64 ---


def _float_answer(question: OverlapsQuestion, deadline: Deadline) -> OverlapsAnswer:
    extra_rows, extra_columns = question.operator.extra if question.operator else (0, 0)
    found = certified_tables(
        question.pairs,
        question.v_initial_max + extra_rows,
        question.v_final_max + extra_columns,
        question.tolerance,
        deadline,
    )
    table = found.tables[:, : question.v_initial_max + 1, : question.v_final_max + 1]
    elements, elements_accuracy = _float_elements(question, found)
    return OverlapsAnswer(
        overlap_integrals=table,
        sums=np.einsum("bvn,bvn->bv", table, table),
        accuracy=Accuracy(found.bounds, "proven", found.route),
        factors_accuracy=Accuracy(_square_bound(found.bounds), "proven", found.route),
        sums_accuracy=Accuracy(_sum_bound(found.bounds, table.shape[2]), "proven", found.route),
        matrix_elements=elements,
        matrix_elements_accuracy=elements_accuracy,
        populations=_populations(question),
        populations_accuracy=_populations_accuracy(question),
    )


def _square_bound(bounds: Floats) -> Floats:
    """|(S + e)^2 - S^2| <= 2|S||e| + e^2 with |S| <= 1, and the product's rounding."""
    worst: Floats = 2.0 * bounds + bounds**2 + 2.0 * UNIT_ROUNDOFF
    return worst


def _sum_bound(bounds: Floats, columns: int) -> Floats:
    """Sum of the same over a row: sum |S| <= sqrt(columns); rounding of a sum near 1."""
    rounding = (columns + 1) * UNIT_ROUNDOFF * (1.0 + columns * bounds) ** 2
    worst: Floats = 2.0 * np.sqrt(columns) * bounds + columns * bounds**2 + 1.01 * rounding
    return worst


def _float_elements(
    question: OverlapsQuestion, found: CertifiedTables
) -> tuple[Floats | None, Accuracy | None]:
    if question.operator is None:
        return None, None
    elements, bounds = float_matrix_elements(found.tables, found.bounds, question.operator)
    return elements, Accuracy(bounds, "proven", found.route)


# --- digits ---


def _decimal_answer(question: OverlapsQuestion, digits: int, deadline: Deadline) -> OverlapsAnswer:
    tables = [
        decimal_tables(
            ExactPair.of(question.pairs, index),
            question.v_initial_max,
            question.v_final_max,
            digits,
            question.operator,
            deadline,
        )
        for index in range(len(question.pairs))
    ]
    accuracy = _digits_accuracy(tables, digits)
    undecided = tuple(
        UndecidedElement(index, element)
        for index, table in enumerate(tables)
        for element in table.undecided
    )
    present = question.operator is not None
    return OverlapsAnswer(
        overlap_integrals=_present([table.overlaps for table in tables], digits),
        decided_factors=_present([table.factors for table in tables], digits),
        sums=_present_rows([table.sums for table in tables], digits),
        accuracy=accuracy,
        factors_accuracy=accuracy,
        sums_accuracy=accuracy,
        matrix_elements=(
            _present([table.elements or [] for table in tables], digits) if present else None
        ),
        matrix_elements_accuracy=accuracy if present else None,
        populations=_populations(question),
        populations_accuracy=_populations_accuracy(question),
        undecided=undecided,
        warnings=_undecided_warning(len(undecided), digits) + _underflow_warning(tables, digits),
    )


def _digits_accuracy(tables: list[DecimalTables], digits: int) -> Accuracy:
    """Half a unit of the last digit, relative: 0.5 * 10^(1 - digits) of each number's size."""
    bits = max(table.working_bits for table in tables)
    return Accuracy(0.5 * 10.0 ** (1 - min(digits, 300)), "proven", f"balls, {bits} bits")


def _undecided_warning(count: int, digits: int) -> tuple[str, ...]:
    if not count:
        return ()
    return (
        f"{count} element(s) could not be told from zero, or rounded, to {digits} digits within "
        "the cost limit; they are given as 0 and listed under 'undecided' with a bound of their "
        "size.",
    )


def _underflow_warning(tables: list[DecimalTables], digits: int) -> tuple[str, ...]:
    """JSON numbers end at 1e-308; strings do not."""
    if digits > MAX_JSON_DIGITS:
        return ()
    small = sum(_below_float64(value) for table in tables for row in table.factors for value in row)
    if not small:
        return ()
    return (
        f"{small} factor(s) are smaller than a JSON number can hold with {digits} digits (about "
        f"1e-308); ask for more than {MAX_JSON_DIGITS} digits to get every element as a string.",
    )


def _below_float64(value: Decimal) -> bool:
    return value.mantissa != 0 and value.exponent < -307


def _present(tables: list[list[list[Decimal]]], digits: int) -> Floats | list[DecimalTable]:
    if digits > MAX_JSON_DIGITS:
        return [[[str(value) for value in row] for row in table] for table in tables]
    return np.array([[[float(value) for value in row] for row in table] for table in tables])


def _present_rows(rows: list[list[Decimal]], digits: int) -> Floats | list[list[str]]:
    if digits > MAX_JSON_DIGITS:
        return [[str(value) for value in row] for row in rows]
    return np.array([[float(value) for value in row] for row in rows])


# --- populations ---


def _populations(question: OverlapsQuestion) -> Floats | None:
    """Boltzmann populations of the rows, (B, v_initial_max + 1)."""
    temperature = question.temperature_k
    if temperature is None:
        return None
    wavenumbers = rounded(question.pairs.wavenumber_initial_cm1)
    return np.array(
        [thermal_populations(float(g), temperature, question.v_initial_max) for g in wavenumbers]
    )


def _populations_accuracy(question: OverlapsQuestion) -> Accuracy | None:
    """Proved at :func:`ladderband.numerics.progression.thermal_populations`."""
    if question.temperature_k is None:
        return None
    return Accuracy(20.0 * UNIT_ROUNDOFF, "proven", "closed form")
