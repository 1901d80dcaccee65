"""The transition object: the same members wherever a transition is sent or returned.

A request that takes a transition has these members at its top level, beside its own; so the
``transition`` member of another answer can be sent on unchanged.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from marshmallow import ValidationError

from ladderband.numerics.transition import (
    ORTHOGONALITY_TOLERANCE,
    Mode,
    Moment,
    Transition,
    orthogonal_mixing,
)
from ladderband.numerics.units import displacement_from_shift
from ladderband.schemas import ranges
from ladderband.schemas.base import Question, RequestSchema, StrictSchema
from ladderband.schemas.fields import (
    Choice,
    Complaint,
    Matrix,
    Number,
    Numbers,
    Objects,
    Part,
    Text,
)

SHIFT_MEMBERS = ("huang_rhys", "displacement", "shift_angstrom_sqrt_u")
SHIFT_RULE = "Exactly one of huang_rhys, displacement, shift_angstrom_sqrt_u is given. "
PROCESSES = ("absorption", "emission", "photoelectron")
NEAREST = "nearest-orthogonal"


class ModeSchema(StrictSchema):
    """One pair of oscillators: the same vibration in the initial and in the final state."""

    exactly_one_of = SHIFT_MEMBERS

    label = Text("Name of the mode, for plots and tables.", 80, example="ring breathing")
    wavenumber_initial_cm1 = Number(
        "Harmonic wavenumber in the initial state, cm^-1.",
        ranges.WAVENUMBER,
        required=True,
        example=992.0,
    )
    wavenumber_final_cm1 = Number(
        "Harmonic wavenumber in the final state, cm^-1; 1/50 to 50 times the initial one.",
        ranges.WAVENUMBER,
        required=True,
        example=923.0,
    )
    huang_rhys = Number(
        SHIFT_RULE + "Huang-Rhys factor S on the FINAL surface: reorganisation energy / (h c times "
        "the final wavenumber); stands for the displacement +sqrt(2 S).",
        ranges.HUANG_RHYS,
        example=1.25,
    )
    displacement = Number(
        SHIFT_RULE
        + "Dimensionless shift Delta in units of the FINAL oscillator's length; positive: "
        "the final minimum lies at negative initial coordinate.",
        ranges.DISPLACEMENT,
        example=-0.4,
    )
    shift_angstrom_sqrt_u = Number(
        SHIFT_RULE + "Shift K of Q' = J Q + K, in angstrom times the square root of u.",
        ranges.SHIFT,
        example=0.12,
    )


def mode_of(data: dict[str, Any], schema: ModeSchema) -> Mode:
    """The mode of checked members.

    Raises
    ------
    ValidationError
        None or several shift members; a frequency ratio or shift outside the range.
    """
    kind = schema.chosen(data)
    initial, final = data["wavenumber_initial_cm1"], data["wavenumber_final_cm1"]
    if not ranges.WAVENUMBER_RATIO.holds(final / initial):
        raise ValidationError({"wavenumber_final_cm1": [ratio_complaint(final / initial)]})
    shift = data[kind]
    if kind == "huang_rhys":
        shift = math.sqrt(2.0 * shift)
    elif kind == "shift_angstrom_sqrt_u":
        shift = displacement_from_shift(shift, final)
        if not ranges.DISPLACEMENT.holds(shift):
            raise ValidationError({kind: [displacement_complaint(shift)]})
    return Mode(initial, final, shift, data.get("label", ""))


def ratio_complaint(ratio: float) -> Complaint:
    """The final wavenumber is too far from the initial one."""
    return Complaint(
        f"The ratio final / initial wavenumber is {ratio:.6g}.",
        f"ratio {ranges.WAVENUMBER_RATIO.text()}",
    )


def displacement_complaint(displacement: float) -> Complaint:
    """A shift stands for a displacement out of range."""
    return Complaint(
        f"This shift is a displacement of {displacement:.6g} oscillator lengths.",
        f"displacement {ranges.DISPLACEMENT.text()}",
    )


class UncoupledTransitionSchema(RequestSchema[Question]):
    """Modes without mixing and with a constant transition moment."""

    process = Choice(
        "Direction: in absorption and photoelectron bands a final quantum raises the position, in "
        "emission it lowers it. Default absorption.",
        PROCESSES,
        load_default="absorption",
    )
    origin_cm1 = Number(
        "Position of the 0-0 line, cm^-1. Default 0: positions are relative to it.",
        ranges.POSITION,
        load_default=0.0,
        example=26650.0,
    )
    temperature_k = Number(
        "Temperature of the initial state, K. Default 0: only the vibrationless level.",
        ranges.TEMPERATURE,
        load_default=0.0,
        example=298.15,
    )
    modes = Objects(ModeSchema, "The modes.", max_size=ranges.MAX_MODES, required=True)

    def transition(self, data: dict[str, Any], notes: list[str]) -> Transition:
        """The transition of checked members."""
        return Transition(
            modes=self._modes(data["modes"]),
            process=data["process"],
            origin_cm1=data["origin_cm1"],
            temperature_k=data["temperature_k"],
        )

    def _modes(self, entries: list[dict[str, Any]]) -> tuple[Mode, ...]:
        schema = self.fields["modes"].schema  # type: ignore[attr-defined]
        modes, wrong = [], {}
        for index, entry in enumerate(entries):
            try:
                modes.append(mode_of(entry, schema))
            except ValidationError as error:
                wrong[index] = error.messages
        if wrong:
            raise ValidationError({"modes": wrong})
        return tuple(modes)


class MomentSchema(StrictSchema):
    """Electronic transition moment mu(Q) = constant + sum of slopes times coordinates."""

    constant_debye = Numbers(
        "Moment at the initial minimum, three components, debye.",
        ranges.MOMENT,
        min_size=3,
        max_size=3,
        required=True,
        example=[0.0, 0.0, 1.3],
    )
    slopes_debye = Matrix(
        "Derivative of the moment along the dimensionless coordinate of each INITIAL mode, one row "
        "of three components a mode, debye. Default: zero.",
        ranges.MOMENT,
        rows=ranges.MAX_MODES,
        columns=3,
    )


class TransitionSchema(UncoupledTransitionSchema[Question]):
    """One transition between two electronic states: modes, mixing, moment, temperature."""

    mixing = Matrix(
        "Duschinsky matrix J of Q' = J Q + K: row i, column j = dQ'_i/dQ_j (final from initial). "
        "Default: the identity.",
        ranges.MIXING,
        rows=ranges.MAX_MODES,
        columns=ranges.MAX_MODES,
        example=[[0.998, 0.063], [-0.063, 0.998]],
    )
    mixing_repair = Choice(
        f"{NEAREST}: take the nearest orthogonal matrix when J is not orthogonal to 1e-6, with a "
        "warning. Default none: such a matrix is refused.",
        ("none", NEAREST),
        load_default="none",
    )
    moment = Part(MomentSchema, "Transition moment. Default: constant, of unit size.")

    def transition(self, data: dict[str, Any], notes: list[str]) -> Transition:
        """The transition of checked members; a repaired mixing matrix leaves a note."""
        modes = self._modes(data["modes"])
        return Transition(
            modes=modes,
            process=data["process"],
            origin_cm1=data["origin_cm1"],
            temperature_k=data["temperature_k"],
            mixing=_mixing(data, len(modes), notes),
            moment=_moment(data.get("moment"), len(modes)),
        )


def _mixing(data: dict[str, Any], n: int, notes: list[str]) -> Any:
    matrix = data.get("mixing")
    if matrix is None:
        return None
    if matrix.shape != (n, n):
        shape = f"{matrix.shape[0]} x {matrix.shape[1]}"
        raise ValidationError(
            {"mixing": [Complaint(f"The matrix is {shape} for {n} modes.", f"{n} x {n}")]}
        )
    repaired, distance, row = orthogonal_mixing(matrix, repair=data["mixing_repair"] == NEAREST)
    if distance > ORTHOGONALITY_TOLERANCE:
        notes.append(
            f"The mixing matrix is not orthogonal: |J J^T - 1| reaches {distance:.3g} in row {row}. "
            "The nearest orthogonal matrix was used."
        )
    return repaired


def _moment(data: dict[str, Any] | None, n: int) -> Moment | None:
    if data is None:
        return None
    slopes = data.get("slopes_debye", np.zeros((n, 3)))
    if slopes.shape != (n, 3):
        shape = f"{slopes.shape[0]} rows of {slopes.shape[1]}"
        detail = Complaint(f"The slopes are {shape} numbers.", f"{n} rows of 3")
        raise ValidationError({"moment": {"slopes_debye": [detail]}})
    if not (data["constant_debye"].any() or slopes.any()):
        raise ValidationError({"moment": [Complaint("The moment is zero.", "a moment not zero")]})
    return Moment(data["constant_debye"], slopes)


def transition_members(transition: Transition) -> dict[str, Any]:
    """The JSON members of a transition, as ``TransitionSchema`` takes them."""
    members: dict[str, Any] = {
        "process": transition.process,
        "origin_cm1": transition.origin_cm1,
        "temperature_k": transition.temperature_k,
        "modes": [_mode_members(mode) for mode in transition.modes],
    }
    if transition.mixing is not None:
        members["mixing"] = transition.mixing
    if transition.moment is not None:
        members["moment"] = {
            "constant_debye": transition.moment.constant_debye,
            "slopes_debye": transition.moment.slopes_debye,
        }
    return members


def _mode_members(mode: Mode) -> dict[str, Any]:
    members = {
        "wavenumber_initial_cm1": mode.wavenumber_initial_cm1,
        "wavenumber_final_cm1": mode.wavenumber_final_cm1,
        "displacement": mode.displacement,
    }
    return {"label": mode.label, **members} if mode.label else members
