"""``POST /v1/bands`` as a client sees it: formats, refusals with their pointers, reuse."""

from __future__ import annotations

import io
from copy import deepcopy

import numpy as np
import pytest

BODY = {
    "process": "absorption",
    "origin_cm1": 20000.0,
    "temperature_k": 300.0,
    "modes": [
        {
            "wavenumber_initial_cm1": 1000.0,
            "wavenumber_final_cm1": 900.0,
            "huang_rhys": 0.8,
        },
        {
            "wavenumber_initial_cm1": 500.0,
            "wavenumber_final_cm1": 520.0,
            "displacement": -0.5,
        },
    ],
    "axis": {"unit": "cm-1", "start": 18000.0, "stop": 26000.0, "points": 401},
    "line_shape": {"kind": "gaussian", "fwhm_cm1": 200.0},
    "scale": "relative",
}


def changed(**members):
    return {**deepcopy(BODY), **members}


def test_answer_has_the_agreed_members(client):
    answer = client.post("/v1/bands", json=BODY).get_json()
    assert answer["axis"]["unit"] == "cm-1"
    assert len(answer["axis"]["values"]) == len(answer["intensity"]) == 401
    assert set(answer["moments"]) == {"mean_cm1", "standard_deviation_cm1", "skewness"}
    assert answer["accuracy"]["evidence"] == "proven"
    assert answer["accuracy"]["bound"] < 1e-6
    assert max(answer["intensity"]) == 1.0
    assert answer["further_bands"] == []
    assert answer["positions"][0]["origin_cm1"] == 20000.0
    assert answer["warnings"] == []


def test_step_and_values_make_the_same_axis(client):
    by_points = client.post("/v1/bands", json=BODY).get_json()
    step = {"unit": "cm-1", "start": 18000.0, "stop": 26000.0, "step": 20.0}
    by_step = client.post("/v1/bands", json=changed(axis=step)).get_json()
    values = {"unit": "cm-1", "values": by_points["axis"]["values"]}
    by_values = client.post("/v1/bands", json=changed(axis=values)).get_json()
    assert by_step["axis"]["values"] == pytest.approx(by_points["axis"]["values"])
    assert by_values["intensity"] == by_points["intensity"]
    assert by_step["intensity"] == pytest.approx(by_points["intensity"], abs=1e-7)


def test_several_bands(client):
    body = changed(
        temperatures_k=[77.0, 300.0],
        both_directions=True,
        further_species=[{**deepcopy(BODY), "weight": 0.5, "origin_cm1": 20100.0}],
    )
    for name in ("axis", "line_shape", "scale"):
        del body["further_species"][0][name]
    answer = client.post("/v1/bands", json=body).get_json()
    assert len(answer["further_bands"]) == 3
    assert [band["process"] for band in answer["further_bands"]] == [
        "absorption",
        "emission",
        "emission",
    ]
    assert len(answer["stokes_shift_cm1"]) == 2
    assert len(answer["positions"]) == 2


def test_labels_ride_along(client):
    answer = client.post("/v1/bands", json=changed(label_lines=3)).get_json()
    (labels,) = answer["lines"]
    assert len(labels["assignment"]) == 3
    assert labels["assignment"][0] == "0^0_0"
    assert labels["position_cm1"][0] == 20000.0
    assert labels["completeness"]["missing_at_most"] < 1.0
    assert "lines" not in client.post("/v1/bands", json=BODY).get_json()


def test_npy_and_csv_hold_the_json_numbers(client):
    answer = client.post("/v1/bands", json=BODY).get_json()
    array = np.load(io.BytesIO(client.post("/v1/bands?format=npy", json=BODY).data))
    assert array.shape == (401, 2)
    assert array[:, 1].tolist() == answer["intensity"]
    text = client.post("/v1/bands?format=csv", json=BODY).get_data(as_text=True)
    rows = [line for line in text.splitlines() if not line.startswith("#")]
    assert rows[0] == "cm-1,intensity"
    assert [float(row.split(",")[1]) for row in rows[1:]] == answer["intensity"]


