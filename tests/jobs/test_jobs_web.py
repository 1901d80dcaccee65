"""Jobs over HTTP: the application in this process, a real engine, both databases."""

from __future__ import annotations

import io
import os
import threading
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import orjson
import pytest
import sqlalchemy as sa
from flask.testing import FlaskClient

from jobs.conftest import postgresql_database
from jobs.engine_helpers import OVERLAPS, until
from ladderband.jobs import claims
from ladderband.jobs.database import Database
from ladderband.jobs.dispatcher import Engine, EngineOptions
from ladderband.jobs.executors.local import ChildOptions, LocalExecutor
from ladderband.jobs.keys import add_key, list_keys, revoke_key
from ladderband.jobs.records import output, shard
from ladderband.jobs.submissions import cancel, expire
from ladderband.settings import Settings
from ladderband.web.app import create_app
from ladderband.web.desk import Desk
from ladderband.web.service import REFERENCE

SWEEP: dict[str, Any] = {
    "resource": "overlaps",
    "request": OVERLAPS,
    "vary": [{"pointer": "/displacement", "range": {"start": 0.0, "stop": 2.0, "points": 21}}],
    "collect": ["/sums/0", "/accuracy/bound"],
}
ASYNC = {"Prefer": "respond-async"}


class Buffered(FlaskClient):
    """Reads an answer to its end and closes its file, unless asked not to."""

    def open(self, *args: Any, **kwargs: Any) -> Any:
        kwargs.setdefault("buffered", True)
        return super().open(*args, **kwargs)


def application(settings: Settings, desk: Desk | None = None) -> FlaskClient:
    app = create_app(settings, desk)
    app.test_client_class = Buffered
    return app.test_client()


@dataclass
class Service:
    """An application with records of its own; ``lazy`` has no engine, so jobs stay queued."""

    desk: Desk
    client: FlaskClient
    lazy: FlaskClient
    lazy_desk: Desk

    def post(self, path: str, body: Any, **headers: str) -> Any:
        return self.client.post(path, json=body, headers=headers)

    def finished(self, job_id: str) -> dict[str, Any]:
        until(lambda: self.client.get(f"/v1/jobs/{job_id}").json["finished"] is not None)
        found: dict[str, Any] = self.client.get(f"/v1/jobs/{job_id}").json
        return found


def _service(url: str, folder: Path) -> tuple[Desk, FlaskClient]:
    settings = Settings(
        database_url=url, data_dir=str(folder), log_requests=False, small_s=1e-9, wait_s=30.0
    )
    desk = Desk.of(settings)
    desk.database.migrate()
    return desk, application(settings, desk)


@pytest.fixture(scope="module", params=["sqlite", "postgresql"])
def service(
    request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory
) -> Iterator[Service]:
    folder = tmp_path_factory.mktemp("service")
    urls = iter([f"sqlite:///{folder / 'a.db'}", f"sqlite:///{folder / 'b.db'}"])
    if request.param == "sqlite":
        yield from _running(folder, next(urls), next(urls))
        return
    first, second = postgresql_database(), postgresql_database()
    yield from _running(folder, next(first), next(second))
    for made in (first, second):
        next(made, None)


def _running(folder: Path, url: str, lazy_url: str) -> Iterator[Service]:
    desk, client = _service(url, folder / "one")
    lazy_desk, lazy = _service(lazy_url, folder / "two")
    os.environ.setdefault("LADDERBAND_DATA_DIR", str(folder / "one"))
    engine_database = Database(url)
    executor = LocalExecutor(1, ChildOptions(REFERENCE, nice=0))
    engine = Engine(engine_database, executor, EngineOptions())
    thread = threading.Thread(target=engine.run)
    thread.start()
    yield Service(desk, client, lazy, lazy_desk)
    engine.stop()
    thread.join(30)
    for database in (desk.database, lazy_desk.database, engine_database):
        database.close()


# ---------------------------------------------------------------- one request


def test_a_dear_request_is_waited_for_and_has_the_same_answer(service: Service) -> None:
    plain = application(Settings(log_requests=False))
    here = plain.post("/v1/overlaps", json=OVERLAPS)
    there = service.post("/v1/overlaps", OVERLAPS)
    assert (here.status_code, there.status_code) == (200, 200)
    assert there.data == here.data
    assert there.headers["ETag"] == here.headers["ETag"]
    again = service.post("/v1/overlaps", {**OVERLAPS, "displacement": 1.50})
    assert again.data == here.data
    jobs = [j for j in service.client.get("/v1/jobs").json["jobs"] if j["kind"] == "overlaps"]
    assert len([j for j in jobs if j["request_digest"] == there.json["request_digest"]]) == 1


