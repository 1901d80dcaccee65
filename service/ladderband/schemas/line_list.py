"""How a list of lines is answered, shared by every resource that returns one."""

from __future__ import annotations

from typing import Any

from ladderband.numerics.line_list import LineList, assignments
from ladderband.schemas.base import (
    NUMBERS,
    AnswerSchema,
    StrictSchema,
    accuracy_part,
    array_of,
    completeness_part,
)
from ladderband.schemas.fields import Part, Reply

_QUANTA = array_of({"type": "integer"}, 2)


class LineColumnsSchema(StrictSchema):
    """Lines as columns of one length."""

    position_cm1 = Reply("Positions, cm^-1.", NUMBERS)
    intensity = Reply(
        "Boltzmann weight times Franck-Condon factor (times |mu|^2 / <mu^2> when the moment "
        "varies): a complete list sums to 1.",
        NUMBERS,
    )
    v_initial = Reply("Initial quanta, one row of modes a line.", _QUANTA)
    v_final = Reply("Final quanta, one row of modes a line.", _QUANTA)
    assignment = Reply(
        "Mode number ^ final quanta _ initial quanta, for each mode with quanta; 0^0_0 without any.",
        array_of({"type": "string"}),
    )


class LineListResponse(AnswerSchema):
    """A list of assigned lines."""

    lines = Part(LineColumnsSchema, "The lines.", required=True)
    completeness = completeness_part()
    accuracy = accuracy_part("Of the intensities.")


def line_columns(answer: LineList) -> dict[str, Any]:
    """The columns of a line list by name."""
    return {
        "position_cm1": answer.position_cm1,
        "intensity": answer.intensity,
        "v_initial": answer.v_initial,
        "v_final": answer.v_final,
        "assignment": assignments(answer.v_initial, answer.v_final),
    }


def line_list_members(question: Any, answer: LineList) -> dict[str, Any]:
    """JSON members of a line list."""
    return {
        "lines": line_columns(answer),
        "completeness": answer.completeness,
        "accuracy": answer.accuracy,
    }
