"""``POST /v1/wavefunctions``: oscillator wavefunctions and potentials sampled for a plot."""

from __future__ import annotations

from collections.abc import Iterator

from ladderband.formats.csv import csv_body, csv_columns, csv_head
from ladderband.formats.look import png, svg
from ladderband.formats.plots import wavefunction_plot
from ladderband.formats.sheet import Sheet
from ladderband.schemas.wavefunctions import (
    WavefunctionsRequest,
    WavefunctionsResponse,
    wavefunctions_members,
)
from ladderband.usecases.wavefunctions import (
    WavefunctionsAnswer,
    WavefunctionsQuestion,
    estimate_seconds,
    wavefunctions,
)
from ladderband.web.resource import Resource


def _csv(
    sheet: Sheet, question: WavefunctionsQuestion, answer: WavefunctionsAnswer
) -> Iterator[bytes]:
    notes = {
        "units": "coordinate dimensionless (final oscillator); potentials and levels cm^-1",
        "level_initial_cm1": " ".join(map(repr, answer.level_initial_cm1.tolist())),
        "level_final_cm1": " ".join(map(repr, answer.level_final_cm1.tolist())),
    }
    columns = {
        "coordinate": answer.coordinate,
        "potential_initial_cm1": answer.potential_initial_cm1,
        "potential_final_cm1": answer.potential_final_cm1,
        **{f"wavefunction_initial_{v}": row for v, row in enumerate(answer.wavefunction_initial)},
        **{f"wavefunction_final_{v}": row for v, row in enumerate(answer.wavefunction_final)},
    }
    return csv_body(csv_head(sheet, notes, answer.accuracy), csv_columns(columns))


WAVEFUNCTIONS: Resource[WavefunctionsQuestion, WavefunctionsAnswer] = Resource(
    path="/v1/wavefunctions",
    operation_id="computeWavefunctions",
    summary="Oscillator wavefunctions and potentials for a plot",
    description="Levels and wavefunctions of one mode on its initial and final potential, sampled "
    "on one coordinate.",
    request=WavefunctionsRequest(),
    response=WavefunctionsResponse,
    use_case=wavefunctions,
    estimate=estimate_seconds,
    members=wavefunctions_members,
    formats={"csv": _csv, "svg": svg(wavefunction_plot), "png": png(wavefunction_plot)},
    examples={
        "ring-breathing": {
            "mode": {
                "wavenumber_initial_cm1": 992.0,
                "wavenumber_final_cm1": 923.0,
                "displacement": 1.6,
            },
            "v_initial_max": 2,
            "v_final_max": 4,
            "points": 201,
        }
    },
)