def test_a_job_is_accepted_followed_and_fetched_in_every_format(service: Service) -> None:
    accepted = service.post("/v1/overlaps", {**OVERLAPS, "displacement": 0.7}, **ASYNC)
    assert accepted.status_code == 202
    assert accepted.headers["Location"] == accepted.json["links"]["self"]
    job = service.finished(accepted.json["id"])
    assert (job["state"], job["done"], job["total"]) == ("succeeded", 1, 1)
    plain = application(Settings(log_requests=False))
    for name in ("json", "csv", "ndjson", "npy", "svg", "png"):
        found = service.client.get(job["links"]["result"] + f"?format={name}")
        direct = plain.post(f"/v1/overlaps?format={name}", json={**OVERLAPS, "displacement": 0.7})
        assert found.status_code == 200, name
        assert found.content_type == direct.content_type
        if name not in {"svg", "png"}:  # plots hold identifiers of their own
            assert found.data == direct.data


def test_a_refused_request_is_the_same_problem_as_without_a_job(service: Service) -> None:
    body = {**OVERLAPS, "displacement": [1.5] * 5000, "v_initial_max": 30, "v_final_max": 30}
    plain = application(Settings(log_requests=False))
    here, there = plain.post("/v1/overlaps", json=body), service.post("/v1/overlaps", body)
    assert (here.status_code, there.status_code) == (422, 422)
    assert here.json["type"] == "/problems/answer-too-large"
    assert {**there.json, "instance": ""} == {**here.json, "instance": ""}


def test_a_wait_that_ends_first_answers_with_the_job(service: Service) -> None:
    answer = service.lazy.post("/v1/overlaps", json=OVERLAPS, headers={"Prefer": "wait=0"})
    assert answer.status_code == 202
    assert answer.json["state"] == "queued"
    assert answer.headers["Retry-After"] == "1"


def test_an_impossible_estimate_is_refused_before_any_work(service: Service) -> None:
    settings = replace(service.lazy_desk.settings, job_work_s=1e-9)
    desk = replace(service.lazy_desk, settings=settings)
    client = application(settings, desk)
    answer = client.post("/v1/overlaps", json=OVERLAPS)
    assert (answer.status_code, answer.json["type"]) == (422, "/problems/cost-limit")


# ---------------------------------------------------------------- sweeps


def rows(service: Service, job: dict[str, Any]) -> list[dict[str, Any]]:
    text = service.client.get(job["links"]["result"] + "?format=ndjson").data
    return [orjson.loads(line) for line in text.splitlines()]


def test_a_sweep_gives_one_table_with_a_row_a_point(service: Service) -> None:
    accepted = service.post("/v1/sweeps", SWEEP)
    assert accepted.status_code == 202
    job = service.finished(accepted.json["id"])
    table = rows(service, job)
    assert [row["point"] for row in table] == list(range(21))
    plain = application(Settings(log_requests=False))
    for row in table[::5]:
        direct = plain.post("/v1/overlaps", json={**OVERLAPS, "displacement": row["displacement"]})
        assert row["sums/0"] == direct.json["sums"][0]
        assert row["accuracy/bound"] == direct.json["accuracy"]["bound"]


def test_the_table_comes_in_every_format_with_the_same_numbers(service: Service) -> None:
    job = service.finished(service.post("/v1/sweeps", SWEEP).json["id"])
    sums = [row["sums/0"] for row in rows(service, job)]
    fetch = {
        name: service.client.get(job["links"]["result"] + f"?format={name}")
        for name in ("json", "csv", "npy", "arrow", "parquet")
    }
    assert [row[2] for row in fetch["json"].json["table"]] == sums
    lines = fetch["csv"].data.decode().splitlines()
    assert [float(line.split(",")[2]) for line in lines[1:]] == sums
    assert np.load(io.BytesIO(fetch["npy"].data))["sums/0"].tolist() == sums
    pa = pytest.importorskip("pyarrow", reason="the extra 'tables' is not installed")
    from pyarrow import ipc, parquet

    assert (
        ipc.open_file(pa.BufferReader(fetch["arrow"].data)).read_all()["sums/0"].to_pylist() == sums
    )
    assert parquet.read_table(io.BytesIO(fetch["parquet"].data))["sums/0"].to_pylist() == sums


