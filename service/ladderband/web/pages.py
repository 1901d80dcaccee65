"""The description and the documentation pages: all files from this machine, none from elsewhere."""

from __future__ import annotations

import html
from functools import cache
from pathlib import Path

import flask_swagger_ui
from flask import Blueprint, Response, abort, redirect, send_from_directory
from werkzeug.wrappers import Response as WerkzeugResponse

from ladderband.web.look_css import look_css
from ladderband.web.problems import all_problems

blueprint = Blueprint("pages", __name__)
FILES = Path(flask_swagger_ui.__file__).parent / "dist"
OWN = Path(__file__).parent / "static"
SHOWN = {"swagger-ui.css", "swagger-ui-bundle.js", "favicon-16x16.png", "favicon-32x32.png"}
POLICY = (
    "default-src 'self'; style-src 'self' 'unsafe-inline'; img-src 'self' data:; "
    "frame-ancestors 'none'; base-uri 'none'"
)


@cache
def _description() -> bytes:
    from ladderband.web.description import description_json

    return description_json()


@blueprint.get("/openapi.json")
def openapi() -> Response:
    """The OpenAPI 3.1 document."""
    return Response(_description(), content_type="application/json")


@blueprint.get("/look.css")
def look() -> Response:
    """Colours of all pages."""
    return guarded(Response(look_css(), content_type="text/css; charset=utf-8"))


@blueprint.get("/docs")
def docs_home() -> WerkzeugResponse:
    """To the documentation page."""
    return redirect("docs/", 308)


@blueprint.get("/docs/")
def docs() -> Response:
    """The documentation page."""
    return guarded(send_from_directory(OWN, "docs.html"))


@blueprint.get("/docs/<name>")
def docs_file(name: str) -> Response:
    """A file of the documentation page."""
    if name == "docs.js":
        return guarded(send_from_directory(OWN, name))
    if name not in SHOWN:
        abort(404)
    return guarded(send_from_directory(FILES, name))


@blueprint.get("/problems/<slug>")
def problem(slug: str) -> Response:
    """What a problem type means."""
    for known in all_problems():
        if known.slug == slug:
            title, meaning = html.escape(known.title), html.escape(known.meaning)
            text = (
                f"<!doctype html><title>{title}</title><h1>{title}</h1>"
                f"<p>HTTP status {known.status}.</p><p>{meaning}</p>"
            )
            return guarded(Response(text, content_type="text/html; charset=utf-8"))
    abort(404)


def guarded(response: Response) -> Response:
    """A page of ours: scripts and pictures from here only."""
    response.headers["Content-Security-Policy"] = POLICY
    response.headers["X-Content-Type-Options"] = "nosniff"
    return response
