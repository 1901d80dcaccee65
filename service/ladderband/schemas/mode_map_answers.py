"""Answer of ``POST /v1/mode-maps``."""

from __future__ import annotations

from typing import Any

from ladderband.numerics.alignment import Alignment
from ladderband.schemas.base import (
    NUMBER,
    NUMBERS,
    AnswerSchema,
    StrictSchema,
    accuracy_part,
    array_of,
)
from ladderband.schemas.fields import Part, Reply
from ladderband.schemas.transition import transition_members
from ladderband.usecases.mode_maps import ModeMapsAnswer, ModeMapsQuestion

MAYBE = {"type": ["number", "null"]}


class MappedModesSchema(StrictSchema):
    """One row a pair of modes, in the order of the transition (ascending initial wavenumber)."""

    wavenumber_initial_cm1 = Reply("Wavenumber in the initial state, cm^-1.", NUMBERS)
    wavenumber_final_cm1 = Reply("Wavenumber of the paired final mode, cm^-1.", NUMBERS)
    final_mode = Reply(
        "Number of the paired mode among the final state's modes that are left, ascending.",
        array_of({"type": "integer"}),
    )
    pair_overlap = Reply("Share of the initial mode that its partner has, J[k, k]^2.", NUMBERS)
    shift_angstrom_sqrt_u = Reply("K of Q' = J Q + K.", NUMBERS)
    displacement = Reply("K in lengths of the final oscillator.", NUMBERS)
    huang_rhys = Reply("Half the squared displacement, on the final surface.", NUMBERS)
    displacement_initial = Reply(
        "-J^T K in lengths of the initial oscillator: where the final minimum lies.", NUMBERS
    )
    reorganisation_final_cm1 = Reply("Share of the relaxation on the final surface.", NUMBERS)
    reorganisation_initial_cm1 = Reply("Share of the relaxation on the initial surface.", NUMBERS)
    largest_move_angstrom = Reply("Farthest an atom moves by this shift.", NUMBERS)
    notes = Reply(
        "soft, large-amplitude, wavenumber-changes-much, no-clear-partner; usually none.",
        array_of({"type": "string"}, 2),
    )


class ModeMapEnergiesSchema(StrictSchema):
    """Wavenumbers of light, cm^-1; null where energies were not given."""

    zero_point_initial_cm1 = Reply("Zero-point energy of the initial modes that are left.", NUMBER)
    zero_point_final_cm1 = Reply("Zero-point energy of the final modes that are left.", NUMBER)
    reorganisation_initial_cm1 = Reply(
        "Energy of the initial surface at the final minimum, above its own.", NUMBER
    )
    reorganisation_final_cm1 = Reply(
        "Energy of the final surface at the initial minimum, above its own.", NUMBER
    )
    adiabatic_cm1 = Reply("Minimum to minimum.", MAYBE)
    vertical_cm1 = Reply("At the initial minimum, on the harmonic final surface.", MAYBE)
    origin_cm1 = Reply("The 0-0 line.", MAYBE)


class ModeMapClosureSchema(StrictSchema):
    """How well one set of modes describes the other."""

    orthogonality = Reply("Largest |J J^T - 1| of the matrix as projected.", NUMBER)
    worst_mode = Reply("Row in which it is reached.", {"type": "integer"})
    smallest_singular_value = Reply("Of that matrix; 1 when both sets span one space.", NUMBER)
    displacement_outside = Reply("Share of the displacement that no mode carries, 0 to 1.", NUMBER)
    mean_change_cm1 = Reply(
        "What taking the nearest orthogonal matrix does to the mean of the cold band.", NUMBER
    )


class ModeMapAlignmentSchema(StrictSchema):
    """How the final geometry was laid on the initial one."""

    rotation = Reply("Turns the final frame: x = R x'.", array_of(NUMBER, 2))
    angle_deg = Reply("Angle of that rotation.", NUMBER)
    axis_switching_deg = Reply(
        "Turn between the principal axes of the aligned geometries; null where two moments of "
        "inertia nearly coincide.",
        MAYBE,
    )
    distance_angstrom = Reply("Mass-weighted distance of the atoms after it.", NUMBER)
    eckart_residual = Reply("How far the Eckart condition is from zero.", NUMBER)


