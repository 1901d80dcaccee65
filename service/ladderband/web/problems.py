"""Errors on the wire: the only place that knows which exception is which HTTP problem (RFC 9457).

Every error the service can send has a row in ``PROBLEMS``; its slug is part of the interface and is
never renamed. An exception without a row is a fault of the service: the client sees an instance id,
the log line with the same id holds the traceback.
"""

from __future__ import annotations

import logging
import math
import uuid
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from itertools import islice
from typing import Any

import orjson
from flask import Flask, Response, g
from marshmallow import ValidationError
from werkzeug.exceptions import HTTPException

from ladderband.jobs.database import StorageUnavailable
from ladderband.jobs.errors import (
    JobFinished,
    JobNotFound,
    QueueFull,
    ResultGone,
    ResultNotReady,
    SweepError,
    TokenMismatch,
)
from ladderband.numerics.errors import DeadlineExceeded, DomainError, PrecisionNotReached
from ladderband.schemas.base import complaints
from ladderband.usecases.limits import AnswerTooLarge, CostLimitExceeded
from ladderband.usecases.mode_maps import ModesNeedAChoice

MEDIA_TYPE = "application/problem+json"
MAX_ERRORS = 20
log = logging.getLogger("ladderband.fault")


class WebError(Exception):
    """A refusal of the web layer itself; ``extras`` become members of the problem document."""

    def __init__(self, detail: str, **extras: Any) -> None:
        super().__init__(detail)
        self.extras = extras


class MalformedJson(WebError):
    """The body is not JSON, repeats a member, or nests too deeply."""


class BodyTooLarge(WebError):
    """The body is larger than the limit."""


class UnsupportedMediaType(WebError):
    """The body's media type is not JSON."""


class NotAcceptable(WebError):
    """None of the accepted formats is offered."""


class AlreadyHeld(WebError):
    """If-None-Match names the answer, and the method is not GET."""


class Unauthorized(WebError):
    """No valid key came with the request."""


class JobsOff(WebError):
    """The application has no job records."""


class JobFailed(Exception):
    """The job a request waited for failed; ``problem`` is the document it failed with."""

    def __init__(self, problem: Mapping[str, Any]) -> None:
        super().__init__(problem["detail"])
        self.problem = problem


@dataclass(frozen=True, slots=True)
class Problem:
    """Slug, status, title and the meaning shown on the problem's page."""

    slug: str
    status: int
    title: str
    meaning: str
    extras: Callable[[Any], Mapping[str, Any]] = lambda error: {}


def _validation(error: ValidationError) -> dict[str, Any]:
    found = islice(complaints(error.messages), MAX_ERRORS)
    return {
        "detail": "The request does not match its description; see errors.",
        "errors": [_error(pointer, c.detail, c.allowed, c.example) for pointer, c in found],
    }


def _domain(error: DomainError) -> dict[str, Any]:
    return {"errors": [_error(error.pointer, str(error), None, None)]}


def _error(pointer: str, detail: str, allowed: str | None, example: Any) -> dict[str, Any]:
    entry = {"pointer": "#" + pointer, "detail": detail, "allowed": allowed, "example": example}
    return {name: value for name, value in entry.items() if value is not None}


def _web(error: WebError) -> Mapping[str, Any]:
    return error.extras


