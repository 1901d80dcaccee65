"""What operators need: health, readiness, metrics, request ids, one JSON log line a request."""

from __future__ import annotations

import itertools
import logging
import os
import re
import sys
import time
import uuid
from typing import Any

import orjson
from flask import Blueprint, Flask, Response, current_app, g, request
from prometheus_client import CollectorRegistry, generate_latest
from prometheus_client.multiprocess import MultiProcessCollector
from prometheus_client.registry import REGISTRY

from ladderband.jobs.database import StorageUnavailable
from ladderband.jobs.submissions import overview
from ladderband.web.desk import Desk
from ladderband.web.ledger import Entry, Ledger

REQUEST_ID = re.compile(r"[A-Za-z0-9._:/+=-]{1,80}")
_WORKER = uuid.uuid4().hex[:12]
_NUMBERS = itertools.count(1)
METRICS_MEDIA_TYPE = "text/plain; version=0.0.4; charset=utf-8"

blueprint = Blueprint("operations", __name__)


class JsonLines(logging.Formatter):
    """One log record as one line of JSON."""

    def format(self, record: logging.LogRecord) -> str:
        line = {
            "time": time.strftime("%Y-%m-%dT%H:%M:%S", time.gmtime(record.created))
            + f".{int(record.msecs):03d}Z",
            "level": record.levelname.lower(),
            "event": record.getMessage(),
            **{k: v for k, v in record.__dict__.items() if k in {"instance", "request_id"}},
        }
        if record.exc_info:
            line["traceback"] = self.formatException(record.exc_info)
        return orjson.dumps(line).decode()


def configure_logging() -> None:
    """Send the package's log records to stderr as JSON lines, once a process."""
    logger = logging.getLogger("ladderband")
    if not logger.handlers:
        handler = logging.StreamHandler(sys.stderr)
        handler.setFormatter(JsonLines())
        logger.addHandler(handler)
        logger.setLevel(logging.INFO)


def install(app: Flask, log_requests: bool) -> None:
    """Count, time and log every request of the app."""
    configure_logging()
    ledger = Ledger(log_requests)
    app.config["LEDGER"] = ledger
    app.register_blueprint(blueprint)
    app.before_request(_begin)

    @app.after_request
    def finish(response: Response) -> Response:
        response.headers.add("X-Request-ID", g.request_id)
        ledger.add(_entry(response))
        return response


def _begin() -> None:
    g.began = time.perf_counter()
    given = request.environ.get("HTTP_X_REQUEST_ID", "")
    g.request_id = given if REQUEST_ID.fullmatch(given) else f"{_WORKER}-{next(_NUMBERS)}"


def _entry(response: Response) -> Entry:
    rule = request.url_rule
    return Entry(
        time=time.time(),
        request_id=g.request_id,
        method=request.method if rule is not None else "none",  # any word can be sent as a method
        route=rule.rule if rule is not None else "none",
        status=response.status_code,
        elapsed_s=time.perf_counter() - g.began,
        problem=g.get("problem"),
        digest=g.get("digest"),
    )


@blueprint.get("/healthz")
def healthz() -> Response:
    """The process answers; touches nothing."""
    return Response(b'{"status":"ok"}', content_type="application/json")


@blueprint.get("/readyz")
def readyz() -> Response:
    """Warmed up and willing to work; 503 otherwise."""
    ready = current_app.config["READY"].is_set()
    desk: Desk | None = current_app.config["DESK"]
    members: dict[str, Any] = {"status": "ready" if ready else "starting"}
    if ready and desk is not None:
        members |= _records_state(desk)
        ready = members["status"] == "ready"
    return Response(
        orjson.dumps(members), status=200 if ready else 503, content_type="application/json"
    )


def _records_state(desk: Desk) -> dict[str, Any]:
    try:
        if not desk.database.is_current():
            return {"status": "the job records wait for their migration"}
        return {"status": "ready", "engines": overview(desk.database).engines}
    except StorageUnavailable:
        return {"status": "the job records cannot be reached"}


@blueprint.get("/metrics")
def metrics() -> Response:
    """Counters of all workers in the Prometheus text format."""
    current_app.config["LEDGER"].flush()
    registry = REGISTRY
    if "PROMETHEUS_MULTIPROC_DIR" in os.environ:
        registry = CollectorRegistry()
        MultiProcessCollector(registry)  # type: ignore[no-untyped-call]
    text = generate_latest(registry) + _job_gauges(current_app.config["DESK"])
    return Response(text, content_type=METRICS_MEDIA_TYPE)


def _job_gauges(desk: Desk | None) -> bytes:
    """Unfinished jobs and living engines, from the records at this moment."""
    if desk is None:
        return b""
    try:
        found = overview(desk.database)
    except StorageUnavailable:
        return b""
    return (
        "# HELP ladderband_jobs Unfinished jobs.\n# TYPE ladderband_jobs gauge\n"
        f'ladderband_jobs{{state="queued"}} {found.queued}\n'
        f'ladderband_jobs{{state="running"}} {found.running}\n'
        "# HELP ladderband_engines Engines alive.\n# TYPE ladderband_engines gauge\n"
        f"ladderband_engines {found.engines}\n"
    ).encode()
