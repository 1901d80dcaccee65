"""Answers and pictures as links: made once, reusable by browsers and proxies, never wrongly."""

from __future__ import annotations

import pytest

from ladderband.web import progressions
from ladderband.web.reuse import Kept, KeptBodies

QUERY = "/v1/progressions?wavenumber_initial_cm1=992&wavenumber_final_cm1=923&huang_rhys=1.23"


def test_the_least_recently_sent_body_makes_room():
    kept = KeptBodies(most_bytes=100)
    for name in "abcd":
        kept.keep(name, name.encode() * 25)
    assert kept.find("a") == b"a" * 25
    kept.keep("e", b"e" * 20)
    assert [name for name in "abcde" if kept.find(name) is not None] == ["a", "c", "d", "e"]
    kept.keep("large", b"x" * 26)
    assert kept.find("large") is None


def test_keeping_a_body_twice_counts_it_once():
    kept = KeptBodies(most_bytes=100)
    for _ in range(9):
        kept.keep("a", b"x" * 25)
    kept.keep("b", b"y" * 25)
    assert kept.find("a") is not None


def test_many_answers_push_no_picture_out():
    kept = Kept()
    kept.of("svg").keep("picture", b"x" * 1000)
    for number in range(20_000):
        kept.of("json").keep(str(number), b"y" * 1000)
    assert kept.of("svg").find("picture") is not None
    assert kept.of("json").find("0") is None


def test_a_warning_about_the_spelling_comes_every_time(client):
    """It belongs to the request and not to the question, so such an answer is not kept."""
    mode = {"wavenumber_initial_cm1": 900.0, "wavenumber_final_cm1": 880.0, "huang_rhys": 0.4}
    body = {"modes": [mode, mode], "mixing": [[0.8, 0.6], [-0.6, 0.80001]]}
    body["mixing_repair"] = "nearest-orthogonal"
    answers = [client.post("/v1/lines", json=body).json for _ in range(2)]
    assert [len(answer["warnings"]) for answer in answers] == [1, 1]
    assert client.application.config["KEPT"].of("json").find(answers[0]["request_digest"]) is None


@pytest.mark.parametrize("kind", ["json", "svg", "png"])
def test_the_same_answer_is_computed_and_rendered_once(kind, client, monkeypatch):
    def no_more(*arguments):
        raise AssertionError("computed again")

    first = client.get(f"{QUERY}&format={kind}&width=300")
    monkeypatch.setattr(progressions.PROGRESSIONS.__class__, "_answered", no_more)
    again = client.get(f"{QUERY}&width=300.0&format={kind}&theme=light")
    assert (again.status_code, again.data) == (200, first.data)
    assert dict(again.headers)["ETag"] == first.headers["ETag"]


def test_each_view_has_a_picture_of_its_own(client):
    views = ("", "&theme=dark", "&width=300", "&title=Warm", "&height=200")
    assert len({client.get(f"{QUERY}&format=svg{view}").data for view in views}) == len(views)


@pytest.mark.parametrize("path", [QUERY, f"{QUERY}&format=svg"])
def test_a_get_may_be_kept_by_everybody_for_a_while(path, client):
    found = client.get(path)
    assert found.headers["Cache-Control"] == "public, max-age=3600, must-revalidate"
    held = client.get(path, headers={"If-None-Match": found.headers["ETag"]})
    assert held.status_code == 304
    for name in ("Cache-Control", "Vary", "ETag"):
        assert held.headers[name] == found.headers[name]


def test_the_answer_to_a_post_is_nobodys_to_keep(client):
    body = {"wavenumber_initial_cm1": 1000, "wavenumber_final_cm1": 900, "displacement": 1.5}
    found = client.post("/v1/overlaps", json={**body, "v_initial_max": 1, "v_final_max": 2})
    assert found.headers["Cache-Control"] == "private, max-age=0, must-revalidate"


def test_a_refusal_is_not_kept(client):
    refused = client.get("/v1/progressions?huang_rhys=-1&format=svg")
    assert refused.status_code == 422
    assert "max-age" not in refused.headers.get("Cache-Control", "")