def test_a_point_that_is_refused_is_a_row_with_its_reason(service: Service) -> None:
    values = [0.5, -1e9, 1.0]
    body = {**SWEEP, "vary": [{"pointer": "/displacement", "values": values}]}
    job = service.finished(service.post("/v1/sweeps", body).json["id"])
    assert job["state"] == "succeeded"
    table = rows(service, job)
    assert [row["error"] is None for row in table] == [True, False, True]
    assert table[1]["sums/0"] is None
    assert "match its description" in table[1]["error"]


def test_ranges_of_a_result_can_be_fetched(service: Service) -> None:
    job = service.finished(service.post("/v1/sweeps", SWEEP).json["id"])
    address = job["links"]["result"] + "?format=csv"
    whole = service.client.get(address)
    assert whole.headers["Accept-Ranges"] == "bytes"
    part = service.client.get(address, headers={"Range": "bytes=10-29"})
    assert (part.status_code, part.data) == (206, whole.data[10:30])
    rest = service.client.get(
        address, headers={"Range": "bytes=30-", "If-Range": whole.headers["ETag"]}
    )
    assert rest.data == whole.data[30:]
    assert whole.headers["Cache-Control"] == "public, max-age=3600, must-revalidate"
    same = service.client.get(address, headers={"If-None-Match": whole.headers["ETag"]})
    assert same.status_code == 304
    assert same.headers["Cache-Control"] == whole.headers["Cache-Control"]
    beyond = service.client.get(address, headers={"Range": "bytes=999999-"})
    assert beyond.status_code == 416
    assert beyond.json["type"].startswith("/problems/")


BAD_SWEEPS = {
    "unknown member": (
        {"vary": [{"pointer": "/displacemint", "values": [1]}]},
        "/problems/validation",
        "#/request/displacemint",
    ),
    "nowhere": (
        {"vary": [{"pointer": "/modes/0/x", "values": [1]}]},
        "/problems/sweep",
        "#/vary/0/pointer",
    ),
    "explodes": (
        {"vary": [{"pointer": "/displacement", "range": {"start": 0, "stop": 1, "points": 1000000}},
                  {"pointer": "/v_final_max", "range": {"start": 0, "stop": 1, "points": 9}}]},
        "/problems/sweep",
        "#/vary",
    ),
    "too many values": (
        {"vary": [{"pointer": "/displacement", "range": {"start": 0, "stop": 1, "points": 1e9}}]},
        "/problems/validation",
        "#/vary/0/range/points",
    ),
    "a sweep of sweeps": ({"resource": "sweeps"}, "/problems/sweep", "#/resource"),
    "no such resource": ({"resource": "overlap"}, "/problems/sweep", "#/resource"),
    "nothing to collect": ({"collect": []}, "/problems/validation", "#/collect"),
    "no pointer": ({"collect": ["sums"]}, "/problems/validation", "#/collect/0"),
    "both": ({"table_csv": "/displacement\n1\n"}, "/problems/validation", "#/table_csv"),
}  # fmt: skip


@pytest.mark.parametrize("case", BAD_SWEEPS)
def test_a_bad_sweep_is_refused_with_its_place(service: Service, case: str) -> None:
    changes, kind, pointer = BAD_SWEEPS[case]
    answer = service.post("/v1/sweeps", {**SWEEP, **changes})
    assert (answer.status_code, answer.json["type"]) == (422, kind), answer.json
    assert answer.json["errors"][0]["pointer"] == pointer


# ---------------------------------------------------------------- following, cancelling, keeping


def test_events_tell_the_end_and_resume_by_their_id(service: Service) -> None:
    job = service.finished(service.post("/v1/sweeps", SWEEP).json["id"])
    stream = service.client.get(job["links"]["events"])
    assert stream.content_type.startswith("text/event-stream")
    assert stream.headers["X-Accel-Buffering"] == "no"
    lines = stream.data.decode().splitlines()
    assert "event: end" in lines
    last = next(line.removeprefix("id: ") for line in lines if line.startswith("id: "))
    resumed = service.client.get(job["links"]["events"], headers={"Last-Event-ID": last})
    assert resumed.status_code == 204
    earlier = service.client.get(job["links"]["events"], headers={"Last-Event-ID": "1"})
    assert "event: end" in earlier.data.decode()


def test_events_show_progress_while_it_happens(service: Service) -> None:
    job = service.lazy.post("/v1/sweeps", json=SWEEP).json
    stream = iter(service.lazy.get(job["links"]["events"], buffered=False).response)
    assert next(stream).startswith(b"retry: ")
    assert b"event: progress" in next(stream)
    cancel(service.lazy_desk.database, job["id"])
    assert b"event: end" in next(stream)
    assert list(stream) == []


