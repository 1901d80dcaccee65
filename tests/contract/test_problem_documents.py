"""Every error is a problem document of one shape, names the place, and leaves the service up."""

from __future__ import annotations

import dataclasses
import importlib
import logging
import pkgutil

import numpy as np
import pytest

import ladderband.numerics
import ladderband.usecases
from ladderband.formats.json_stream import NotFinite
from ladderband.numerics.errors import DomainError, NumericsError, PrecisionNotReached
from ladderband.usecases.limits import UseCaseError
from ladderband.web import problems
from ladderband.web.problems import HTTP_PROBLEMS, PROBLEMS, WebError
from ladderband.web.resources import RESOURCES

MEMBERS = {"type", "title", "status", "detail", "instance"}
ONE = {
    "wavenumber_initial_cm1": 1000.0,
    "wavenumber_final_cm1": 900.0,
    "displacement": 1.5,
    "v_initial_max": 2,
    "v_final_max": 2,
}
MODE = {"wavenumber_initial_cm1": 992.0, "wavenumber_final_cm1": 923.0, "huang_rhys": 1.25}
LONG = "7" * 100_000


def problem_of(response, status, slug):
    """The document, after its shape has been checked."""
    assert response.status_code == status, response.text[:300]
    assert response.mimetype == "application/problem+json"
    document = response.json
    assert set(document) >= MEMBERS
    assert document["type"] == f"/problems/{slug}"
    assert document["status"] == status
    assert "Traceback" not in response.text
    assert "ladderband/" not in response.text
    return document


def leaf_classes(kind):
    """Exception classes below ``kind`` that nothing in the package derives from."""
    below = [sub for sub in kind.__subclasses__() if sub.__module__.startswith("ladderband.")]
    return {kind} if not below else set().union(*map(leaf_classes, below))


def test_every_error_class_has_a_problem():
    for package in (ladderband.numerics, ladderband.usecases):
        for module in pkgutil.walk_packages(package.__path__, package.__name__ + "."):
            importlib.import_module(module.name)
    leaves = leaf_classes(NumericsError) | leaf_classes(UseCaseError) | leaf_classes(WebError)
    assert leaves <= set(PROBLEMS)


def test_slugs_name_one_status_each():
    statuses = {}
    for problem in (*PROBLEMS.values(), *HTTP_PROBLEMS.values()):
        assert statuses.setdefault(problem.slug, problem.status) == problem.status


@pytest.mark.parametrize("problem", list(problems.all_problems()), ids=lambda p: p.slug)
def test_every_problem_type_has_a_page(problem, client):
    response = client.get(f"/problems/{problem.slug}")
    assert response.status_code == 200
    assert problem.title in response.text


# --- what is wrong, where, and what is allowed ---

