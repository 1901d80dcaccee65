"""Request and answer of ``POST /v1/wavefunctions``."""

from __future__ import annotations

from typing import Any

from marshmallow import ValidationError

from ladderband.schemas import ranges
from ladderband.schemas.base import NUMBERS, AnswerSchema, RequestSchema, accuracy_part, array_of
from ladderband.schemas.fields import Complaint, Number, Part, Reply, Whole
from ladderband.schemas.transition import ModeSchema, mode_of
from ladderband.usecases.wavefunctions import WavefunctionsAnswer, WavefunctionsQuestion


class WavefunctionsRequest(RequestSchema[WavefunctionsQuestion]):
    """One mode whose levels are drawn on its two potentials."""

    mode = Part(ModeSchema, "The mode.", required=True)
    v_initial_max = Whole(
        "Highest initial level. Default 5.", ranges.PLOT_QUANTA, load_default=5, example=5
    )
    v_final_max = Whole(
        "Highest final level. Default 5.", ranges.PLOT_QUANTA, load_default=5, example=5
    )
    points = Whole(
        "Points of the coordinate. Default 401.", ranges.POINTS, load_default=401, example=401
    )
    start = Number("Left end of the coordinate. Default: chosen.", ranges.COORDINATE, example=-6.0)
    stop = Number("Right end of the coordinate. Default: chosen.", ranges.COORDINATE, example=6.0)

    def build(self, data: dict[str, Any], notes: list[str]) -> WavefunctionsQuestion:
        try:
            mode = mode_of(data.pop("mode"), self.fields["mode"].schema)  # type: ignore[attr-defined]
        except ValidationError as error:
            raise ValidationError({"mode": error.messages}) from None
        start, stop = data.get("start"), data.get("stop")
        if start is not None and stop is not None and not start < stop:
            raise ValidationError({"stop": [Complaint("stop is not above start.", "stop > start")]})
        return WavefunctionsQuestion(mode=mode, **data)


class WavefunctionsResponse(AnswerSchema):
    """Columns for a plot of levels and wavefunctions on two potentials."""

    coordinate = Reply(
        "q' = Q' sqrt(f/hbar), the final oscillator's dimensionless coordinate: the final minimum is "
        "at 0, the initial one at +displacement.",
        NUMBERS,
    )
    potential_initial_cm1 = Reply("Initial potential above its minimum, cm^-1.", NUMBERS)
    potential_final_cm1 = Reply("Final potential above its minimum, cm^-1.", NUMBERS)
    level_initial_cm1 = Reply("Initial levels above the initial minimum, cm^-1.", NUMBERS)
    level_final_cm1 = Reply("Final levels above the final minimum, cm^-1.", NUMBERS)
    wavefunction_initial = Reply("One row a level, normalised in q'.", array_of(NUMBERS))
    wavefunction_final = Reply("One row a level, normalised in q'.", array_of(NUMBERS))
    accuracy = accuracy_part("Of the wavefunctions.")


def wavefunctions_members(
    question: WavefunctionsQuestion, answer: WavefunctionsAnswer
) -> dict[str, Any]:
    """JSON members of an answer."""
    return {
        "coordinate": answer.coordinate,
        "potential_initial_cm1": answer.potential_initial_cm1,
        "potential_final_cm1": answer.potential_final_cm1,
        "level_initial_cm1": answer.level_initial_cm1,
        "level_final_cm1": answer.level_final_cm1,
        "wavefunction_initial": answer.wavefunction_initial,
        "wavefunction_final": answer.wavefunction_final,
        "accuracy": answer.accuracy,
    }
