"""Request and answer of ``/v1/lines``."""

from __future__ import annotations

import math
from typing import Any

from marshmallow import ValidationError

from ladderband.schemas import ranges
from ladderband.schemas.base import NUMBER, NUMBERS, StrictSchema, completeness_part
from ladderband.schemas.fields import Choice, Complaint, Many, Number, Reply, Whole
from ladderband.schemas.line_list import LineListResponse, line_list_members
from ladderband.schemas.transition import TransitionSchema
from ladderband.usecases.lines import DEFAULT_TOLERANCE, LinesAnswer, LinesQuestion, ModeReport


class LinesRequest(TransitionSchema[LinesQuestion]):
    """A transition, and how many of its lines are wanted."""

    tolerance = Number(
        "Go on until at most this share of the intensity is missing; refused when the work limit "
        f"can not meet it. Default: {DEFAULT_TOLERANCE:g}, or the best within the limit, with a "
        "warning.",
        ranges.TOLERANCE,
        example=0.001,
    )
    threshold = Number(
        "Weakest line kept, as a share of the strongest. Without a tolerance the enumeration goes on "
        "until no line above the threshold can be missing.",
        ranges.THRESHOLD,
        example=0.01,
    )
    max_lines = Whole(
        "Most lines returned, the strongest. Default 10000.",
        ranges.LINES,
        load_default=10_000,
        example=200,
    )
    low_cm1 = Number("Lowest position kept, cm^-1.", ranges.POSITION, example=26000.0)
    high_cm1 = Number("Highest position kept, cm^-1.", ranges.POSITION, example=30000.0)
    sorted_by = Choice(
        "intensity (falling, default) or position (rising).",
        ("intensity", "position"),
        load_default="intensity",
    )

    def build(self, data: dict[str, Any], notes: list[str]) -> LinesQuestion:
        """The question of checked members."""
        low, high = data.get("low_cm1", -math.inf), data.get("high_cm1", math.inf)
        if not low < high:
            complaint = Complaint(f"The window {low:g} to {high:g} is empty.", "low_cm1 < high_cm1")
            raise ValidationError({"low_cm1": [complaint]})
        return LinesQuestion(
            transition=self.transition(data, notes),
            tolerance=data.get("tolerance"),
            threshold=data.get("threshold"),
            max_lines=data["max_lines"],
            low_cm1=low,
            high_cm1=high,
            by=data["sorted_by"],
        )


class LineModeSchema(StrictSchema):
    """One final mode at a glance, before the list."""

    label = Reply("Its label, or its number.", {"type": "string"})
    mean_quanta = Reply("Mean number of final quanta.", NUMBER)
    quanta_distribution = Reply(
        "Probability of 0, 1, 2... final quanta, whatever the other modes do; cut where 1e-4 is "
        "left.",
        NUMBERS,
    )
    quanta_bound = Reply("Proven bound of each of these probabilities.", NUMBER)
    reorganisation_cm1 = Reply("Huang-Rhys factor times final wavenumber, cm^-1.", NUMBER)
    stokes_share = Reply("Share of the summed reorganisation energy.", NUMBER)


class LinesResponse(LineListResponse):
    """A list of assigned lines with what it leaves out."""

    enumerated = completeness_part()
    enumerated_lines = Reply("Lines enumerated, before the selection.", {"type": "integer"})
    modes = Many(LineModeSchema, "The modes one by one.", required=True)


def lines_members(question: LinesQuestion, answer: LinesAnswer) -> dict[str, Any]:
    """JSON members of an answer."""
    return {
        **line_list_members(question, answer.lines),
        "enumerated": answer.enumerated,
        "enumerated_lines": answer.enumerated_lines,
        "modes": [_mode_members(mode) for mode in answer.modes],
    }


def _mode_members(mode: ModeReport) -> dict[str, Any]:
    return {
        "label": mode.label,
        "mean_quanta": mode.mean_quanta,
        "quanta_distribution": mode.quanta,
        "quanta_bound": mode.quanta_bound,
        "reorganisation_cm1": mode.reorganisation_cm1,
        "stokes_share": mode.stokes_share,
    }
