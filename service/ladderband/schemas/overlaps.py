"""Request and answer of ``POST /v1/overlaps``."""

from __future__ import annotations

from dataclasses import asdict, replace
from typing import Any

import numpy as np
from marshmallow import ValidationError

from ladderband.numerics.accuracy import Accuracy
from ladderband.numerics.matrix_elements import Operator
from ladderband.numerics.oscillators import OscillatorColumns, rounded
from ladderband.numerics.transition import Floats
from ladderband.schemas import ranges
from ladderband.schemas.base import (
    NUMBER_OR_DECIMAL,
    NUMBERS,
    AccuracySchema,
    AnswerSchema,
    RequestSchema,
    StrictSchema,
    accuracy_part,
    array_of,
)
from ladderband.schemas.fields import (
    Choice,
    Complaint,
    DecimalColumn,
    Given,
    Many,
    Number,
    Part,
    Reply,
    Whole,
)
from ladderband.schemas.transition import (
    SHIFT_MEMBERS,
    SHIFT_RULE,
    displacement_complaint,
    ratio_complaint,
)
from ladderband.usecases.limits import Limits
from ladderband.usecases.overlaps import OverlapsAnswer, OverlapsQuestion

BATCH = Limits().batch_size


class OperatorSchema(StrictSchema):
    """An operator whose matrix elements are asked for."""

    kind = Choice(
        "coordinate_power: q^power. derivative: d/dq; the momentum operator is -i hbar times it.",
        ("coordinate_power", "derivative"),
        load_default="coordinate_power",
    )
    power = Whole(
        "Power of the coordinate. Default 1.", ranges.Range(1, 4), load_default=1, example=1
    )
    state = Choice(
        "Whose dimensionless coordinate: q of the initial or q' of the final oscillator. "
        "Default final.",
        ("final", "initial"),
        load_default="final",
    )


class OverlapsRequest(RequestSchema[OverlapsQuestion]):
    """Two one-dimensional harmonic oscillators, or a batch of such pairs as columns."""

    exactly_one_of = SHIFT_MEMBERS

    wavenumber_initial_cm1 = DecimalColumn(
        "Wavenumber of the initial oscillator, cm^-1. A list makes a batch; single values beside "
        "lists hold for all pairs.",
        ranges.WAVENUMBER,
        BATCH,
        required=True,
        example=1000.0,
    )
    wavenumber_final_cm1 = DecimalColumn(
        "Wavenumber of the final oscillator, cm^-1; 1/50 to 50 times the initial one.",
        ranges.WAVENUMBER,
        BATCH,
        required=True,
        example=900.0,
    )
    displacement = DecimalColumn(
        SHIFT_RULE
        + "Dimensionless shift Delta in units of the FINAL oscillator's length; positive: "
        "the final minimum lies at negative initial coordinate.",
        ranges.DISPLACEMENT,
        BATCH,
        example=1.5,
    )
    huang_rhys = DecimalColumn(
        SHIFT_RULE + "Huang-Rhys factor S on the FINAL surface; stands for +sqrt(2 S).",
        ranges.HUANG_RHYS,
        BATCH,
        example="1.125",
    )
    shift_angstrom_sqrt_u = DecimalColumn(
        SHIFT_RULE + "Shift K of Q' = Q + K, in angstrom times the square root of u.",
        ranges.SHIFT,
        BATCH,
        example=0.2,
    )
    v_initial_max = Whole(
        "Highest initial quantum number (rows 0 .. v_initial_max).",
        ranges.QUANTA,
        required=True,
        example=2,
    )
    v_final_max = Whole(
        "Highest final quantum number (columns 0 .. v_final_max).",
        ranges.QUANTA,
        required=True,
        example=5,
    )
    digits = Whole(
        "Significant digits of every element, tiny ones included; above 15 the numbers come as "
        "decimal strings. Default: float64 with an absolute bound of at most tolerance.",
        ranges.DIGITS,
        example=30,
    )
    tolerance = Number(
        "Largest absolute bound when digits is not given. Default 1e-10.",
        ranges.TOLERANCE,
        load_default=OverlapsQuestion.tolerance,
        example=1e-10,
    )
    operator = Part(OperatorSchema, "Ask for matrix elements <v_initial|operator|v_final> as well.")
    temperature_k = Number(
        "Ask for the thermal populations of the initial levels at this temperature, K.",
        ranges.TEMPERATURE,
        example=298.15,
    )

    def build(self, data: dict[str, Any], notes: list[str]) -> OverlapsQuestion:
        operator = data.get("operator")
        return OverlapsQuestion(
            pairs=self._pairs(data),
            v_initial_max=data["v_initial_max"],
            v_final_max=data["v_final_max"],
            digits=data.get("digits"),
            tolerance=data["tolerance"],
            operator=None if operator is None else Operator(**operator),
            temperature_k=data.get("temperature_k"),
        )

    def _pairs(self, data: dict[str, Any]) -> OscillatorColumns:
        kind = self.chosen(data)
        names = ("wavenumber_initial_cm1", "wavenumber_final_cm1", kind)
        given: list[Given] = [data[name] for name in names]
        batch = any(entry.is_list for entry in given)
        size = max(len(entry.column) for entry in given)
        for name, entry in zip(names, given, strict=True):
            if entry.is_list and len(entry.column) != size:
                detail = f"This list has {len(entry.column)} entries, another has {size}."
                raise ValidationError({name: [Complaint(detail, "lists of one length")]})
        columns = [entry.repeated(size) for entry in given]
        pairs = OscillatorColumns(columns[0], columns[1], columns[2], kind, batch)  # type: ignore[arg-type]
        _check_pairs(pairs)
        return pairs


