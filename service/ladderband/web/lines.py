"""``POST /v1/lines``: every line of a polyatomic transition, with what is missing."""

from __future__ import annotations

from ladderband.formats.line_list import line_list_csv, line_list_ndjson, line_list_npy
from ladderband.formats.look import png, svg
from ladderband.formats.plots import stick_plot
from ladderband.schemas.lines import LinesRequest, LinesResponse, lines_members
from ladderband.usecases.lines import LinesAnswer, LinesQuestion, estimate_seconds, lines
from ladderband.web.resource import Resource

_RING = {
    "origin_cm1": 26650.0,
    "modes": [
        {
            "label": "ring breathing",
            "wavenumber_initial_cm1": 992.0,
            "wavenumber_final_cm1": 923.0,
            "huang_rhys": 1.25,
        },
        {
            "label": "in-plane bend",
            "wavenumber_initial_cm1": 608.0,
            "wavenumber_final_cm1": 522.0,
            "displacement": -0.4,
        },
    ],
    "mixing": [[0.99802671, 0.06279052], [-0.06279052, 0.99802671]],
}

LINES: Resource[LinesQuestion, LinesAnswer] = Resource(
    path="/v1/lines",
    operation_id="computeLines",
    summary="Every line of a polyatomic transition",
    description="Assigned lines of a transition with Duschinsky mixing, temperature and a transition "
    "moment that may vary with the coordinates, until at most `tolerance` of the intensity is "
    "missing or no line above `threshold` can be. What is missing is proven. Uncoupled modes are "
    "multiplied, mixed ones enumerated. NDJSON streams long lists; npy: array (lines, 2).",
    request=LinesRequest(),
    response=LinesResponse,
    use_case=lines,
    estimate=estimate_seconds,
    members=lines_members,
    formats={
        "csv": lambda sheet, question, answer: line_list_csv(sheet, question, answer.lines),
        "ndjson": lambda sheet, question, answer: line_list_ndjson(sheet, question, answer.lines),
        "npy": lambda sheet, question, answer: line_list_npy(sheet, question, answer.lines),
        "svg": svg(lambda question, answer: stick_plot(question, answer.lines)),
        "png": png(lambda question, answer: stick_plot(question, answer.lines)),
    },
    examples={
        "mixed-pair": {**_RING, "tolerance": 0.001, "max_lines": 40},
        "hot-bands": {
            **_RING,
            "temperature_k": 298.15,
            "threshold": 0.01,
            "sorted_by": "position",
        },
        "vibronically-allowed": {
            **_RING,
            "moment": {
                "constant_debye": [0.0, 0.0, 0.02],
                "slopes_debye": [[0.0, 0.0, 0.01], [0.0, 0.12, 0.0]],
            },
            "tolerance": 0.001,
            "max_lines": 40,
        },
    },
)
