"""The bench page at ``/``: a page for people, which asks only what any client can ask.

Its files are static and lie in ``static/bench``; the colours come from ``/look.css``. Browsers keep
them and ask by ETag whether they are still good, so a new version is seen at the next load.
"""

from __future__ import annotations

from dataclasses import asdict
from functools import cache
from pathlib import Path

from flask import Blueprint, Response, request, send_from_directory
from werkzeug.wrappers import Response as WerkzeugResponse

from ladderband.formats.look import LOOKS
from ladderband.web.pages import guarded

blueprint = Blueprint("bench", __name__)
FILES = Path(__file__).parent / "static" / "bench"
POLICY = (
    "default-src 'self'; img-src 'self' blob:; object-src 'none'; base-uri 'none'; "
    "form-action 'none'; frame-ancestors 'none'"
)
"""Stricter than for the other pages: no inline style either."""


@blueprint.get("/")
def bench() -> Response:
    """The page."""
    return _file("index.html")


@blueprint.get("/bench/<name>")
def bench_file(name: str) -> Response:
    """One of its scripts, or its stylesheet."""
    return _file(name)


@blueprint.get("/bench/mark.svg")
def mark() -> WerkzeugResponse:
    """Its mark, in the colours of the plots."""
    response = _guarded(Response(_mark(), content_type="image/svg+xml"))
    response.headers["Cache-Control"] = "no-cache"
    response.add_etag()
    return response.make_conditional(request)


@cache
def _mark() -> str:
    return (FILES / "mark.svg").read_text("utf-8").format_map(asdict(LOOKS["dark"]))


def _file(name: str) -> Response:
    return _guarded(send_from_directory(FILES, name))


def _guarded(response: Response) -> Response:
    guarded(response).headers["Content-Security-Policy"] = POLICY
    return response