REFUSED = {
    "nothing": ("/v1/overlaps", {}, "#/wavenumber_initial_cm1"),
    "negative wavenumber": ("/v1/overlaps", ONE | {"wavenumber_final_cm1": -1}, "#/wavenumber_final_cm1"),
    "zero wavenumber": ("/v1/overlaps", ONE | {"wavenumber_final_cm1": 0}, "#/wavenumber_final_cm1"),
    "huge quanta": ("/v1/overlaps", ONE | {"v_final_max": 10**9}, "#/v_final_max"),
    "fractional quanta": ("/v1/overlaps", ONE | {"v_final_max": 2.5}, "#/v_final_max"),
    "quanta as text": ("/v1/overlaps", ONE | {"v_final_max": "2"}, "#/v_final_max"),
    "quanta as truth": ("/v1/overlaps", ONE | {"v_final_max": True}, "#/v_final_max"),
    "null": ("/v1/overlaps", ONE | {"v_final_max": None}, "#/v_final_max"),
    "list for a number": ("/v1/overlaps", ONE | {"v_final_max": [1]}, "#/v_final_max"),
    "too many digits": ("/v1/overlaps", ONE | {"digits": 1001}, "#/digits"),
    "no digits": ("/v1/overlaps", ONE | {"digits": 0}, "#/digits"),
    "long decimal string": ("/v1/overlaps", ONE | {"displacement": LONG}, "#/displacement"),
    "huge exponent": ("/v1/overlaps", ONE | {"displacement": "1e999999999"}, "#/displacement"),
    "exponent in range of length": ("/v1/overlaps", ONE | {"displacement": "1e999"}, "#/displacement"),
    "nan as text": ("/v1/overlaps", ONE | {"displacement": "nan"}, "#/displacement"),
    "infinity as text": ("/v1/overlaps", ONE | {"displacement": "Infinity"}, "#/displacement"),
    "fraction as text": ("/v1/overlaps", ONE | {"displacement": "1/3"}, "#/displacement"),
    "truth in a batch": ("/v1/overlaps", ONE | {"displacement": [1, True]}, "#/displacement/1"),
    "null in a batch": ("/v1/overlaps", ONE | {"displacement": [1, None]}, "#/displacement/1"),
    "range in a batch": ("/v1/overlaps", ONE | {"displacement": [1, 2, 99]}, "#/displacement/2"),
    "long text in a batch": ("/v1/overlaps", ONE | {"displacement": ["1", LONG]}, "#/displacement/1"),
    "nested batch": ("/v1/overlaps", ONE | {"displacement": [[1]]}, "#/displacement/0"),
    "empty batch": ("/v1/overlaps", ONE | {"displacement": []}, "#/displacement"),
    "batch above its size": ("/v1/overlaps", ONE | {"displacement": [0] * 10_001}, "#/displacement"),
    "two lengths": (
        "/v1/overlaps",
        ONE | {"displacement": [1, 2], "wavenumber_final_cm1": [900] * 3},
        "#/displacement",
    ),
    "two shifts": ("/v1/overlaps", ONE | {"huang_rhys": 1}, "#/displacement"),
    "ratio": ("/v1/overlaps", ONE | {"wavenumber_final_cm1": 1}, "#/wavenumber_final_cm1"),
    "ratio in a batch": (
        "/v1/overlaps",
        ONE | {"wavenumber_final_cm1": [900, 1]},
        "#/wavenumber_final_cm1/1",
    ),
    "shift of many lengths": (
        "/v1/overlaps",
        {k: v for k, v in ONE.items() if k != "displacement"} | {"shift_angstrom_sqrt_u": 900},
        "#/shift_angstrom_sqrt_u",
    ),
    "unknown member": ("/v1/overlaps", ONE | {"v_max": 3}, "#/v_max"),
    "unknown member, odd name": ("/v1/overlaps", ONE | {"a/b~c": 3}, "#/a~1b~0c"),
    "operator power": ("/v1/overlaps", ONE | {"operator": {"power": 5}}, "#/operator/power"),
    "operator as text": ("/v1/overlaps", ONE | {"operator": "q"}, "#/operator"),
    "no object": ("/v1/overlaps", [1], "#"),
    "no modes": ("/v1/progressions", {"modes": []}, "#/modes"),
    "modes as object": ("/v1/progressions", {"modes": MODE}, "#/modes"),
    "mode as number": ("/v1/progressions", {"modes": [MODE, 3]}, "#/modes/1"),
    "second mode": (
        "/v1/progressions",
        {"modes": [MODE, MODE | {"huang_rhys": -1}]},
        "#/modes/1/huang_rhys",
    ),
    "no shift": (
        "/v1/progressions",
        {"modes": [{k: v for k, v in MODE.items() if k != "huang_rhys"}]},
        "#/modes/0/huang_rhys",
    ),
    "too many modes": ("/v1/progressions", {"modes": [MODE] * 7}, "#/modes"),
    "temperature below zero": ("/v1/progressions", {"modes": [MODE], "temperature_k": -1}, "#/temperature_k"),
    "word": ("/v1/progressions", {"modes": [MODE], "process": "up"}, "#/process"),
    "label": ("/v1/progressions", {"modes": [MODE | {"label": "x" * 81}]}, "#/modes/0/label"),
    "label with control": ("/v1/progressions", {"modes": [MODE | {"label": "a\n"}]}, "#/modes/0/label"),
    "start above stop": (
        "/v1/wavefunctions",
        {"mode": MODE, "start": 1, "stop": 0},
        "#/stop",
    ),
    "ratio of a mode": (
        "/v1/wavefunctions",
        {"mode": MODE | {"wavenumber_final_cm1": 1}},
        "#/mode/wavenumber_final_cm1",
    ),
}  # fmt: skip


@pytest.mark.parametrize(("path", "body", "pointer"), REFUSED.values(), ids=REFUSED)
def test_refusal_points_at_the_member(path, body, pointer, client):
    document = problem_of(client.post(path, json=body), 422, "validation")
    found = {entry["pointer"]: entry for entry in document["errors"]}
    assert pointer in found
    entry = found[pointer]
    assert entry["detail"]
    assert entry["allowed"]
    assert len(entry["detail"]) < 300


def test_at_most_twenty_errors(client):
    body = ONE | {f"unknown_{k}": k for k in range(50)}
    document = problem_of(client.post("/v1/overlaps", json=body), 422, "validation")
    assert len(document["errors"]) == 20


