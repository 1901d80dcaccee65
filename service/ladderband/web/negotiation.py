"""Which format a request gets: ``?format=`` first, then Accept, JSON when neither says."""

from __future__ import annotations

from collections.abc import Iterable

from flask import Request

from ladderband.web.problems import NotAcceptable

MEDIA_TYPES: dict[str, str] = {
    "json": "application/json",
    "csv": "text/csv; charset=utf-8",
    "ndjson": "application/x-ndjson",
    "npy": "application/x-npy",
    "svg": "image/svg+xml",
    "png": "image/png",
    "jcamp": "chemical/x-jcamp-dx",
    "arrow": "application/vnd.apache.arrow.file",
    "parquet": "application/vnd.apache.parquet",
}
"""Name for ``?format=`` and media type of every format of the service."""

_NAMES = {media.partition(";")[0]: name for name, media in MEDIA_TYPES.items()}


def chosen_format(request: Request, offered: Iterable[str], wanted: str | None) -> str:
    """The name of the format to answer in.

    Raises
    ------
    NotAcceptable
        Nothing that is offered is accepted.
    """
    offered = tuple(offered)
    if wanted is not None:
        if wanted in offered:
            return wanted
        raise _refusal(offered)
    accept = request.environ.get("HTTP_ACCEPT", "*/*")
    if accept in ("*/*", "application/json"):  # what nearly every program sends
        return "json"
    media = [MEDIA_TYPES[name].partition(";")[0] for name in offered]
    best = request.accept_mimetypes.best_match(media)
    if best is None:
        raise _refusal(offered)
    return _NAMES[best]


def _refusal(offered: tuple[str, ...]) -> NotAcceptable:
    available = {name: MEDIA_TYPES[name] for name in offered}
    return NotAcceptable("This resource has no such format; see available.", available=available)
