"""``GET and POST /v1/progressions``: sticks of the progressions of one or a few uncoupled modes."""

from __future__ import annotations

from ladderband.formats.line_list import line_list_csv, line_list_ndjson, line_list_npy
from ladderband.formats.look import png, svg
from ladderband.formats.plots import stick_plot
from ladderband.numerics.line_list import LineList
from ladderband.schemas.line_list import LineListResponse, line_list_members
from ladderband.schemas.progressions import ProgressionsQuery, ProgressionsRequest
from ladderband.usecases.progressions import ProgressionsQuestion, estimate_seconds, progressions
from ladderband.web.resource import Resource

PROGRESSIONS: Resource[ProgressionsQuestion, LineList] = Resource(
    path="/v1/progressions",
    operation_id="computeProgressions",
    summary="Lines of the progressions of one or a few uncoupled modes",
    description="Positions and intensities of all lines of up to six modes that do not mix. The "
    "short query form draws the sticks straight into a page: "
    "`<img src='/v1/progressions?wavenumber_final_cm1=923&huang_rhys=1.25&format=svg'>`. "
    "npy: array (lines, 2) of position and intensity.",
    request=ProgressionsRequest(),
    response=LineListResponse,
    use_case=progressions,
    estimate=estimate_seconds,
    members=line_list_members,
    formats={
        "csv": line_list_csv,
        "ndjson": line_list_ndjson,
        "npy": line_list_npy,
        "svg": svg(stick_plot),
        "png": png(stick_plot),
    },
    examples={
        "one-mode": {
            "modes": [
                {
                    "label": "ring breathing",
                    "wavenumber_initial_cm1": 992.0,
                    "wavenumber_final_cm1": 923.0,
                    "huang_rhys": 1.25,
                }
            ],
            "origin_cm1": 26650.0,
            "v_final_max": 19,
        },
        "two-modes-warm": {
            "process": "emission",
            "modes": [
                {
                    "wavenumber_initial_cm1": 923.0,
                    "wavenumber_final_cm1": 992.0,
                    "huang_rhys": 1.25,
                },
                {
                    "wavenumber_initial_cm1": 522.0,
                    "wavenumber_final_cm1": 608.0,
                    "displacement": -0.4,
                },
            ],
            "origin_cm1": 26650.0,
            "temperature_k": 298.15,
            "threshold": 0.001,
        },
    },
    short_form=ProgressionsQuery(),
)
