"""Request of ``POST /v1/mode-maps``."""

from __future__ import annotations

from typing import Any

from ladderband.numerics.mode_choices import ModeChoice
from ladderband.schemas import ranges
from ladderband.schemas.base import RequestSchema, StrictSchema
from ladderband.schemas.fields import Choice, Matrix, Number, Numbers, Objects, Part, Truth, Whole
from ladderband.schemas.molecular_states import COORDINATES, MolecularStateSchema, state_of
from ladderband.schemas.qcschema import wrong_at
from ladderband.schemas.transition import PROCESSES
from ladderband.usecases.mode_maps import ModeMapsQuestion, MomentInput


class ModeChoiceSchema(StrictSchema):
    """What to do with one mode that has no harmonic oscillator (or any other)."""

    state = Choice("Whose mode.", ("initial", "final"), required=True)
    mode = Whole(
        "Number of the mode in that state, from 0, in ascending wavenumber (imaginary ones first).",
        ranges.Range(0, COORDINATES),
        required=True,
        example=0,
    )
    action = Choice(
        "freeze: the motion is held still in both states. replace: the mode gets wavenumber_cm1 in "
        "this state.",
        ("freeze", "replace"),
        required=True,
    )
    wavenumber_cm1 = Number(
        "The wavenumber for replace, cm^-1.", ranges.REPLACED_WAVENUMBER, example=80.0
    )


class TransitionDipoleSchema(StrictSchema):
    """Electronic transition dipole and how it changes when atoms move."""

    constant_debye = Numbers(
        "Transition dipole at the geometry, debye (1 atomic unit = 2.541746 debye).",
        ranges.MOMENT,
        min_size=3,
        max_size=3,
        required=True,
        example=[0.0, 0.0, 1.3],
    )
    derivatives_debye_angstrom = Matrix(
        "Derivatives along the 3N Cartesian coordinates, one row of three components a coordinate, "
        "debye/angstrom (1 atomic unit = 4.803205). Default: zero.",
        ranges.MOMENT,
        rows=COORDINATES,
        columns=3,
    )
    geometry = Choice(
        "The state at whose geometry, in whose frame and atom order the dipole is given. "
        "Default initial.",
        ("initial", "final"),
        load_default="initial",
    )


class ModeMapsRequest(RequestSchema[ModeMapsQuestion]):
    """Two electronic states of one molecule."""

    process = Choice(
        "Direction, as in a transition. Default absorption.", PROCESSES, load_default="absorption"
    )
    initial = Part(
        MolecularStateSchema, "The initial state: geometry and force constants.", required=True
    )
    final = Part(MolecularStateSchema, "The final state.", required=True)
    temperature_k = Number(
        "Temperature for the transition, K. Default 0.",
        ranges.TEMPERATURE,
        load_default=0.0,
        example=298.15,
    )
    origin_cm1 = Number(
        "Position of the 0-0 line, cm^-1, instead of the one the energies give.",
        ranges.POSITION,
        example=26650.0,
    )
    atom_order = Choice(
        "check: refuse atoms that do not match (default). match: reorder the final state's atoms. "
        "given: keep the order although another fits better.",
        ("check", "match", "given"),
        load_default="check",
    )
    mode_choices = Objects(
        ModeChoiceSchema,
        "What to do with modes that have no harmonic oscillator; without an entry such a mode is "
        "refused by name.",
        max_size=2 * COORDINATES,
    )
    transition_dipole = Part(TransitionDipoleSchema, "Makes the moment of the transition.")
    vectors = Truth(
        "Also return the modes' mass-weighted vectors. Default false.",
        load_default=False,
        example=True,
    )

    def build(self, data: dict[str, Any], notes: list[str]) -> ModeMapsQuestion:
        return ModeMapsQuestion(
            state_of(data["initial"], "initial"),
            state_of(data["final"], "final"),
            process=data["process"],
            temperature_k=data["temperature_k"],
            origin_cm1=data.get("origin_cm1"),
            atom_order=data["atom_order"],
            choices=tuple(
                _choice(entry, index) for index, entry in enumerate(data.get("mode_choices", ()))
            ),
            moment=_moment(data.get("transition_dipole")),
            vectors=data["vectors"],
        )


def _choice(data: dict[str, Any], index: int) -> ModeChoice:
    replace, given = data["action"] == "replace", "wavenumber_cm1" in data
    if replace != given:
        detail = "Replace needs a wavenumber." if replace else "Freeze takes no wavenumber."
        raise wrong_at(f"mode_choices/{index}/wavenumber_cm1", detail, "with replace only")
    return ModeChoice(data["state"], data["mode"], data.get("wavenumber_cm1"))


def _moment(data: dict[str, Any] | None) -> MomentInput | None:
    if data is None:
        return None
    derivatives = data.get("derivatives_debye_angstrom")
    if not data["constant_debye"].any() and (derivatives is None or not derivatives.any()):
        raise wrong_at("transition_dipole", "The moment is zero.", "a moment not zero")
    return MomentInput(data["constant_debye"], derivatives, data["geometry"] == "final")