def _check_pairs(pairs: OscillatorColumns) -> None:
    """Refuse a frequency ratio or a displacement out of range, with the entry's pointer."""
    ratios = rounded(pairs.wavenumber_final_cm1) / rounded(pairs.wavenumber_initial_cm1)
    _refuse_first(pairs, "wavenumber_final_cm1", ratios, ranges.WAVENUMBER_RATIO, ratio_complaint)
    if pairs.shift_kind == "shift_angstrom_sqrt_u":
        shifts = pairs.displacements()
        _refuse_first(pairs, pairs.shift_kind, shifts, ranges.DISPLACEMENT, displacement_complaint)


def _refuse_first(
    pairs: OscillatorColumns, name: str, values: Floats, within: ranges.Range, complain: Any
) -> None:
    index = within.first_outside(values)
    if index is not None:
        complaint = [complain(float(np.ravel(values)[index]))]
        raise ValidationError({name: {index: complaint} if pairs.batch else complaint})


class UndecidedSchema(StrictSchema):
    """An element given as 0 because its digits were not decided."""

    pair = Reply("Index of the pair in the batch.", {"type": "integer"})
    table = Reply("The table it stands in.", {"type": "string"})
    v_initial = Reply("Its row.", {"type": "integer"})
    v_final = Reply("Its column.", {"type": "integer"})
    bound = Reply("Its size is at most this decimal number.", {"type": "string"})


_TABLES = {
    "anyOf": [array_of(NUMBER_OR_DECIMAL, 2), array_of(NUMBER_OR_DECIMAL, 3)],
}
_BOUND = (
    "Without digits: absolute, one bound a pair. With digits: relative to each number, half a unit "
    "of its last digit."
)
_ROWS = "rows v_initial = 0.., columns v_final = 0..; a batch stacks the pairs on a leading axis."


class OverlapsResponse(AnswerSchema):
    """Overlap integrals and Franck-Condon factors."""

    overlap_integrals = Reply(
        f"<v_initial|v_final>, {_ROWS} Every oscillator function is positive at large positive "
        "coordinate.",
        _TABLES,
    )
    franck_condon_factors = Reply(f"Squares of the overlap integrals, {_ROWS}", _TABLES)
    sums = Reply(
        "Sum of the Franck-Condon factors of each row.",
        {"anyOf": [array_of(NUMBER_OR_DECIMAL, 1), array_of(NUMBER_OR_DECIMAL, 2)]},
    )
    accuracy = accuracy_part(f"Of overlap_integrals. {_BOUND}")
    factors_accuracy = accuracy_part(f"Of franck_condon_factors. {_BOUND}")
    sums_accuracy = accuracy_part(f"Of sums. {_BOUND}")
    matrix_elements = Reply(
        f"<v_initial|operator|v_final> when an operator was given, {_ROWS}", _TABLES, required=False
    )
    matrix_elements_accuracy = Part(
        AccuracySchema, "Of matrix_elements; one bound a pair.", required=False
    )
    populations = Reply(
        "Thermal populations of the initial levels when a temperature was given.",
        {"anyOf": [NUMBERS, array_of(NUMBERS)]},
        required=False,
    )
    populations_accuracy = Part(AccuracySchema, "Of populations.", required=False)
    undecided = Many(
        UndecidedSchema,
        "Elements whose digits could not be decided within the cost limit: given as 0, with a bound "
        "of their size.",
        required=True,
    )


def overlaps_members(question: OverlapsQuestion, answer: OverlapsAnswer) -> dict[str, Any]:
    """JSON members of an answer; a single pair has no leading axis."""

    def table(values: Any) -> Any:
        return values if question.pairs.batch else values[0]

    def accuracy(value: Accuracy | None) -> Any:
        if value is None or isinstance(value.bound, float) or question.pairs.batch:
            return value
        return replace(value, bound=float(value.bound[0]))

    members: dict[str, Any] = {
        "overlap_integrals": table(answer.overlap_integrals),
        "franck_condon_factors": table(answer.franck_condon_factors),
        "sums": table(answer.sums),
        "accuracy": accuracy(answer.accuracy),
        "factors_accuracy": accuracy(answer.factors_accuracy),
        "sums_accuracy": accuracy(answer.sums_accuracy),
        "undecided": [{"pair": entry.pair, **asdict(entry.element)} for entry in answer.undecided],
    }
    if answer.matrix_elements is not None:
        members["matrix_elements"] = table(answer.matrix_elements)
        members["matrix_elements_accuracy"] = accuracy(answer.matrix_elements_accuracy)
    if answer.populations is not None:
        members["populations"] = table(answer.populations)
        members["populations_accuracy"] = accuracy(answer.populations_accuracy)
    return members