PROBLEMS: dict[type[Exception], Problem] = {
    MalformedJson: Problem(
        "malformed-json", 400, "The body is not well-formed JSON",
        "Send one JSON object in UTF-8. NaN, Infinity, numbers beyond double precision, repeated "
        "members and very deep nesting are refused.", _web,
    ),
    NotAcceptable: Problem(
        "not-acceptable", 406, "None of the accepted formats is offered",
        "Ask for one of the formats listed in available, by Accept or by ?format=.", _web,
    ),
    AlreadyHeld: Problem(
        "already-held", 412, "You already hold this answer",
        "If-None-Match names the ETag of the answer to this very request.", _web,
    ),
    BodyTooLarge: Problem(
        "body-too-large", 413, "The body is too large",
        "Split the request; limit_bytes is the largest body.", _web,
    ),
    UnsupportedMediaType: Problem(
        "unsupported-media-type", 415, "The body is not JSON",
        "Send Content-Type: application/json, without a content encoding.", _web,
    ),
    ValidationError: Problem(
        "validation", 422, "The request does not match its description",
        "Each entry of errors has a JSON pointer, what is wrong there, what is allowed and an "
        "example.", _validation,
    ),
    DomainError: Problem(
        "domain", 422, "An input lies outside the domain of the formulas",
        "The members are well-formed, but together they describe nothing the service computes.",
        _domain,
    ),
    PrecisionNotReached: Problem(
        "precision-not-reached", 422, "The requested precision was not reached",
        "No route met the requested bound or digits within the cost limit. Ask for less, or for "
        "fewer quanta.", lambda error: {"requested": error.requested, "reached": error.reached},
    ),
    ModesNeedAChoice: Problem(
        "modes-need-a-choice", 422, "Modes without a harmonic oscillator need a choice",
        "Modes with an imaginary or nearly vanishing wavenumber are never dropped silently. modes "
        "lists them; send mode_choices with one entry for each.",
        lambda error: {"modes": list(error.modes), "actions": ["freeze", "replace"]},
    ),
    CostLimitExceeded: Problem(
        "cost-limit", 422, "The request is too much work",
        "The work was estimated before any of it began, and is above the limit of one request.",
        lambda error: {"estimate_s": _finite(error.estimate_s), "limit_s": error.limit_s},
    ),
    AnswerTooLarge: Problem(
        "answer-too-large", 422, "The answer would be too large",
        "The tables asked for hold more numbers than one answer may.",
        lambda error: {"numbers": error.numbers, "limit_numbers": error.limit},
    ),
    DeadlineExceeded: Problem(
        "deadline", 503, "The calculation was stopped at its time limit",
        "The work took longer than it was estimated to. Nothing was kept.",
    ),
    Unauthorized: Problem(
        "unauthorized", 401, "A valid key is needed",
        "Send Authorization: Bearer KEY; the operator makes keys with ladderband keys add.",
    ),
    JobNotFound: Problem(
        "job-not-found", 404, "There is no such job",
        "The job never was, belongs to another key, or was forgotten long after its end.",
    ),
    JobFinished: Problem(
        "job-finished", 409, "The job has ended", "A job that has ended cannot be cancelled.",
        lambda error: {"state": error.state},
    ),
    ResultNotReady: Problem(
        "result-not-ready", 409, "The job has no result",
        "It is not finished yet, or ended without one; state tells which.",
        lambda error: {"state": error.state},
    ),
    ResultGone: Problem(
        "result-gone", 410, "The result was removed",
        "Results are kept for a time the operator sets. Send the request again.",
    ),
    SweepError: Problem(
        "sweep", 422, "The sweep does not fit its request",
        "A pointer leads nowhere, a list has the wrong length, or there are too many points.",
        lambda error: {"errors": [_error(error.pointer, str(error), None, None)]},
    ),
    TokenMismatch: Problem(
        "idempotency-mismatch", 422, "The Idempotency-Key was used for another request",
        "One Idempotency-Key stands for one request.",
    ),
    QueueFull: Problem(
        "queue-full", 429, "Too many unfinished jobs",
        "The key has as many unfinished jobs as it may have.",
        lambda error: {"limit": error.limit, "retry_after_s": 5},
    ),
    StorageUnavailable: Problem(
        "storage-unavailable", 503, "The job records are not available",
        "The database cannot be reached or is full. Nothing was lost or changed.",
        lambda error: {"retry_after_s": 5},
    ),
    JobsOff: Problem(
        "jobs-off", 503, "This process keeps no jobs",
        "The application was started without job records; ladderband serve has them.",
    ),
}  # fmt: skip

