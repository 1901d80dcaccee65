"""``POST /v1/mode-maps``: two electronic-structure results into a transition."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from ladderband.formats.csv import csv_body, csv_columns, csv_head
from ladderband.formats.sheet import Sheet
from ladderband.schemas.mode_map_answers import (
    ModeMapsResponse,
    mode_columns,
    mode_maps_members,
)
from ladderband.schemas.mode_maps import ModeMapsRequest
from ladderband.usecases.mode_maps import (
    ModeMapsAnswer,
    ModeMapsQuestion,
    estimate_seconds,
    mode_maps,
)
from ladderband.web.resource import Resource


def _csv(sheet: Sheet, question: ModeMapsQuestion, answer: ModeMapsAnswer) -> Iterator[bytes]:
    notes: dict[str, Any] = {
        "units": "wavenumbers and energies cm^-1, shifts angstrom sqrt(u), moves angstrom",
        "origin_cm1": repr(answer.transition.origin_cm1),
        "orthogonality": f"{answer.mapped.closure.orthogonality:.3g}",
    }
    return csv_body(csv_head(sheet, notes, answer.accuracy), csv_columns(mode_columns(answer)))


def _bent_triatomic(stretch: float, bend: float, half_angle: tuple[float, float]) -> dict[str, Any]:
    """An invented symmetric X-O-X of two hydrogens: springs of the bonds and of the H...H gap."""
    across, down = half_angle
    atoms = [[0.0, 0.0, 0.0], [0.0, across, -down], [0.0, -across, -down]]
    hessian = [[0.0] * 9 for _ in range(9)]
    for a, b, strength in ((0, 1, stretch), (0, 2, stretch), (1, 2, bend)):
        line = [x - y for x, y in zip(atoms[a], atoms[b], strict=True)]
        square = sum(x * x for x in line)
        for i in range(3):
            for j in range(3):
                term = strength * line[i] * line[j] / square
                for p, q, sign in ((a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)):
                    hessian[3 * p + i][3 * q + j] += sign * term
    return {
        "atoms": ["O", "H", "H"],
        "geometry_angstrom": atoms,
        "hessian_hartree_bohr2": [[round(x, 6) for x in row] for row in hessian],
    }


BENT_TRIATOMIC: dict[str, Any] = {
    "process": "photoelectron",
    "initial": {**_bent_triatomic(0.5, 0.12, (0.76, 0.59)), "energy_hartree": 0.0},
    "final": {**_bent_triatomic(0.4, 0.1, (0.80, 0.60)), "energy_hartree": 0.46},
}
"""Invented numbers of the size of a small hydride's; no calculation of any molecule."""

MODE_MAPS: Resource[ModeMapsQuestion, ModeMapsAnswer] = Resource(
    path="/v1/mode-maps",
    operation_id="mapModes",
    summary="From two geometries and their force constants to a transition",
    description="Normal modes of two electronic states, one laid on the other: Duschinsky matrix, "
    "shifts, Huang-Rhys factors, reorganisation energies, and a transition object that can be sent "
    "on unchanged. States come as arrays or as QCSchema documents; the final state also as a "
    "gradient at the initial geometry. Modes without a harmonic oscillator are never dropped "
    "silently: the request is refused and names them until mode_choices says what to do.",
    request=ModeMapsRequest(),
    response=ModeMapsResponse,
    use_case=mode_maps,
    estimate=estimate_seconds,
    members=mode_maps_members,
    formats={"csv": _csv},
    examples={
        "bent-triatomic": BENT_TRIATOMIC,
        "gradient-only": {
            "initial": BENT_TRIATOMIC["initial"],
            "final": {
                "gradient_hartree_bohr": [
                    [0.0, 0.0, -0.02],
                    [0.0, -0.015, 0.01],
                    [0.0, 0.015, 0.01],
                ],
                "energy_hartree": 0.2,
            },
        },
    },
)