MALFORMED = {
    "nothing": b"",
    "cut off": b'{"modes": [',
    "nan": b'{"displacement": NaN}',
    "infinity": b'{"displacement": -Infinity}',
    "beyond double": b'{"displacement": 1e999}',
    "integer of 10^5 digits": b'{"displacement": ' + LONG.encode() + b"}",
    "not UTF-8": b'{"displacement": "\xff"}',
    "deep lists": b'{"displacement": ' + b"[" * 100 + b"]" * 100 + b"}",
    "very deep lists": b"[" * 1_000_000,
    "deep objects": b'{"a":' * 500 + b"1" + b"}" * 500,
    "repeated member": b'{"displacement": 1, "displacement": 2}',
    "repeated inside": b'{"modes": [{"label": "a:b", "label": "c"}]}',
    "two values": b"{} {}",
    "form": b"displacement=1",
}


@pytest.mark.parametrize("raw", MALFORMED.values(), ids=MALFORMED)
def test_malformed_json(raw, client):
    response = client.post("/v1/overlaps", data=raw, content_type="application/json")
    problem_of(response, 400, "malformed-json")


@pytest.mark.parametrize(
    "kind", ["text/plain", "application/x-www-form-urlencoded", "", "text/json"]
)
def test_wrong_media_type(kind, client):
    response = client.post("/v1/overlaps", data=b"{}", content_type=kind)
    assert problem_of(response, 415, "unsupported-media-type")["allowed"] == "application/json"


@pytest.mark.parametrize("kind", ["application/json; charset=utf-8", "application/vnd.x+json"])
def test_json_media_types_are_read(kind, client):
    response = client.post("/v1/overlaps", data=b"{}", content_type=kind)
    problem_of(response, 422, "validation")


def test_encoded_body(client):
    headers = {"Content-Encoding": "gzip"}
    response = client.post("/v1/overlaps", json=ONE, headers=headers)
    problem_of(response, 415, "unsupported-media-type")


def test_body_above_the_limit(client):
    response = client.post("/v1/overlaps", data=b" " * 16_000_001, content_type="application/json")
    assert problem_of(response, 413, "body-too-large")["limit_bytes"] == 16_000_000


def test_table_above_the_limit(client):
    body = ONE | {"displacement": [0.0] * 5000, "v_initial_max": 30, "v_final_max": 30}
    document = problem_of(client.post("/v1/overlaps", json=body), 422, "answer-too-large")
    assert document["numbers"] == 5000 * 31 * 31


def test_wavefunctions_above_the_limit(client):
    body = {"mode": MODE, "v_initial_max": 200, "v_final_max": 200, "points": 100_001}
    problem_of(client.post("/v1/wavefunctions", json=body), 422, "answer-too-large")


def test_work_above_the_limit(client):
    body = ONE | {"v_initial_max": 1000, "v_final_max": 1000, "digits": 1000}
    document = problem_of(client.post("/v1/overlaps", json=body), 422, "cost-limit")
    assert document["estimate_s"] > document["limit_s"]


@pytest.mark.parametrize("resource", RESOURCES, ids=lambda r: r.path)
def test_format_that_is_not_offered(resource, client):
    body = next(iter(resource.examples.values()))
    for response in (
        client.post(resource.path, json=body, headers={"Accept": "video/mp4"}),
        client.post(resource.path + "?format=mp4", json=body),
    ):
        document = problem_of(response, 406, "not-acceptable")
        assert set(document["available"]) == set(resource.offered)


@pytest.mark.parametrize("resource", RESOURCES, ids=lambda r: r.path)
def test_method_that_is_not_offered(resource, client):
    response = client.delete(resource.path)
    problem_of(response, 405, "method-not-allowed")
    assert "POST" in response.headers["Allow"]


@pytest.mark.parametrize(
    "path", ["/nothing", "/v1", "/v1/overlaps/", "/docs/../cli.py", "/problems/x"]
)
def test_address_without_a_resource(path, client):
    problem_of(client.get(path), 404, "not-found")


def test_unknown_view_parameter(client):
    document = problem_of(client.post("/v1/overlaps?colour=red", json=ONE), 422, "validation")
    assert document["errors"][0]["pointer"] == "#/colour"