class StateWavenumbersSchema(StrictSchema):
    """All wavenumbers of the two states as given, before any choice, ascending."""

    initial_cm1 = Reply("Of the initial state; negative for imaginary.", NUMBERS)
    final_cm1 = Reply("Of the final state (the initial one's for a gradient).", NUMBERS)


class ModeMapVectorsSchema(StrictSchema):
    """Mass-weighted orthonormal vectors in the initial frame, one row a mode of the table."""

    initial = Reply("Of the initial modes.", array_of(NUMBER, 2))
    final = Reply("Of the paired final modes.", array_of(NUMBER, 2))


class ModeMapsResponse(AnswerSchema):
    """A transition and everything it was made from."""

    transition = Reply(
        "The transition, to be sent on unchanged; its mixing is the nearest orthogonal matrix.",
        {"type": "object", "additionalProperties": True},
    )
    modes = Part(MappedModesSchema, "The modes as columns.", required=True)
    duschinsky_matrix = Reply(
        "J as projected: row i, column j = dQ'_i/dQ_j; the nearest orthogonal one is mixing.",
        array_of(NUMBER, 2),
    )
    energies = Part(ModeMapEnergiesSchema, "Energies.", required=True)
    all_wavenumbers = Part(StateWavenumbersSchema, "Before any choice.", required=True)
    difficult_modes = Reply(
        "Modes without a harmonic oscillator, before any choice; negative: imaginary.",
        {
            "type": "array",
            "items": {
                "type": "object",
                "required": ["state", "mode", "wavenumber_cm1"],
                "properties": {
                    "state": {"type": "string", "enum": ["initial", "final"]},
                    "mode": {"type": "integer"},
                    "wavenumber_cm1": NUMBER,
                },
            },
        },
    )
    closure = Part(ModeMapClosureSchema, "How well the two sets of modes fit.", required=True)
    atom_order = Reply(
        "Entry k: which of the final state's atoms is atom k of the initial state.",
        array_of({"type": "integer"}),
    )
    alignment = Part(ModeMapAlignmentSchema, "Left out for a gradient in the initial frame.")
    vectors = Part(ModeMapVectorsSchema, "Only when asked for.")
    accuracy = accuracy_part(
        "Of the wavenumbers: rounding and constants only, not the error of the calculations."
    )


def mode_columns(answer: ModeMapsAnswer) -> dict[str, Any]:
    """The table of modes by column."""
    mapped = answer.mapped
    return {
        "wavenumber_initial_cm1": mapped.wavenumbers_initial,
        "wavenumber_final_cm1": mapped.wavenumbers_final,
        "final_mode": list(mapped.final_numbers),
        "pair_overlap": mapped.pair_overlaps,
        "shift_angstrom_sqrt_u": mapped.shift,
        "displacement": mapped.displacement,
        "huang_rhys": mapped.huang_rhys,
        "displacement_initial": mapped.displacement_initial,
        "reorganisation_final_cm1": mapped.reorganisation_final_cm1,
        "reorganisation_initial_cm1": mapped.reorganisation_initial_cm1,
        "largest_move_angstrom": mapped.largest_move_angstrom,
        "notes": [list(notes) for notes in answer.notes],
    }


def mode_maps_members(question: ModeMapsQuestion, answer: ModeMapsAnswer) -> dict[str, Any]:
    """JSON members of the answer."""
    members: dict[str, Any] = {
        "transition": transition_members(answer.transition),
        "modes": mode_columns(answer),
        "duschinsky_matrix": answer.mapped.duschinsky,
        "energies": answer.energies,
        "all_wavenumbers": {
            "initial_cm1": answer.all_wavenumbers_initial,
            "final_cm1": answer.all_wavenumbers_final,
        },
        "difficult_modes": list(answer.difficult),
        "closure": answer.mapped.closure,
        "atom_order": list(answer.atom_order),
        "accuracy": answer.accuracy,
    }
    if answer.alignment is not None:
        members["alignment"] = _alignment_members(answer.alignment)
    if question.vectors:
        members["vectors"] = {
            "initial": answer.mapped.vectors_initial.T,
            "final": answer.mapped.vectors_final.T,
        }
    return members


def _alignment_members(alignment: Alignment) -> dict[str, Any]:
    return {
        "rotation": alignment.rotation,
        "angle_deg": alignment.angle_deg,
        "axis_switching_deg": alignment.axis_switching_deg,
        "distance_angstrom": alignment.distance,
        "eckart_residual": alignment.eckart_residual,
    }
