"""``/v1/jobs``: list, follow, cancel and fetch what is on record."""

from __future__ import annotations

import time
from collections.abc import Iterator
from typing import Any
from urllib.parse import urlencode

import orjson
from flask import Blueprint, Response, g, request
from marshmallow import ValidationError

from ladderband.jobs.errors import ResultGone, ResultNotReady
from ladderband.jobs.kinds import SWEEPS
from ladderband.jobs.records import FINAL_STATES, OPEN_STATES
from ladderband.jobs.submissions import JobView, cancel, listed, view
from ladderband.schemas.fields import Complaint
from ladderband.web.desk import Desk, complete, desk, job_members
from ladderband.web.results import single_result, sweep_result

blueprint = Blueprint("jobs", __name__)

PAGE = 100
STREAM_S = 25.0
"""A stream of events ends by itself; the client connects again and goes on where it was."""

LOOK_S = 0.3
SILENCE_S = 10.0
"""Longest silence in a stream, so that no proxy takes it for dead."""


@blueprint.get("/v1/jobs")
def list_jobs() -> Response:
    """The key's jobs, newest first."""
    query = request.args
    limit = _whole(query.get("limit", str(PAGE)), "limit", 1, PAGE)
    state = query.get("state")
    if state is not None and state not in OPEN_STATES + FINAL_STATES:
        allowed = "one of: " + ", ".join(OPEN_STATES + FINAL_STATES)
        raise ValidationError({"state": [Complaint("This is no state of a job.", allowed)]})
    before = _number(query.get("before", "0"), "before")
    states = (state,) if state else ()
    jobs = listed(desk().database, g.key_id, limit=limit, states=states, before=before)
    following = None
    if len(jobs) == limit:
        following = "/v1/jobs?" + urlencode(
            {
                "limit": limit,
                "before": repr(jobs[-1].created),
                **({"state": state} if state else {}),
            }
        )
    return _json({"jobs": [job_members(job) for job in jobs], "next": following})


def _whole(text: str, name: str, low: int, high: int) -> int:
    if not (text.isascii() and text.isdigit() and low <= int(text[:9]) <= high):
        allowed = f"a whole number, {low} to {high}"
        raise ValidationError({name: [Complaint("This is not such a number.", allowed)]})
    return int(text)


def _number(text: str, name: str) -> float:
    try:
        value = float(text[:40])
    except ValueError:
        value = float("nan")
    if not 0.0 <= value < 1e12:
        raise ValidationError({name: [Complaint("This is not a time.", "seconds since 1970")]})
    return value


@blueprint.get("/v1/jobs/<job_id>")
def show_job(job_id: str) -> Response:
    """One job as it stands."""
    job = view(desk().database, job_id, g.key_id)
    response = _json(job_members(job))
    if not job.ended:
        response.headers["Retry-After"] = "1"
    return response


@blueprint.delete("/v1/jobs/<job_id>")
def cancel_job(job_id: str) -> Response:
    """End a job that has not ended."""
    return _json(job_members(cancel(desk().database, job_id, g.key_id)))


@blueprint.get("/v1/jobs/<job_id>/result")
def show_result(job_id: str) -> Response:
    """The result in one of the formats of its resource; ranges of bytes can be asked for."""
    counter = desk()
    job = view(counter.database, job_id, g.key_id)
    if job.state != "succeeded":
        raise ResultNotReady(job.id, job.state)
    if not job.has_result:
        raise ResultGone(job.id)
    return sweep_result(counter, job) if job.kind == SWEEPS else single_result(counter, job)


@blueprint.get("/v1/jobs/<job_id>/events")
def follow_job(job_id: str) -> Response:
    """Progress as server-sent events; the id of an event is the job's revision."""
    counter = desk()
    seen = request.headers.get("Last-Event-ID", "")
    revision = int(seen) if seen.isascii() and seen.isdigit() and len(seen) < 10 else -1
    job = view(counter.database, job_id, g.key_id)
    if job.ended and job.revision <= revision:
        return Response(status=204)  # tells an EventSource not to come again
    response = Response(_events(counter, job, revision), content_type="text/event-stream")
    response.headers["Cache-Control"] = "no-store, no-transform"
    response.headers["X-Accel-Buffering"] = "no"  # a proxy must not hold events back
    return response


def _events(counter: Desk, job: JobView, revision: int) -> Iterator[bytes]:
    """The job now and at each change. Without a free place: once, and come again later."""
    placed = counter.places.acquire(blocking=False)
    try:
        yield b"retry: %d\n\n" % (500 if placed else 3000)
        end, spoke = time.monotonic() + STREAM_S, time.monotonic()
        while True:
            if job.revision > revision:
                revision, spoke = job.revision, time.monotonic()
                yield _event(job)
            elif time.monotonic() - spoke > SILENCE_S:
                spoke = time.monotonic()
                yield b": still here\n\n"
            if job.ended or not placed or time.monotonic() > end:
                return
            time.sleep(LOOK_S)
            job = view(counter.database, job.id, job.key_id)
    finally:
        if placed:
            counter.places.release()


def _event(job: JobView) -> bytes:
    name = b"end" if job.ended else b"progress"
    members: dict[str, Any] = job_members(job)
    if job.problem is not None:
        members["problem"] = complete(job)
    return b"id: %d\nevent: %s\ndata: %s\n\n" % (job.revision, name, orjson.dumps(members))


def _json(members: Any) -> Response:
    response = Response(orjson.dumps(members), content_type="application/json")
    response.headers["Cache-Control"] = "no-store"
    return response
