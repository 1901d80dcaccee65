"""What every resource does alike: negotiation, digest, ETag, view, request ids, origins."""

from __future__ import annotations

import json

import numpy as np
import pytest

from ladderband import __version__
from ladderband.settings import Settings
from ladderband.web.app import create_app
from ladderband.web.digest import request_digest

MODE = {"wavenumber_initial_cm1": 992.0, "wavenumber_final_cm1": 923.0, "huang_rhys": 1.25}
BODY = {"modes": [MODE], "v_final_max": 5}
QUERY = "/v1/progressions?wavenumber_initial_cm1=992&wavenumber_final_cm1=923&huang_rhys=1.25&v_final_max=5"


def post(client, body=None, path="/v1/progressions", **headers):
    return client.post(path, json=BODY if body is None else body, headers=headers)


@pytest.mark.parametrize(
    ("accept", "kind"),
    [
        ("*/*", "application/json"),
        ("application/json", "application/json"),
        ("text/csv", "text/csv"),
        ("image/png, image/svg+xml;q=0.5", "image/png"),
        ("image/*", "image/svg+xml"),
        ("video/mp4, text/csv;q=0.1", "text/csv"),
        ("text/html, */*;q=0.1", "application/json"),
    ],
)
def test_format_by_accept(accept, kind, client):
    response = post(client, Accept=accept)
    assert response.mimetype == kind
    assert response.headers["Vary"] == "Accept"


def test_format_parameter_wins_over_accept(client):
    response = post(client, path="/v1/progressions?format=csv", Accept="image/png")
    assert response.mimetype == "text/csv"


def test_answers_carry_version_digest_and_warnings(client):
    answer = post(client, {"modes": [MODE]}).json
    assert answer["service_version"] == __version__
    assert answer["warnings"] == []
    assert len(answer["request_digest"]) == 32


def test_same_question_same_digest_however_it_is_written(client):
    written = json.dumps(BODY)
    forms = [
        written,
        written.replace("992.0", "992"),
        written.replace(" ", ""),
        json.dumps({"v_final_max": 5.0, "modes": [dict(reversed(MODE.items()))], "origin_cm1": 0}),
    ]
    digests = {
        client.post("/v1/progressions", data=form, content_type="application/json").json[
            "request_digest"
        ]
        for form in forms
    }
    digests.add(client.get(QUERY).json["request_digest"])
    assert len(digests) == 1


def test_another_question_or_path_has_another_digest():
    assert (
        len({request_digest(p, q) for p in ("/a", "/b") for q in ([1.0], [1.0000000000000002])})
        == 4
    )


def test_etag_is_the_digest_for_json_and_differs_by_format_and_view(client):
    answer = post(client)
    assert answer.headers["ETag"] == f'"{answer.json["request_digest"]}"'
    tags = {
        post(client, path="/v1/progressions" + view).headers["ETag"]
        for view in ("", "?format=csv", "?format=svg", "?format=svg&width=300", "?format=png")
    }
    assert len(tags) == 5


def test_if_none_match(client):
    tag = client.get(QUERY).headers["ETag"]
    held = client.get(QUERY, headers={"If-None-Match": tag})
    assert (held.status_code, held.data, held.headers["ETag"]) == (304, b"", tag)
    other = client.get(QUERY, headers={"If-None-Match": '"another"'})
    assert other.status_code == 200
    assert post(client, **{"If-None-Match": tag}).status_code == 412


def test_pictures_have_the_same_bytes_each_time(client):
    for name in ("svg", "png"):
        path = f"/v1/progressions?format={name}&title=Two"
        assert post(client, path=path).data == post(client, path=path).data


def test_npy_is_read_by_numpy(client, tmp_path):
    target = tmp_path / "lines.npy"
    target.write_bytes(post(client, path="/v1/progressions?format=npy").data)
    lines = post(client).json["lines"]
    assert (np.load(target) == np.column_stack([lines["position_cm1"], lines["intensity"]])).all()


def test_a_small_answer_has_a_length_and_a_large_one_is_streamed(client):
    body = {"wavenumber_initial_cm1": 1, "wavenumber_final_cm1": 1, "displacement": 1}
    small = post(client, body | {"v_initial_max": 1, "v_final_max": 1}, "/v1/overlaps")
    large = post(client, body | {"v_initial_max": 299, "v_final_max": 299}, "/v1/overlaps")
    assert small.content_length == len(small.data)
    assert large.content_length is None
    table = np.array(large.json["overlap_integrals"])
    assert table.shape == (300, 300)


def test_head_of_a_query(client):
    response = client.head(QUERY)
    assert response.status_code == 200
    assert response.data == b""


def test_log_line_is_one_json_object(capfd):
    app = create_app(Settings(log_requests=True))
    app.test_client().get(QUERY, headers={"X-Request-ID": "run-17"})
    app.config["LEDGER"].flush()
    (line,) = capfd.readouterr().err.splitlines()
    entry = json.loads(line)
    assert entry["request_id"] == "run-17"
    assert (entry["route"], entry["status"], entry["method"]) == ("/v1/progressions", 200, "GET")
    assert entry["digest"]


@pytest.mark.parametrize(
    ("setting", "origin", "allowed"),
    [
        ("", "https://lab.example", None),
        ("https://lab.example", "https://lab.example", "https://lab.example"),
        ("https://lab.example", "https://other.example", None),
        ("*", "https://lab.example", "*"),
    ],
)
def test_cross_origin_use_is_allowed_by_setting(setting, origin, allowed):
    client = create_app(Settings(log_requests=False, cors_origins=setting)).test_client()
    response = client.post("/v1/progressions", json=BODY, headers={"Origin": origin})
    assert response.headers.get("Access-Control-Allow-Origin") == allowed
    asked = client.options("/v1/progressions", headers={"Origin": origin})
    assert ("POST" in asked.headers.get("Access-Control-Allow-Methods", "")) == bool(allowed)


def test_readiness_follows_its_event(app, client):
    app.config["READY"].clear()
    try:
        assert client.get("/readyz").status_code == 503
        assert client.get("/healthz").status_code == 200
    finally:
        app.config["READY"].set()
    assert client.get("/readyz").status_code == 200