HTTP_PROBLEMS: dict[int, Problem] = {
    400: Problem("bad-request", 400, "The request is malformed", "The request is not valid HTTP."),
    404: Problem("not-found", 404, "There is nothing at this address", "See /openapi.json."),
    405: Problem(
        "method-not-allowed", 405, "This method is not offered here", "Allow lists those offered."
    ),
    413: PROBLEMS[BodyTooLarge],
    414: Problem(
        "address-too-long", 414, "The address is too long",
        "The request line has more than 8190 bytes. Send the question as the body of a POST.",
    ),
    415: PROBLEMS[UnsupportedMediaType],
    416: Problem(
        "range-not-satisfiable", 416, "The result has no such bytes", "Content-Range has its length."
    ),
    429: Problem("too-many-requests", 429, "Too many requests", "Wait as Retry-After says."),
    431: Problem(
        "headers-too-large", 431, "The header fields are too large", "Send fewer or shorter."
    ),
    500: Problem(
        "internal", 500, "The service failed",
        "A fault of the service. Report the instance id; the log holds the rest.",
    ),
    503: Problem(
        "unavailable", 503, "The service cannot answer now", "Try again after Retry-After seconds."
    ),
}  # fmt: skip


JOB_PROBLEMS = (
    Problem(
        "memory-limit", 422, "Out of memory",
        "The computation needed more memory than one may use. Ask for less.",
    ),
    Problem(
        "compute-crashed", 500, "The computation crashed",
        "The compute process died three times under the same part of the request.",
    ),
)  # fmt: skip
"""What a job can end with besides; written by the engines, which do not know the web."""


def all_problems() -> Iterator[Problem]:
    """Every problem, once each, by status."""
    every = (*PROBLEMS.values(), *HTTP_PROBLEMS.values(), *JOB_PROBLEMS)
    unique = {p.slug: p for p in every}
    yield from sorted(unique.values(), key=lambda problem: (problem.status, problem.slug))


def members_of(problem: Problem, detail: str | None, instance: str) -> dict[str, Any]:
    """The members every problem document has."""
    return {
        "type": f"/problems/{problem.slug}",
        "title": problem.title,
        "status": problem.status,
        "detail": detail or problem.meaning,
        "instance": instance,
    }


def document(
    problem: Problem, detail: str | None, extras: Mapping[str, Any] | None = None
) -> Response:
    """The problem document as a response."""
    g.problem = problem.slug
    return response_of(_document_members(problem, detail, extras))


def response_of(members: Mapping[str, Any]) -> Response:
    """A complete problem document as a response, with the headers its status asks for."""
    status = members["status"]
    response = Response(orjson.dumps(members), status=status, content_type=MEDIA_TYPE)
    if status in (429, 503):
        response.headers["Retry-After"] = str(members.get("retry_after_s", 1))
    if status == 401:
        response.headers["WWW-Authenticate"] = "Bearer"
    return response


def document_of(error: Exception) -> dict[str, Any] | None:
    """The problem document of an error that has a row here; None for any other."""
    problem = next((PROBLEMS[kind] for kind in type(error).__mro__ if kind in PROBLEMS), None)
    if problem is None:
        return None
    return _document_members(problem, str(error), problem.extras(error))


def _document_members(
    problem: Problem, detail: str | None, extras: Mapping[str, Any] | None
) -> dict[str, Any]:
    return {**members_of(problem, detail, f"urn:uuid:{uuid.uuid4()}"), **(extras or {})}


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _known(error: Exception) -> Response:
    members = document_of(error)
    assert members is not None
    g.problem = members["type"].removeprefix("/problems/")
    return response_of(members)


def _failed(error: JobFailed) -> Response:
    """A request that was waited for ended with the problem the engine wrote down."""
    g.problem = str(error.problem["type"]).removeprefix("/problems/")
    return response_of(error.problem)


def _http(error: HTTPException) -> Response:
    problem = HTTP_PROBLEMS.get(error.code or 500, HTTP_PROBLEMS[400])
    status = error.code or 500
    if status not in HTTP_PROBLEMS and status >= 500:
        problem = HTTP_PROBLEMS[500]
    response = document(problem, None)
    for name, value in error.get_headers():
        if name.lower() in {"allow", "retry-after", "content-range"}:
            response.headers[name] = value
    return response


def _fault(error: Exception) -> Response:
    response = document(HTTP_PROBLEMS[500], None)
    instance = orjson.loads(response.get_data())["instance"]
    log.error("fault", exc_info=error, extra={"instance": instance})
    return response


def install(app: Flask) -> None:
    """Route every exception of the app through this module."""
    for kind in PROBLEMS:
        app.register_error_handler(kind, _known)
    app.register_error_handler(JobFailed, _failed)
    app.register_error_handler(HTTPException, _http)
    app.register_error_handler(Exception, _fault)
