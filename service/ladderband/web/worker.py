"""gunicorn's threaded worker, with problem documents for requests that are not even HTTP."""

from __future__ import annotations

import contextlib
import socket
import uuid
from typing import Any

import orjson
from gunicorn.http.errors import LimitRequestHeaders, LimitRequestLine, ParseException
from gunicorn.workers import gthread

from ladderband.web.problems import HTTP_PROBLEMS, MEDIA_TYPE, Problem, members_of

# A stopping worker keeps idle connections this long for a request that may be under way (2 s by
# default; with it a stop takes more than 3 s on a busy machine).
gthread.STOP_KEEPALIVE_LINGER = 1.0


class Worker(gthread.ThreadWorker):  # type: ignore[misc]
    """Answers in our own words what gunicorn refuses before the application sees it."""

    def handle_error(self, req: Any, client: socket.socket, addr: Any, exc: BaseException) -> None:
        """Answer a request that cannot be parsed."""
        if not isinstance(exc, ParseException):
            super().handle_error(req, client, addr, exc)
            return
        with contextlib.suppress(OSError):  # the client may be gone
            client.sendall(_refusal(exc))


def _refusal(error: ParseException) -> bytes:
    problem = _problem(error)
    body = orjson.dumps(members_of(problem, None, f"urn:uuid:{uuid.uuid4()}"))
    head = (
        f"HTTP/1.1 {problem.status} {problem.title}\r\nConnection: close\r\n"
        f"Content-Type: {MEDIA_TYPE}\r\nContent-Length: {len(body)}\r\n\r\n"
    )
    return head.encode("ascii") + body


def _problem(error: ParseException) -> Problem:
    if isinstance(error, LimitRequestLine):
        return HTTP_PROBLEMS[414]
    if isinstance(error, LimitRequestHeaders):
        return HTTP_PROBLEMS[431]
    return HTTP_PROBLEMS[400]