def read_jcamp(text: str) -> tuple[dict[str, str], list[float], list[float]]:
    """A small reader of our own two layouts, written from the published label syntax."""
    labels, x, y = {}, [], []
    lines = iter(text.split("\r\n"))
    for line in lines:
        assert len(line) <= 80
        if line.startswith("##"):
            label, _, value = line[2:].partition("=")
            labels[label] = value
            continue
        numbers = [float(word) for word in line.replace(",", " ").split()]
        if "XYPOINTS" in labels and numbers:
            x.append(numbers[0])
            y.append(numbers[1])
        elif numbers:
            assert numbers[0] == pytest.approx(
                float(labels["FIRSTX"]) + len(y) * float(labels["DELTAX"]), rel=1e-9
            )
            y += numbers[1:]
    if not x:
        x = np.linspace(float(labels["FIRSTX"]), float(labels["LASTX"]), len(y)).tolist()
    return labels, x, y


@pytest.mark.parametrize("layout", ["XYDATA", "XYPOINTS"])
def test_jcamp_can_be_read_back(client, layout):
    body = changed()
    if layout == "XYPOINTS":
        body["axis"] = {"unit": "nm", "values": [400.0, 410.0, 425.0, 460.0, 500.0, 501.0]}
    answer = client.post("/v1/bands", json=body).get_json()
    response = client.post("/v1/bands?format=jcamp", json=body)
    assert response.content_type == "chemical/x-jcamp-dx"
    labels, x, y = read_jcamp(response.get_data(as_text=True))
    assert layout in labels
    assert int(labels["NPOINTS"]) == len(y)
    assert y == answer["intensity"]
    assert x == pytest.approx(answer["axis"]["values"])
    assert labels["XUNITS"] == ("1/CM" if layout == "XYDATA" else "NANOMETERS")
    assert labels["END"] == ""


def test_several_bands_make_a_compound_jcamp_file(client):
    body = changed(temperatures_k=[77.0, 300.0])
    text = client.post("/v1/bands?format=jcamp", json=body).get_data(as_text=True)
    assert text.count("##TITLE=") == 3
    assert text.count("##END=") == 3
    assert "##BLOCKS=3" in text


@pytest.mark.parametrize("name", ["svg", "png"])
def test_plots(client, name):
    body = changed(temperatures_k=[77.0, 200.0, 300.0])
    response = client.post(f"/v1/bands?format={name}&theme=dark", json=body)
    assert response.status_code == 200
    assert len(response.data) > 2000


