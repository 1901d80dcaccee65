"""Request of ``/v1/progressions``, as a body and in its short query form."""

from __future__ import annotations

from typing import Any

from ladderband.schemas import ranges
from ladderband.schemas.fields import Number, Objects, Whole
from ladderband.schemas.query import QueryList, QueryNumber, QuerySchema, QueryText
from ladderband.schemas.transition import (
    PROCESSES,
    SHIFT_MEMBERS,
    ModeSchema,
    UncoupledTransitionSchema,
)
from ladderband.usecases.progressions import MAX_MODES, ProgressionsQuestion


class ProgressionsRequest(UncoupledTransitionSchema[ProgressionsQuestion]):
    """The progressions of one or a few uncoupled modes."""

    modes = Objects(ModeSchema, "The modes.", max_size=MAX_MODES, required=True)
    v_initial_max = Whole(
        "Highest initial quanta of each mode. Default: as many as the tolerance needs.",
        ranges.QUANTA,
        example=0,
    )
    v_final_max = Whole(
        "Highest final quanta of each mode. Default: as many as the tolerance needs.",
        ranges.QUANTA,
        example=19,
    )
    tolerance = Number(
        "Largest share of the intensity left out by the default quanta. Default 1e-6.",
        ranges.TOLERANCE,
        load_default=ProgressionsQuestion.tolerance,
        example=1e-6,
    )
    threshold = Number(
        "Lines weaker than this share of the strongest are left out. Default 1e-6.",
        ranges.THRESHOLD,
        load_default=ProgressionsQuestion.threshold,
        example=0.001,
    )
    max_lines = Whole(
        "Most lines returned; the strongest are kept. Default 1000.",
        ranges.Range(1, 100_000),
        load_default=1000,
        example=1000,
    )

    def build(self, data: dict[str, Any], notes: list[str]) -> ProgressionsQuestion:
        return ProgressionsQuestion(
            transition=self.transition(data, notes),
            v_initial_max=data.get("v_initial_max"),
            v_final_max=data.get("v_final_max"),
            tolerance=data["tolerance"],
            threshold=data["threshold"],
            max_lines=data["max_lines"],
        )


_PER_MODE = ("wavenumber_initial_cm1", "wavenumber_final_cm1", *SHIFT_MEMBERS)


class ProgressionsQuery(QuerySchema):
    """The short form: per mode comma-separated values, the rest as in the body."""

    wavenumber_final_cm1 = QueryList(
        "Final wavenumber of each mode, cm^-1.", MAX_MODES, required=True, example="923,522"
    )
    wavenumber_initial_cm1 = QueryList(
        "Initial wavenumber of each mode, cm^-1. Default: the final one.",
        MAX_MODES,
        example="992,608",
    )
    huang_rhys = QueryList(
        "Huang-Rhys factor of each mode (or displacement, or shift_angstrom_sqrt_u).",
        MAX_MODES,
        example="1.25,0.3",
    )
    displacement = QueryList("Displacement of each mode.", MAX_MODES)
    shift_angstrom_sqrt_u = QueryList("Shift of each mode, angstrom sqrt(u).", MAX_MODES)
    process = QueryText(
        "absorption (default), emission or photoelectron.",
        20,
        words=PROCESSES,
        example="absorption",
    )
    origin_cm1 = QueryNumber("Position of the 0-0 line, cm^-1.", ranges.POSITION)
    temperature_k = QueryNumber("Temperature, K.", ranges.TEMPERATURE)
    v_initial_max = QueryNumber("Highest initial quanta of each mode.", ranges.QUANTA)
    v_final_max = QueryNumber("Highest final quanta of each mode.", ranges.QUANTA)
    tolerance = QueryNumber("Share of the intensity left out.", ranges.TOLERANCE)
    threshold = QueryNumber("Weakest line, as a share of the strongest.", ranges.THRESHOLD)
    max_lines = QueryNumber("Most lines returned.", ranges.Range(1, 100_000))

    def body(self, data: dict[str, Any]) -> dict[str, Any]:
        """The request body the short form stands for."""
        columns = {name: data.pop(name) for name in _PER_MODE if name in data}
        columns.setdefault("wavenumber_initial_cm1", columns["wavenumber_final_cm1"])
        return {**data, "modes": self.rows(columns)}