def test_followers_never_take_the_last_thread(service: Service) -> None:
    """With all places taken a stream says where the job stands, and ends."""
    job = service.lazy.post("/v1/overlaps", json=OVERLAPS, headers=ASYNC).json
    taken = 0
    while service.lazy_desk.places.acquire(blocking=False):
        taken += 1
    try:
        stream = service.lazy.get(job["links"]["events"]).data.decode()
        waiting = service.lazy.post("/v1/overlaps", json=OVERLAPS)
    finally:
        for _ in range(taken):
            service.lazy_desk.places.release()
    assert taken == service.lazy_desk.settings.threads - 1
    assert "event: progress" in stream
    assert waiting.status_code == 202


def test_cancelling_and_what_follows(service: Service) -> None:
    job = service.lazy.post("/v1/sweeps", json={**SWEEP, "collect": ["/sums/1"]}).json
    address = job["links"]["self"]
    assert service.lazy.get(job["links"]["result"]).json["type"] == "/problems/result-not-ready"
    assert service.lazy.delete(address).json["state"] == "cancelled"
    again = service.lazy.delete(address)
    assert (again.status_code, again.json["type"]) == (409, "/problems/job-finished")
    result = service.lazy.get(job["links"]["result"])
    assert (result.status_code, result.json["state"]) == (409, "cancelled")


def test_operators_see_jobs_and_engines(service: Service) -> None:
    until(lambda: service.client.get("/readyz").json == {"status": "ready", "engines": 1})
    assert "ladderband_engines 1" in service.client.get("/metrics").text
    service.lazy.post("/v1/overlaps", json={**OVERLAPS, "displacement": 5.0}, headers=ASYNC)
    text = service.lazy.get("/metrics").text
    queued = next(line for line in text.splitlines() if line.startswith("ladderband_jobs{"))
    assert int(queued.split()[1]) >= 1


def test_unknown_jobs_are_not_found(service: Service) -> None:
    for answer in (
        service.client.get("/v1/jobs/j0"),
        service.client.get("/v1/jobs/j0/result"),
        service.client.get("/v1/jobs/j0/events"),
        service.client.delete("/v1/jobs/j0"),
    ):
        assert (answer.status_code, answer.json["type"]) == (404, "/problems/job-not-found")


def test_an_expired_result_is_gone(service: Service) -> None:
    job = service.lazy.post("/v1/overlaps", json={**OVERLAPS, "displacement": 0.1}, headers=ASYNC)
    database = service.lazy_desk.database
    while (ticket := claims.claim(database, "me", 30)) is not None:
        claims.finish(database, ticket, [b"x"], 0.1)
    expire(database, keep_s=0)
    gone = service.lazy.get(job.json["links"]["result"])
    assert (gone.status_code, gone.json["type"]) == (410, "/problems/result-gone")
    assert service.lazy.get(job.json["links"]["self"]).json["result_expired"] is True


def test_a_token_stands_for_one_request(service: Service) -> None:
    headers = {**ASYNC, "Idempotency-Key": "abc"}
    first = service.lazy.post("/v1/overlaps", json=OVERLAPS, headers=headers)
    second = service.lazy.post("/v1/overlaps", json=OVERLAPS, headers=headers)
    assert first.json["id"] == second.json["id"]
    other = service.lazy.post("/v1/overlaps", json={**OVERLAPS, "displacement": 9}, headers=headers)
    assert (other.status_code, other.json["type"]) == (422, "/problems/idempotency-mismatch")


def test_a_full_queue_is_told(service: Service) -> None:
    settings = replace(service.lazy_desk.settings, queue_limit=1)
    client = application(settings, replace(service.lazy_desk, settings=settings))
    for displacement in (3.1, 3.2, 3.3):
        answer = client.post(
            "/v1/overlaps", json={**OVERLAPS, "displacement": displacement}, headers=ASYNC
        )
    assert (answer.status_code, answer.json["type"]) == (429, "/problems/queue-full")
    assert answer.headers["Retry-After"] == "5"


def test_lists_are_paged_and_checked(service: Service) -> None:
    for displacement in (4.1, 4.2, 4.3):
        service.lazy.post(
            "/v1/overlaps", json={**OVERLAPS, "displacement": displacement}, headers=ASYNC
        )
    first = service.lazy.get("/v1/jobs?limit=2&state=queued").json
    assert len(first["jobs"]) == 2
    second = service.lazy.get(first["next"]).json
    assert not {job["id"] for job in first["jobs"]} & {job["id"] for job in second["jobs"]}
    for query in ("limit=0", "limit=x", "state=lost", "before=-1", "before=nan"):
        assert service.lazy.get(f"/v1/jobs?{query}").status_code == 422


