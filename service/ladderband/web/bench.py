"""The bench page at ``/``: a page for people, which asks only what any client can ask.

Its files are static and lie in ``static/bench``; the colours come from ``/look.css``. Browsers keep
them and ask by ETag whether they are still good, so a new version is seen at the next load.
"""

from __future__ import annotations

from pathlib import Path

from flask import Blueprint, Response, send_from_directory

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
    """One of its scripts, its stylesheet or its mark."""
    return _file(name)


def _file(name: str) -> Response:
    response = guarded(send_from_directory(FILES, name))
    response.headers["Content-Security-Policy"] = POLICY
    return response
