"""``/docs/``: the guide's pages and pictures, each with a tag."""

from __future__ import annotations

from functools import cache
from pathlib import Path

from flask import Blueprint, abort, current_app
from werkzeug.wrappers import Response as WerkzeugResponse

from ladderband.formats.look import LOOKS
from ladderband.web.guide.answers import SIZES, answers
from ladderband.web.guide.render import page
from ladderband.web.guide.source import HOME, names
from ladderband.web.pages import tagged

blueprint = Blueprint("guide", __name__)


@blueprint.get("/docs/")
def home() -> WerkzeugResponse:
    """The first page."""
    return _page(HOME)


@blueprint.get("/docs/<slug>")
def guide_page(slug: str) -> WerkzeugResponse:
    """One page; computed at its first visit."""
    if slug not in names():
        abort(404)
    return _page(slug)


def _page(slug: str) -> WerkzeugResponse:
    text = page(slug, current_app.config["SETTINGS"])
    return tagged(text.encode(), "text/html; charset=utf-8")


@blueprint.get("/docs/page.css")
def style() -> WerkzeugResponse:
    """The stylesheet of all pages."""
    text = (Path(__file__).parent / "page.css").read_bytes()
    return tagged(text, "text/css; charset=utf-8")


@blueprint.get("/docs/pictures/<slug>/<name>-<theme>-<size>.svg")
def guide_picture(slug: str, name: str, theme: str, size: str) -> WerkzeugResponse:
    """The picture of one request on a page."""
    if theme not in LOOKS or size not in SIZES or slug not in names():
        abort(404)
    found = answers(slug).get(name)
    if found is None or not found.block.picture:
        abort(404)
    return tagged(_picture(slug, name, theme, size), "image/svg+xml")


@cache
def _picture(slug: str, name: str, theme: str, size: str) -> bytes:
    return answers(slug)[name].picture(theme, size)
