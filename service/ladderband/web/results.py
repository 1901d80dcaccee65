"""Results of jobs as files: rendered once, then sent whole or in ranges."""

from __future__ import annotations

import os
import secrets
import time
from collections.abc import Iterable, Iterator
from importlib.util import find_spec
from pathlib import Path
from typing import Any

import orjson
from flask import Response, request, send_file

from ladderband.formats.stored import UnreadableAnswer, load_answer
from ladderband.jobs import tables
from ladderband.jobs.claims import parts_of
from ladderband.jobs.database import StorageUnavailable
from ladderband.jobs.errors import ResultGone
from ladderband.jobs.submissions import JobView, request_of
from ladderband.schemas.query import ViewQuery
from ladderband.web.desk import Desk
from ladderband.web.negotiation import MEDIA_TYPES, chosen_format
from ladderband.web.resource import Body, Resource, not_modified, tag_of
from ladderband.web.resources import RESOURCES
from ladderband.web.reuse import allow_reuse

KEPT_S = 6 * 3600.0
"""Rendered files are only a cache; older ones are removed when a new one is made."""

WRITERS = {
    "json": tables.json_file,
    "csv": tables.csv_file,
    "ndjson": tables.ndjson_file,
    "npy": tables.npy_file,
}
if find_spec("pyarrow") is not None:  # the extra "tables"
    WRITERS |= {"arrow": tables.arrow_file, "parquet": tables.parquet_file}
VIEW = ViewQuery()


def single_result(desk: Desk, job: JobView) -> Response:
    """The answer to a single request, in any format of its resource."""
    resource = next(found for found in RESOURCES if found.name == job.kind)
    view = VIEW.read(request.args.to_dict(flat=False))
    name = chosen_format(request, resource.offered, view.get("format"))
    tag = tag_of(job.digest, name, view)
    return _sent(desk, tag, name, lambda: _rendered(desk, job, resource, name, view))


def _rendered(
    desk: Desk, job: JobView, resource: Resource[Any, Any], name: str, view: dict[str, Any]
) -> Body:
    body = request_of(desk.database, job.id)
    if body is None:
        raise ResultGone(job.id)
    try:
        answer = load_answer(parts_of(desk.database, job.id))
    except UnreadableAnswer:
        raise ResultGone(job.id) from None  # nothing there, or of an older version
    return resource.rendered(resource.request.read(orjson.loads(body)), answer, name, view)


def sweep_result(desk: Desk, job: JobView) -> Response:
    """The table of a sweep."""
    view = VIEW.read(request.args.to_dict(flat=False))
    name = chosen_format(request, tuple(WRITERS), view.get("format"))
    return _sent(desk, f"{job.digest}-{name}", name, lambda: _table(desk, job, name))


def _table(desk: Desk, job: JobView, name: str) -> Iterator[bytes]:
    """The table's bytes, one part of it in memory at a time; its header is the last part."""
    header: dict[str, Any] = {}
    for data in parts_of(desk.database, job.id, last=True):
        header = orjson.loads(data)
    if not header:
        raise ResultGone(job.id)
    header["request_digest"] = job.digest
    blocks = (orjson.loads(part) for part in parts_of(desk.database, job.id))
    return WRITERS[name](header, (block for block in blocks if "point" in block))


def _sent(desk: Desk, tag: str, name: str, render: Any) -> Response:
    """The file of this rendering, made if it is not there; ranges by werkzeug."""
    if tag in request.if_none_match:
        return not_modified(tag)
    folder = desk.settings.data_path / "results"
    path = folder / tag
    if not path.exists():
        _write(folder, path, render())
    response = send_file(path, mimetype=MEDIA_TYPES[name], conditional=True, etag=tag)
    response.headers["Content-Type"] = MEDIA_TYPES[name]
    response.headers.pop("Last-Modified", None)  # of the cache file, which says nothing
    response.headers.pop("Content-Disposition", None)
    return allow_reuse(response)


def _write(folder: Path, path: Path, body: Body) -> None:
    """Write all of a body, then let it appear under its name."""
    part = folder / f".{secrets.token_hex(8)}"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        _prune(folder)
        with part.open("wb") as file:
            pieces: Iterable[bytes] = (body,) if isinstance(body, bytes) else body
            file.writelines(pieces)
        part.replace(path)
    except OSError as error:
        part.unlink(missing_ok=True)
        raise StorageUnavailable(
            "The result cannot be written to the data folder at the moment; it is still on record."
        ) from error


def _prune(folder: Path) -> None:
    oldest = time.time() - KEPT_S
    for entry in os.scandir(folder):
        if entry.stat().st_mtime < oldest:
            Path(entry.path).unlink(missing_ok=True)
