"""Where requests become jobs: the records, the keys, and the wait for an answer.

A request whose estimate is small is answered in the web process. Any other, and any that prefers to
respond asynchronously, goes on record; a web thread then only waits for it, up to a limit, and at
least one thread of each process never does.
"""

from __future__ import annotations

import hashlib
import re
import threading
import time
from collections.abc import Iterable
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Any

import orjson
from flask import Flask, Response, current_app, g, request

from ladderband.jobs.claims import parts_of
from ladderband.jobs.database import Database
from ladderband.jobs.keys import KeyRing
from ladderband.jobs.records import BATCH, INTERACTIVE
from ladderband.jobs.submissions import JobView, NewJob, canonical, submit, view
from ladderband.settings import Settings
from ladderband.usecases.limits import CostLimitExceeded
from ladderband.web.problems import JobFailed, JobsOff, Unauthorized

LOOKS_S = (0.01, 0.1)
"""Pause between two looks at a job: at first, and at most."""

LONGEST_WAIT_S = 60.0

_WAIT = re.compile(r'(?:^|[,;])\s*wait\s*=\s*"?(\d{1,6})"?', re.IGNORECASE)
_ASYNC = re.compile(r"(?:^|[,;])\s*respond-async\b", re.IGNORECASE)


@dataclass(frozen=True)
class Desk:
    """What one web process needs to take jobs."""

    settings: Settings
    database: Database
    keys: KeyRing
    places: threading.BoundedSemaphore = field(repr=False)
    """Threads that may wait for jobs or follow them at one time."""

    @classmethod
    def of(cls, settings: Settings) -> Desk:
        database = Database(settings.records_url)
        places = threading.BoundedSemaphore(max(1, settings.threads - 1))
        return cls(settings, database, KeyRing(database), places)

    def wants(self, estimate_s: float) -> bool:
        """True for work that is not done in the web process."""
        return estimate_s > self.settings.small_s or prefers_async()

    def answered(
        self, kind: str, body: Any, digest: str, estimate_s: float
    ) -> Iterable[bytes] | JobView:
        """The parts of the stored answer when it comes in time, else the job.

        Raises
        ------
        CostLimitExceeded, JobFailed, QueueFull, TokenMismatch, StorageUnavailable
            See the classes.
        """
        limit = self.settings.job_work_s
        if estimate_s > limit:
            raise CostLimitExceeded(estimate_s, limit, "Ask for fewer quanta, modes or digits.")
        lane = BATCH if prefers_async() else INTERACTIVE
        new = NewJob(kind, canonical(body), digest, 1, estimate_s, lane, g.key_id, token())
        job, _ = submit(self.database, new, self.settings.queue_limit)
        if lane == INTERACTIVE or job.ended:
            job = self._waited_for(job)
        if job.state == "failed" and job.problem is not None and lane == INTERACTIVE:
            raise JobFailed(complete(job))
        if lane == INTERACTIVE and job.has_result:
            return parts_of(self.database, job.id)
        return job

    def _waited_for(self, job: JobView) -> JobView:
        """The job when it ended, or when the wait was over."""
        if job.ended or not self.places.acquire(blocking=False):
            return job
        try:
            end, pause = time.monotonic() + preferred_wait(self.settings.wait_s), LOOKS_S[0]
            while not job.ended and time.monotonic() < end:
                time.sleep(pause)
                pause = min(1.5 * pause, LOOKS_S[1])
                job = view(self.database, job.id, job.key_id)
            return job
        finally:
            self.places.release()


def accepted(job: JobView) -> Response:
    """202 with the job and its address."""
    response = Response(orjson.dumps(job_members(job)), 202, content_type="application/json")
    response.headers["Location"] = f"/v1/jobs/{job.id}"
    response.headers["Retry-After"] = "1"
    return response


def job_members(job: JobView) -> dict[str, Any]:
    """A job as JSON."""
    address = f"/v1/jobs/{job.id}"
    return {
        "id": job.id,
        "kind": job.kind,
        "state": job.state,
        "total": job.total,
        "done": job.done,
        "rate_per_s": job.rate,
        "created": moment(job.created),
        "started": moment(job.started),
        "finished": moment(job.finished),
        "estimated_end": moment(job.estimated_end),
        "result_expired": job.state == "succeeded" and not job.has_result,
        "request_digest": job.digest,
        "problem": None if job.problem is None else complete(job),
        "links": {"self": address, "events": f"{address}/events", "result": f"{address}/result"},
    }


def moment(seconds: float | None) -> str | None:
    """A time of the records as RFC 3339 text."""
    if seconds is None:
        return None
    return datetime.fromtimestamp(seconds, UTC).isoformat(timespec="milliseconds")


def desk() -> Desk:
    """The desk of this application; raises JobsOff without one."""
    found: Desk | None = current_app.config["DESK"]
    if found is None:
        raise JobsOff("This process keeps no jobs.")
    return found


def complete(job: JobView) -> dict[str, Any]:
    """The problem a job failed with, as a complete document."""
    return {"instance": f"/v1/jobs/{job.id}", **(job.problem or {})}


def prefers_async() -> bool:
    """True with ``Prefer: respond-async`` (RFC 7240)."""
    return _ASYNC.search(request.headers.get("Prefer", "")) is not None


def preferred_wait(default_s: float) -> float:
    """Seconds of ``Prefer: wait=N``, at most LONGEST_WAIT_S."""
    found = _WAIT.search(request.headers.get("Prefer", ""))
    return min(float(found[1]) if found else default_s, LONGEST_WAIT_S)


def token() -> str | None:
    """A hash of the Idempotency-Key, which may be of any length; None without one."""
    given = request.headers.get("Idempotency-Key", "")
    return hashlib.sha256(given.encode("utf-8", "replace")).hexdigest() if given else None


def install(app: Flask) -> None:
    """Ask for a key on every request for numbers or jobs, as soon as there is one key."""

    @app.before_request
    def identify() -> None:
        g.key_id = ""
        found: Desk | None = app.config["DESK"]
        if found is None or not request.path.startswith("/v1/") or request.method == "OPTIONS":
            return
        if found.keys.required:
            scheme, _, secret = request.headers.get("Authorization", "").partition(" ")
            owner = found.keys.owner(secret.strip()) if scheme.lower() == "bearer" else None
            if owner is None:
                raise Unauthorized("This service asks for a key, and none that is valid came.")
            g.key_id = owner