@pytest.mark.parametrize(
    ("query", "pointer"),
    {
        "unknown": ("wavenumber_final_cm1=900&huang_rhys=1&colour=red", "#/colour"),
        "repeated": ("wavenumber_final_cm1=900&huang_rhys=1&huang_rhys=2", "#/huang_rhys"),
        "no number": ("wavenumber_final_cm1=900,x&huang_rhys=1,1", "#/wavenumber_final_cm1/1"),
        "lengths": ("wavenumber_final_cm1=900,800&huang_rhys=1", "#/huang_rhys"),
        "missing": ("huang_rhys=1", "#/wavenumber_final_cm1"),
        "range": ("wavenumber_final_cm1=-900&huang_rhys=1", "#/modes/0/wavenumber_initial_cm1"),
        "size": ("wavenumber_final_cm1=900&huang_rhys=1&format=svg&width=99999", "#/width"),
        "theme": ("wavenumber_final_cm1=900&huang_rhys=1&format=svg&theme=pink", "#/theme"),
        "whole": ("wavenumber_final_cm1=900&huang_rhys=1&v_final_max=2.5", "#/v_final_max"),
        "too many": (
            "wavenumber_final_cm1=" + "9," * 9 + "9&huang_rhys=1",
            "#/wavenumber_final_cm1",
        ),
    }.values(),
)
def test_refused_query(query, pointer, client):
    document = problem_of(client.get(f"/v1/progressions?{query}"), 422, "validation")
    assert pointer in {entry["pointer"] for entry in document["errors"]}


@pytest.mark.parametrize("array", ["secret", "__class__", "matrix_elements", "accuracy"])
def test_array_that_is_not_there(array, client):
    response = client.post(f"/v1/overlaps?format=npy&array={array}", json=ONE)
    problem_of(response, 422, "validation")


def test_text_digits_have_no_npy(client):
    response = client.post("/v1/overlaps?format=npy", json=ONE | {"digits": 30})
    problem_of(response, 422, "validation")


def test_quanta_that_hold_no_intensity_give_an_empty_list(client):
    """Found by generated cases: S = 1938 and 19 quanta, every factor below double range."""
    mode = {"wavenumber_initial_cm1": 992, "wavenumber_final_cm1": 923, "displacement": 62.25}
    response = client.post("/v1/progressions", json={"modes": [mode], "v_final_max": 19})
    assert response.status_code == 200
    assert response.json["completeness"]["missing_at_most"] >= 1.0
    for name in ("csv", "ndjson", "npy", "svg", "png"):
        drawn = client.post(
            f"/v1/progressions?format={name}", json={"modes": [mode], "v_final_max": 19}
        )
        assert drawn.status_code == 200


# --- errors from within ---


@pytest.fixture
def raising(app):
    """Make the use case of /v1/overlaps raise an error."""

    def use(error):
        def raise_it(*_):
            raise error

        object.__setattr__(RESOURCES[0], "use_case", raise_it)

    original = RESOURCES[0].use_case
    yield use
    object.__setattr__(RESOURCES[0], "use_case", original)


@pytest.fixture
def answering():
    """Change what the use case of /v1/overlaps answers."""
    original = RESOURCES[0].use_case

    def use(change):
        object.__setattr__(RESOURCES[0], "use_case", lambda *given: change(original(*given)))

    yield use
    object.__setattr__(RESOURCES[0], "use_case", original)


def test_unknown_exception_shows_only_an_instance(raising, client, caplog):
    raising(RuntimeError("the secret of the inside"))
    logging.getLogger("ladderband").propagate = True
    with caplog.at_level(logging.ERROR, "ladderband.fault"):
        document = problem_of(client.post("/v1/overlaps", json=ONE), 500, "internal")
    assert "secret" not in str(document)
    assert [record.instance for record in caplog.records] == [document["instance"]]


@pytest.mark.parametrize("name", ["json", "csv", "ndjson", "npy", "svg"])
def test_result_that_is_not_finite_is_a_fault(name, answering, client, caplog):
    logging.getLogger("ladderband").propagate = True
    answering(lambda answer: dataclasses.replace(answer, sums=np.full((1, 3), np.nan)))
    problem_of(client.post(f"/v1/overlaps?format={name}", json=ONE), 500, "internal")
    assert caplog.records[-1].exc_info[0] is NotFinite


def test_domain_error_keeps_its_pointer(raising, client):
    raising(DomainError("Not so.", "/mixing"))
    document = problem_of(client.post("/v1/overlaps", json=ONE), 422, "domain")
    assert document["errors"] == [{"pointer": "#/mixing", "detail": "Not so."}]


def test_precision_not_reached_says_how_far_it_came(raising, client):
    raising(PrecisionNotReached("No.", requested="1e-10", reached="1e-8"))
    document = problem_of(client.post("/v1/overlaps", json=ONE), 422, "precision-not-reached")
    assert (document["requested"], document["reached"]) == ("1e-10", "1e-8")


def test_deadline(raising, client):
    from ladderband.numerics.errors import DeadlineExceeded

    raising(DeadlineExceeded("Stopped."))
    response = client.post("/v1/overlaps", json=ONE)
    problem_of(response, 503, "deadline")
    assert response.headers["Retry-After"] == "1"
