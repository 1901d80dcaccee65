"""The description, its page, the colours and the problem pages; all files from this machine."""

from __future__ import annotations

import hashlib
import html
from functools import cache
from pathlib import Path

import flask_swagger_ui
from flask import Blueprint, Response, abort, redirect, request, send_from_directory
from werkzeug.wrappers import Response as WerkzeugResponse

from ladderband.web.guide.frame import framed
from ladderband.web.look_css import look_css
from ladderband.web.problems import all_problems

blueprint = Blueprint("pages", __name__)
FILES = Path(flask_swagger_ui.__file__).parent / "dist"
OWN = Path(__file__).parent / "static"
SHOWN = {"swagger-ui.css", "swagger-ui-bundle.js", "favicon-16x16.png", "favicon-32x32.png"}
POLICY = (
    "default-src 'none'; style-src 'self'; img-src 'self'; frame-ancestors 'none'; "
    "base-uri 'none'; form-action 'none'"
)
INTERFACE_POLICY = (
    "default-src 'none'; script-src 'self'; style-src 'self' 'unsafe-inline'; "
    "img-src 'self' data:; connect-src 'self'; frame-ancestors 'none'; base-uri 'none'"
)
"""Swagger UI writes its styles into the page and draws its icons as data; it alone may."""


@cache
def _description() -> bytes:
    from ladderband.web.description import description_json

    return description_json()


@blueprint.get("/openapi.json")
def openapi() -> WerkzeugResponse:
    """The OpenAPI 3.1 document."""
    return tagged(_description(), "application/json")


@blueprint.get("/look.css")
def look() -> WerkzeugResponse:
    """Colours of all pages."""
    return tagged(look_css().encode(), "text/css; charset=utf-8")


@blueprint.get("/docs")
def docs_home() -> WerkzeugResponse:
    """To the guide."""
    return redirect("docs/", 308)


@blueprint.get("/docs/interface")
def interface() -> Response:
    """The description as a page on which requests can be tried."""
    return guarded(send_from_directory(OWN, "interface.html"), INTERFACE_POLICY)


@blueprint.get("/docs/interface/<name>")
def interface_file(name: str) -> Response:
    """A file of that page."""
    if name in ("interface.js", "interface.css"):
        return guarded(send_from_directory(OWN, name))
    if name not in SHOWN:
        abort(404)
    return guarded(send_from_directory(FILES, name))


@blueprint.get("/problems/<slug>")
def problem(slug: str) -> WerkzeugResponse:
    """What a problem type means."""
    for known in all_problems():
        if known.slug == slug:
            title, meaning = html.escape(known.title), html.escape(known.meaning)
            body = (
                f"<h1>{title}</h1><p>{meaning}</p>"
                f"<p>HTTP status {known.status}, type <code>/problems/{slug}</code>. "
                '<a href="../docs/errors">How errors are told</a></p>'
            )
            text = framed(known.title, body, "", docs="../docs/")
            return tagged(text.encode(), "text/html; charset=utf-8")
    abort(404)


def guarded(response: Response, policy: str = POLICY) -> Response:
    """A page of ours: nothing from elsewhere, and no scripts unless the policy says so."""
    response.headers["Content-Security-Policy"] = policy
    response.headers["X-Content-Type-Options"] = "nosniff"
    return response


def tagged(content: bytes, kind: str) -> WerkzeugResponse:
    """A file that browsers keep and ask about: 304 when it is still the same."""
    response = guarded(Response(content, content_type=kind))
    response.headers["Cache-Control"] = "public, max-age=0, must-revalidate"
    response.set_etag(hashlib.blake2b(content, digest_size=16).hexdigest())
    return response.make_conditional(request)
