"""Overlap integrals and Franck-Condon factors of pairs of one-dimensional oscillators."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from ladderband.numerics.accuracy import Accuracy, Deadline
from ladderband.numerics.oscillators import OscillatorColumns
from ladderband.numerics.transition import Floats
from ladderband.usecases.limits import Limits

OperatorKind = Literal["coordinate_power", "derivative"]
StateName = Literal["initial", "final"]
DecimalTable = list[list[str]]


@dataclass(frozen=True, slots=True)
class Operator:
    """q^power, or d/dq (power 1), of the dimensionless coordinate of one of the two states.

    The momentum operator is -i hbar d/dq, so its matrix elements are -i times the real ones of
    ``derivative``. ``state`` tells whose coordinate: q = Q sqrt(g/hbar) (initial) or
    q' = Q' sqrt(f/hbar) (final).
    """

    kind: OperatorKind = "coordinate_power"
    power: int = 1
    state: StateName = "final"


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


@dataclass(frozen=True)
class OverlapsAnswer:
    """Tables of shape (B, v_initial_max + 1, v_final_max + 1).

    Float64 arrays; nested lists of decimal strings (one list a pair) when ``digits`` > 15.
    ``sums`` (B, v_initial_max + 1) is each row's sum of Franck-Condon factors over the columns.
    ``accuracy.bound`` is for ``overlap_integrals``: one number a pair (a scalar for one pair), with
    the same for the factors and the matrix elements beside it. Elements whose digits could not be
    decided within the cost limit are listed as (pair, v_initial, v_final) in ``undecided``.
    """

    overlap_integrals: Floats | list[DecimalTable]
    franck_condon_factors: Floats | list[DecimalTable]
    sums: Floats | list[list[str]]
    accuracy: Accuracy
    factors_accuracy: Accuracy
    matrix_elements: Floats | list[DecimalTable] | None = None
    matrix_elements_accuracy: Accuracy | None = None
    populations: Floats | None = None
    undecided: tuple[tuple[int, int, int], ...] = ()
    warnings: tuple[str, ...] = ()


def estimate_seconds(question: OverlapsQuestion) -> float:
    """Estimated seconds of work, without doing any."""
    raise NotImplementedError


def overlaps(question: OverlapsQuestion, limits: Limits, deadline: Deadline) -> OverlapsAnswer:
    """Answer one question.

    Raises
    ------
    CostLimitExceeded
        The estimate is above the limit.
    PrecisionNotReached
        No route met the tolerance.
    DeadlineExceeded
        The deadline passed.
    """
    raise NotImplementedError
