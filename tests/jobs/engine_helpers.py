"""Submitting to and reading from the records, as the tests of engines do."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

import orjson

from ladderband.jobs import claims
from ladderband.jobs.database import Database
from ladderband.jobs.kinds import SWEEPS
from ladderband.jobs.submissions import JobView, NewJob, canonical, request_digest, submit, view

KINDS = "jobs.sample_kinds:kinds"

OVERLAPS: dict[str, Any] = {
    "wavenumber_initial_cm1": 1000.0,
    "wavenumber_final_cm1": 900.0,
    "displacement": 1.5,
    "v_initial_max": 1,
    "v_final_max": 5,
}
"""A small request of the resource of that name."""


def put(database: Database, kind: str, request: object, **changes: object) -> JobView:
    body = canonical(request)
    new = NewJob(kind, body, request_digest(kind, body, "1"), **changes)  # type: ignore[arg-type]
    return submit(database, new, 10_000)[0]


def sweep(
    database: Database, kind: str, base: object, values: list[float], collect: list[str]
) -> JobView:
    request = {
        "resource": kind,
        "request": base,
        "vary": [{"pointer": "/x", "values": values}],
        "collect": collect,
    }
    return put(database, SWEEPS, request, total=len(values), point_s=0.02)


def until(what: Callable[[], bool], timeout_s: float = 30.0) -> None:
    end = time.monotonic() + timeout_s
    while not what():
        assert time.monotonic() < end, "gave up waiting"
        time.sleep(0.02)


def ended(database: Database, job: JobView, timeout_s: float = 30.0) -> JobView:
    until(lambda: view(database, job.id, job.key_id).ended, timeout_s)
    return view(database, job.id, job.key_id)


def table(database: Database, job: JobView) -> dict[str, list[object]]:
    *parts, _ = (orjson.loads(part) for part in claims.parts_of(database, job.id))
    return {name: [v for part in parts for v in part[name]] for name in parts[0]}
