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

from ladderband.numerics.errors import DeadlineExceeded, DomainError, PrecisionNotReached
from ladderband.schemas.base import complaints
from ladderband.usecases.limits import CostLimitExceeded

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


class Busy(WebError):
    """All places for dear requests are taken."""


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
    CostLimitExceeded: Problem(
        "cost-limit", 422, "The request is too much work",
        "The work was estimated before any of it began, and is above the limit of one request.",
        lambda error: {"estimate_s": _finite(error.estimate_s), "limit_s": error.limit_s},
    ),
    DeadlineExceeded: Problem(
        "deadline", 503, "The calculation was stopped at its time limit",
        "The work took longer than it was estimated to. Nothing was kept.",
    ),
    Busy: Problem(
        "busy", 503, "All places for calculations are taken",
        "Try again after the seconds in Retry-After.", _web,
    ),
}  # fmt: skip

HTTP_PROBLEMS: dict[int, Problem] = {
    400: Problem("bad-request", 400, "The request is malformed", "The request is not valid HTTP."),
    404: Problem("not-found", 404, "There is nothing at this address", "See /openapi.json."),
    405: Problem(
        "method-not-allowed", 405, "This method is not offered here", "Allow lists those offered."
    ),
    413: PROBLEMS[BodyTooLarge],
    415: PROBLEMS[UnsupportedMediaType],
    429: Problem("too-many-requests", 429, "Too many requests", "Wait as Retry-After says."),
    500: Problem(
        "internal", 500, "The service failed",
        "A fault of the service. Report the instance id; the log holds the rest.",
    ),
    503: PROBLEMS[Busy],
}  # fmt: skip


def all_problems() -> Iterator[Problem]:
    """Every problem, once each, by status."""
    unique = {p.slug: p for p in (*PROBLEMS.values(), *HTTP_PROBLEMS.values())}
    yield from sorted(unique.values(), key=lambda problem: (problem.status, problem.slug))


def document(
    problem: Problem, detail: str | None, extras: Mapping[str, Any] | None = None
) -> Response:
    """The problem document as a response."""
    g.problem = problem.slug
    members = {
        "type": f"/problems/{problem.slug}",
        "title": problem.title,
        "status": problem.status,
        "detail": detail or problem.meaning,
        "instance": f"urn:uuid:{uuid.uuid4()}",
        **(extras or {}),
    }
    response = Response(orjson.dumps(members), status=problem.status, content_type=MEDIA_TYPE)
    if problem.status == 503:
        response.headers["Retry-After"] = str((extras or {}).get("retry_after_s", 1))
    return response


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _known(error: Exception) -> Response:
    problem = next(PROBLEMS[kind] for kind in type(error).__mro__ if kind in PROBLEMS)
    return document(problem, str(error), problem.extras(error))


def _http(error: HTTPException) -> Response:
    problem = HTTP_PROBLEMS.get(error.code or 500, HTTP_PROBLEMS[400])
    status = error.code or 500
    if status not in HTTP_PROBLEMS and status >= 500:
        problem = HTTP_PROBLEMS[500]
    response = document(problem, None)
    for name, value in error.get_headers():
        if name.lower() in {"allow", "retry-after"}:
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
    app.register_error_handler(HTTPException, _http)
    app.register_error_handler(Exception, _fault)