AXIS = {"unit": "cm-1", "start": 18000.0, "stop": 26000.0, "points": 11}
REFUSED = {
    "no axis": ({"axis": None}, "/axis"),
    "unit": ({"axis": {**AXIS, "unit": "m"}}, "/axis/unit"),
    "descending": ({"axis": {**AXIS, "stop": 17000.0}}, "/axis/stop"),
    "empty range": ({"axis": {**AXIS, "stop": 18000.0}}, "/axis/stop"),
    "no points": ({"axis": {"unit": "cm-1", "start": 1.0, "stop": 2.0}}, "/axis/points"),
    "points and step": ({"axis": {**AXIS, "step": 1.0}}, "/axis/points"),
    "no stop": ({"axis": {"unit": "cm-1", "start": 1.0, "points": 5}}, "/axis/stop"),
    "values and start": ({"axis": {"unit": "nm", "values": [1.0], "start": 1.0}}, "/axis/start"),
    "values descend": ({"axis": {"unit": "nm", "values": [2.0, 1.0]}}, "/axis"),
    "no values": ({"axis": {"unit": "nm", "values": []}}, "/axis/values"),
    "too many points": ({"axis": {**AXIS, "points": 100_002}}, "/axis/points"),
    "step too fine": (
        {"axis": {"unit": "cm-1", "start": 0.0, "stop": 8000.0, "step": 0.01}},
        "/axis/step",
    ),
    "nm crosses zero": (
        {"axis": {"unit": "nm", "start": -5.0, "stop": 500.0, "points": 11}},
        "/axis",
    ),
    "no width": ({"line_shape": {"kind": "gaussian"}}, "/line_shape/fwhm_cm1"),
    "zero width": ({"line_shape": {"fwhm_cm1": 0.0}}, "/line_shape/fwhm_cm1"),
    "voigt needs both": (
        {"line_shape": {"kind": "voigt", "fwhm_cm1": 1.0}},
        "/line_shape/fwhm_lorentzian_cm1",
    ),
    "second width": (
        {"line_shape": {"fwhm_cm1": 1.0, "fwhm_lorentzian_cm1": 1.0}},
        "/line_shape/fwhm_lorentzian_cm1",
    ),
    "bath rate": (
        {"line_shape": {"bath": {"kind": "brownian", "reorganisation_cm1": 100.0}}},
        "/line_shape/bath/relaxation_cm1",
    ),
    "instrument lengths": (
        {
            "line_shape": {
                "fwhm_cm1": 9.0,
                "instrument": {"offset_cm1": [0.0, 1.0], "weight": [1.0, 1.0, 1.0]},
            }
        },
        "/line_shape/instrument",
    ),
    "instrument without area": (
        {
            "line_shape": {
                "fwhm_cm1": 9.0,
                "instrument": {"offset_cm1": [0.0, 1.0], "weight": [0.0, 0.0]},
            }
        },
        "/line_shape/instrument",
    ),
    "scale": ({"scale": "absorbance"}, "/scale"),
    "scale of the other process": ({"scale": "photon_rate"}, "/scale"),
    "weight": ({"weight": 0.0}, "/weight"),
    "species": ({"further_species": [{"modes": []}]}, "/further_species/0/modes"),
    "process of a species": (
        {"further_species": [{"modes": BODY["modes"], "process": "emission"}]},
        "/further_species",
    ),
    "temperature": ({"temperatures_k": [-1.0]}, "/temperatures_k/0"),
    "reverse": ({"process": "photoelectron", "both_directions": True}, "/both_directions"),
    "unknown member": ({"resolution": 5}, "/resolution"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_refusal_points_at_the_member(client, case):
    members, pointer = REFUSED[case]
    body = {name: value for name, value in changed(**members).items() if value is not None}
    response = client.post("/v1/bands", json=body)
    problem = response.get_json()
    assert response.status_code == 422, problem
    assert response.content_type == "application/problem+json"
    pointers = [error["pointer"].removeprefix("#") for error in problem["errors"]]
    assert pointer in pointers, problem


def test_absolute_scale_without_origin_is_explained(client):
    body = changed(
        origin_cm1=0.0,
        scale="cross_section",
        axis={"unit": "cm-1", "start": -100.0, "stop": 5000.0, "points": 11},
    )
    problem = client.post("/v1/bands", json=body).get_json()
    assert "origin_cm1" in str(problem)


def test_too_much_work_is_refused_with_the_estimate(client):
    rng = np.random.default_rng(1)
    n = 60
    q, _ = np.linalg.qr(rng.normal(size=(n, n)))
    modes = [
        {"wavenumber_initial_cm1": w, "wavenumber_final_cm1": w, "huang_rhys": 0.1}
        for w in rng.uniform(300.0, 1600.0, n).tolist()
    ]
    body = changed(
        modes=modes,
        mixing=q.tolist(),
        mixing_repair="nearest-orthogonal",
        line_shape={"fwhm_cm1": 0.5},
    )
    response = client.post("/v1/bands", json=body)
    problem = response.get_json()
    assert problem["type"] == "/problems/cost-limit"
    assert problem["estimate_s"] > problem["limit_s"]