# ---------------------------------------------------------------- keys


def test_keys_see_only_their_own_jobs_and_end_when_revoked(
    database: Database, tmp_path: Path
) -> None:
    settings = Settings(database_url=database.url, data_dir=str(tmp_path), log_requests=False)
    desk = Desk.of(settings)
    client = application(settings, desk)
    assert client.get("/v1/jobs").status_code == 200
    desk.database.close()
    (ada_info, ada), (_, bob) = add_key(database, "Ada"), add_key(database, "Bob")
    desk = Desk.of(settings)
    client = application(settings, desk)
    refused = client.get("/v1/jobs")
    assert (refused.status_code, refused.headers["WWW-Authenticate"]) == (401, "Bearer")
    assert client.get("/healthz").status_code == 200
    wrong = client.get("/v1/jobs", headers={"Authorization": "Bearer " + ada[:-1] + "x"})
    assert wrong.status_code == 401
    ada_head, bob_head = ({"Authorization": f"Bearer {secret}"} for secret in (ada, bob))
    job = client.post("/v1/overlaps", json=OVERLAPS, headers={**ada_head, **ASYNC}).json
    assert client.get(job["links"]["self"], headers=ada_head).status_code == 200
    for path in ("self", "result", "events"):
        assert client.get(job["links"][path], headers=bob_head).status_code == 404
    assert client.delete(job["links"]["self"], headers=bob_head).status_code == 404
    assert client.get("/v1/jobs", headers=bob_head).json["jobs"] == []
    query = "/v1/progressions?wavenumber_initial_cm1=992&wavenumber_final_cm1=923&huang_rhys=1.2"
    picture = client.get(query + "&format=svg", headers=ada_head)
    assert picture.headers["Cache-Control"].startswith("private, ")  # no proxy may pass it on
    assert client.get(query + "&format=svg").status_code == 401
    assert ada not in str(list_keys(database))
    assert revoke_key(database, ada_info.id)
    assert not revoke_key(database, ada_info.id)
    desk.database.close()
    desk = Desk.of(settings)
    fresh = application(settings, desk)
    assert fresh.get("/v1/jobs", headers=ada_head).status_code == 401
    desk.database.close()


def test_without_records_jobs_are_refused_and_small_requests_answered() -> None:
    client = application(Settings(log_requests=False))
    assert client.get("/v1/jobs").json["type"] == "/problems/jobs-off"
    assert client.post("/v1/overlaps", json=OVERLAPS).status_code == 200


def test_a_database_that_is_away_leaves_known_keys_valid(tmp_path: Path) -> None:
    records = f"sqlite:///{tmp_path / 'keys.db'}"
    settings = Settings(database_url=records, data_dir=str(tmp_path), log_requests=False)
    desk = Desk.of(settings)
    desk.database.migrate()
    _, secret = add_key(desk.database, "Ada")
    head = {"Authorization": f"Bearer {secret}"}
    client = application(settings, desk)
    assert client.post("/v1/overlaps", json=OVERLAPS, headers=head).status_code == 200
    away = Database("postgresql://x@127.0.0.1:1/x")
    desk.database._engine, kept = away._engine, desk.database._engine
    desk.keys._read_at = float("-inf")
    assert client.post("/v1/overlaps", json=OVERLAPS, headers=head).status_code == 200
    gone = client.get("/v1/jobs", headers=head)
    assert (gone.status_code, gone.json["type"]) == (503, "/problems/storage-unavailable")
    assert "Retry-After" in gone.headers
    kept.dispose()


def test_who_prefers_a_job_gets_one_although_the_answer_is_kept(service: Service) -> None:
    assert service.client.post("/v1/overlaps", json=OVERLAPS).status_code == 200
    assert service.client.post("/v1/overlaps", json=OVERLAPS, headers=ASYNC).status_code == 202


def test_a_stored_answer_of_another_build_is_computed_again(service: Service) -> None:
    body = {**OVERLAPS, "displacement": 0.91}
    job = service.post("/v1/overlaps", body, **ASYNC).json
    service.finished(job["id"])
    with service.desk.database.writing() as connection:
        chosen = sa.select(shard.c.id).where(shard.c.job_id == job["id"])
        found = connection.execute(
            sa.update(output).where(output.c.shard_id.in_(chosen)).values(data=b"of long ago")
        )
        assert found.rowcount == 1
    answer = service.post("/v1/overlaps", body)
    plain = application(Settings(log_requests=False)).post("/v1/overlaps", json=body)
    assert (answer.status_code, answer.data) == (200, plain.data)
    assert service.client.get(job["links"]["result"]).status_code == 410
