"""The bench page at ``/``: a page for people, which asks only what any client can ask.

Its files lie in ``static/bench`` and are served below an address that names their contents: a browser
keeps them for good and asks only for the page itself, and never mixes files of two versions.
"""

from __future__ import annotations

import hashlib
from dataclasses import asdict
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
"""Scripts and styles of its own files only, nothing inline; blobs are the files it lets a reader save."""

FOR_GOOD = "public, max-age=31536000, immutable"


@blueprint.get("/")
def bench() -> WerkzeugResponse:
    """The page."""
    response = guarded(Response(page(), content_type="text/html; charset=utf-8"), POLICY)
    response.headers["Cache-Control"] = "no-cache"
    response.add_etag()
    return response.make_conditional(request)


def page() -> str:
    """``index.html`` with the address of its files."""
    text = (FILES / "index.html").read_text("utf-8")
    return text.replace('"bench/', f'"bench/{contents()}/')


def contents() -> str:
    """A name for what is in all the files; not kept, so that an edited file is seen at once."""
    digest = hashlib.blake2b(digest_size=8)
    for path in sorted(FILES.iterdir()):
        digest.update(path.read_bytes())
    return digest.hexdigest()


@blueprint.get("/bench/<version>/<name>")
def bench_file(version: str, name: str) -> Response:
    """One of its scripts, or its stylesheet."""
    return _kept(send_from_directory(FILES, name), version)


@blueprint.get("/bench/<version>/mark.svg")
def mark(version: str) -> Response:
    """Its mark, in the colours of the plots."""
    text = (FILES / "mark.svg").read_text("utf-8").format_map(asdict(LOOKS["dark"]))
    return _kept(Response(text, content_type="image/svg+xml"), version)


def _kept(response: Response, version: str) -> Response:
    if version == contents():  # an address of another version still answers, but is not kept
        response.headers["Cache-Control"] = FOR_GOOD
    return guarded(response, POLICY)
