"""The OpenAPI operations of jobs and sweeps."""

from __future__ import annotations

from typing import Any

from ladderband.jobs.records import FINAL_STATES, OPEN_STATES
from ladderband.schemas.jobs import JobListSchema, JobSchema
from ladderband.schemas.query import ViewQuery
from ladderband.schemas.sweeps import SweepRequest
from ladderband.web.jobs import PAGE

_TEXT = {"type": "string"}
_BINARY = {"type": "string", "format": "binary"}
_JOB = {"application/json": {"schema": JobSchema}}
_JOB_ID = {"name": "job_id", "in": "path", "required": True, "schema": _TEXT}
_LOCATION = {"Location": {"description": "Address of the job.", "schema": _TEXT}}
_KEY_HEADER = {
    "name": "Idempotency-Key",
    "in": "header",
    "required": False,
    "schema": _TEXT,
    "description": "A repeat with the same key and request finds the job of the first.",
}
_PREFER_HEADER = {
    "name": "Prefer",
    "in": "header",
    "required": False,
    "schema": _TEXT,
    "description": "respond-async: answer with a job at once. wait=N: wait up to N seconds.",
}
ASYNC_PARAMETERS = [_PREFER_HEADER, _KEY_HEADER]
ACCEPTED = {
    "description": "A job was made of the request: it was asked for, or the work takes longer than "
    "the wait.",
    "headers": _LOCATION,
    "content": _JOB,
}

EXAMPLE = {
    "resource": "progressions",
    "request": {
        "process": "absorption",
        "origin_cm1": 26650.0,
        "modes": [
            {"wavenumber_initial_cm1": 992.0, "wavenumber_final_cm1": 923.0, "huang_rhys": 1.25}
        ],
    },
    "vary": [
        {"pointer": "/temperature_k", "values": [77.0, 298.15]},
        {
            "pointer": "/modes/0/huang_rhys",
            "range": {"start": 0.5, "stop": 2.0, "points": 4, "spacing": "linear"},
        },
    ],
    "collect": ["/completeness/captured", "/accuracy/bound"],
}


def job_operations() -> dict[str, dict[str, Any]]:
    """Path to method to operation."""
    one = [_JOB_ID]
    return {
        "/v1/sweeps": {"post": _sweep()},
        "/v1/jobs": {
            "get": _operation("listJobs", "The key's jobs, newest first", _page(), JobListSchema)
        },
        "/v1/jobs/{job_id}": {
            "get": _operation("getJob", "One job as it stands", one, JobSchema),
            "delete": _operation("cancelJob", "End a job that has not ended", one, JobSchema),
        },
        "/v1/jobs/{job_id}/events": {"get": _events()},
        "/v1/jobs/{job_id}/result": {"get": _result()},
    }


def _operation(
    name: str, summary: str, parameters: list[dict[str, Any]], schema: Any
) -> dict[str, Any]:
    content = {"application/json": {"schema": schema}}
    return _described(name, summary, parameters, {"200": _response("As asked.", content)})


def _described(
    name: str, summary: str, parameters: list[dict[str, Any]], responses: dict[str, Any]
) -> dict[str, Any]:
    return {
        "operationId": name,
        "summary": summary,
        "parameters": parameters,
        "responses": {**responses, "default": "Problem"},
    }


def _response(description: str, content: dict[str, Any]) -> dict[str, Any]:
    return {"description": description, "content": content}


def _sweep() -> dict[str, Any]:
    body = {"schema": SweepRequest, "examples": {"two-members": {"value": EXAMPLE}}}
    summary = "One request with some members varied, as a job with one table"
    operation = _described("submitSweep", summary, [_KEY_HEADER], {"202": ACCEPTED})
    content = {"application/json": body}
    return {**operation, "requestBody": {"required": True, "content": content}}


def _page() -> list[dict[str, Any]]:
    limit = {"type": "integer", "minimum": 1, "maximum": PAGE}
    state = {"type": "string", "enum": [*OPEN_STATES, *FINAL_STATES]}
    before = {"type": "number", "minimum": 0, "exclusiveMaximum": 1e12}
    return [
        _query("limit", limit, "Most jobs of a page."),
        _query("state", state, "Only jobs in this state."),
        _query("before", before, "Only jobs submitted before this time, seconds since 1970."),
    ]


def _query(name: str, schema: dict[str, Any], description: str) -> dict[str, Any]:
    return {"name": name, "in": "query", "required": False} | {
        "schema": schema,
        "description": description,
    }


def _events() -> dict[str, Any]:
    header = {
        "name": "Last-Event-ID",
        "in": "header",
        "required": False,
        "schema": _TEXT,
        "description": "Id of the last event seen.",
    }
    stream = _response("Events progress and end; data is the job.", {"text/event-stream": {}})
    stream["content"]["text/event-stream"] = {"schema": _TEXT}
    ended = {"description": "The job has ended, and Last-Event-ID names its end."}
    responses = {"200": stream, "204": ended}
    return _described("followJob", "Progress as server-sent events", [_JOB_ID, header], responses)


def _result() -> dict[str, Any]:
    content = {
        "application/json": {"schema": {"type": "object", "additionalProperties": {}}},
        "text/csv": {"schema": _TEXT},
        "application/x-ndjson": {"schema": _TEXT},
        "image/svg+xml": {"schema": _TEXT},
        "chemical/x-jcamp-dx": {"schema": _TEXT},
        "application/x-npy": {"schema": _BINARY},
        "image/png": {"schema": _BINARY},
        "application/vnd.apache.arrow.file": {"schema": _BINARY},
        "application/vnd.apache.parquet": {"schema": _BINARY},
    }
    view = [
        _query(name, field.json_schema(), field.metadata["description"])  # type: ignore[attr-defined]
        for name, field in sorted(ViewQuery().fields.items())
    ]
    responses = {
        "200": _response("The whole result.", content),
        "206": _response("The bytes asked for by Range.", content),
        "304": {"description": "If-None-Match names this result."},
    }
    summary = "The result in any format of its resource"
    return _described("getJobResult", summary, [_JOB_ID, *view], responses)
