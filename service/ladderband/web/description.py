"""The OpenAPI 3.1 document, made from the declarations the requests are answered with."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import orjson
from apispec import APISpec
from apispec.ext.marshmallow import MarshmallowPlugin

from ladderband import __version__
from ladderband.schemas.base import NUMBER, StrictSchema
from ladderband.schemas.query import VIEW_HELP, QuerySchema, ViewQuery
from ladderband.web.jobs_description import ACCEPTED, ASYNC_PARAMETERS, job_operations
from ladderband.web.negotiation import MEDIA_TYPES
from ladderband.web.problems import MEDIA_TYPE as PROBLEM_TYPE
from ladderband.web.problems import all_problems
from ladderband.web.resource import Resource
from ladderband.web.resources import RESOURCES

INTRODUCTION = (
    "Overlap integrals, line lists and bands of vibrational transitions; every number comes with "
    "a bound. Wavenumbers are in cm^-1, temperatures in K. Errors are problem documents (RFC 9457)."
)
_BINARY = {"type": "string", "format": "binary"}
_TEXT = {"type": "string"}
_BODIES = {
    "csv": _TEXT,
    "ndjson": _TEXT,
    "svg": _TEXT,
    "jcamp": _TEXT,
    "npy": _BINARY,
    "png": _BINARY,
}
_REQUEST_ID = {"type": "string"}


def description() -> dict[str, Any]:
    """The whole document."""
    plugin = MarshmallowPlugin(schema_name_resolver=_name)
    spec = APISpec(
        title="Ladderband",
        version=__version__,
        openapi_version="3.1.0",
        info={"description": INTRODUCTION, "license": {"name": "MIT", "identifier": "MIT"}},
        plugins=[plugin],
    )
    plugin.converter.add_attribute_function(_own_schema)
    _add_problem(spec)
    for resource in RESOURCES:
        operations = {"post": _post(resource)}
        if resource.short_form is not None:
            operations["get"] = _get(resource, resource.short_form)
        spec.path(path=resource.path, operations=operations)
    for path, operation in _operations().items():
        spec.path(path=path, operations={"get": operation})
    for path, operations in job_operations().items():
        spec.path(path=path, operations=operations)
    document: dict[str, Any] = spec.to_dict()
    _state_choices(document)
    return document


def description_json() -> bytes:
    """The document as it is served and committed: sorted, indented, one final newline."""
    options = orjson.OPT_SORT_KEYS | orjson.OPT_INDENT_2 | orjson.OPT_APPEND_NEWLINE
    return orjson.dumps(description(), option=options)


def _name(schema: Any) -> str:
    kind = schema if isinstance(schema, type) else type(schema)
    return kind.__name__.removesuffix("Schema")


def _own_schema(converter: Any, field: Any, ret: dict[str, Any]) -> dict[str, Any]:
    """Every field of ours writes its own JSON Schema."""
    if not hasattr(field, "json_schema"):
        return {}
    own: dict[str, Any] = field.json_schema()
    if getattr(field, "example", None) is not None:
        own["examples"] = [field.example]
    return own


def _state_choices(document: dict[str, Any]) -> None:
    """Say "exactly one of these members" in the component schemas.

    ``oneOf`` itself would make client generators split the object into a union without members, so
    it stands behind a double negation, which means the same to a validator.
    """
    for name, schema in document["components"]["schemas"].items():
        kind = _CHOOSING.get(name)
        if kind is not None:
            choices = [{"required": [member]} for member in kind.exactly_one_of]
            schema["not"] = {"not": {"oneOf": choices}}
    for name, kind in _DESCRIBED.items():
        if name in document["components"]["schemas"]:
            doc = (kind.__doc__ or "").strip().splitlines()[0]
            document["components"]["schemas"][name].setdefault("description", doc)


def _subclasses(kind: type[StrictSchema]) -> dict[str, type[StrictSchema]]:
    found = {_name(kind): kind}
    for sub in kind.__subclasses__():
        found |= _subclasses(sub)
    return found


_DESCRIBED = _subclasses(StrictSchema)
_CHOOSING = {name: kind for name, kind in _DESCRIBED.items() if kind.exactly_one_of}


def _add_problem(spec: APISpec) -> None:
    entry = {
        "type": "object",
        "description": "One thing that is wrong.",
        "required": ["pointer", "detail"],
        "properties": {
            "pointer": {"type": "string", "description": "JSON pointer into the request, after #."},
            "detail": {"type": "string", "description": "What is wrong."},
            "allowed": {"type": "string", "description": "What is allowed."},
            "example": {"description": "A value that would do."},
        },
    }
    spec.components.schema("ProblemEntry", entry)
    problem = {
        "type": "object",
        "description": "An error (RFC 9457); some types have further members.",
        "required": ["type", "title", "status", "detail", "instance"],
        "properties": {
            "type": {
                "type": "string",
                "enum": [f"/problems/{problem.slug}" for problem in all_problems()],
            },
            "title": {"type": "string"},
            "status": {"type": "integer"},
            "detail": {"type": "string"},
            "instance": {"type": "string"},
            "errors": {
                "type": "array",
                "maxItems": 20,
                "items": {"$ref": "#/components/schemas/ProblemEntry"},
            },
            "estimate_s": {"type": ["number", "null"]},
            "limit_s": NUMBER,
            "numbers": {"type": "integer"},
            "limit_numbers": {"type": "integer"},
            "limit_bytes": {"type": "integer"},
            "requested": {"type": "string"},
            "reached": {"type": "string"},
        },
    }
    spec.components.schema("Problem", problem)
    content = {PROBLEM_TYPE: {"schema": {"$ref": "#/components/schemas/Problem"}}}
    spec.components.response("Problem", {"description": "A problem document.", "content": content})


def _post(resource: Resource[Any, Any]) -> dict[str, Any]:
    examples = {name: {"value": dict(body)} for name, body in resource.examples.items()}
    body = {"schema": type(resource.request), "examples": examples}
    return {
        **_common(resource, resource.operation_id),
        "parameters": _parameters(ViewQuery(), resource) + ASYNC_PARAMETERS,
        "requestBody": {"required": True, "content": {"application/json": body}},
    }


def _get(resource: Resource[Any, Any], short_form: QuerySchema) -> dict[str, Any]:
    parameters = _parameters(short_form, resource) + _parameters(ViewQuery(), resource)
    parameters += ASYNC_PARAMETERS
    return {**_common(resource, resource.operation_id + "ByQuery"), "parameters": parameters}


def _common(resource: Resource[Any, Any], operation_id: str) -> dict[str, Any]:
    content = {"application/json": {"schema": resource.response}}
    for name in resource.formats:
        content[MEDIA_TYPES[name].partition(";")[0]] = {"schema": _BODIES[name]}  # type: ignore[dict-item]
    headers = {
        "ETag": {"description": "Names this answer; send as If-None-Match.", "schema": _TEXT},
        "X-Request-ID": {"description": "Stands in the log line as well.", "schema": _REQUEST_ID},
    }
    return {
        "operationId": operation_id,
        "summary": resource.summary,
        "description": resource.description,
        "responses": {
            "200": {"description": "The answer.", "headers": headers, "content": content},
            "202": ACCEPTED,
            "default": "Problem",
        },
    }


def _parameters(schema: QuerySchema, resource: Resource[Any, Any]) -> list[dict[str, Any]]:
    parameters = []
    for name, field in sorted(schema.fields.items()):
        if name in VIEW_HELP and not VIEW_HELP[name] & set(resource.offered):
            continue
        own = field.json_schema()  # type: ignore[attr-defined]
        if name == "format":
            own = {"type": "string", "enum": list(resource.offered)}
        entry = {"name": name, "in": "query", "required": field.required, "schema": own}
        entry["description"] = field.metadata["description"]
        if getattr(field, "example", None) is not None:
            entry["example"] = field.example  # type: ignore[attr-defined]
        parameters.append(entry)
    return parameters


def _operations() -> dict[str, dict[str, Any]]:
    status = {
        "type": "object",
        "required": ["status"],
        "properties": {"status": {"type": "string"}},
    }
    json_status = {"application/json": {"schema": status}}
    return {
        "/healthz": _operation("getHealth", "The process answers", json_status),
        "/readyz": _operation("getReadiness", "The service is warmed up", json_status),
        "/metrics": _operation(
            "getMetrics", "Counters for Prometheus", {"text/plain": {"schema": _TEXT}}
        ),
    }


def _operation(operation_id: str, summary: str, content: dict[str, Any]) -> dict[str, Any]:
    return {
        "operationId": operation_id,
        "summary": summary,
        "responses": {"200": {"description": summary, "content": content}, "default": "Problem"},
    }


def files() -> dict[str, bytes]:
    """Every file of the description folder: the document, and the body of each example.

    ``examples/bands/cold-emission.json`` is for ``curl -d @FILE`` to ``/v1/bands``.
    """
    found = {"openapi.json": description_json()}
    options = orjson.OPT_INDENT_2 | orjson.OPT_APPEND_NEWLINE
    for resource in RESOURCES:
        for name, body in resource.examples.items():
            found[f"examples/{resource.name}/{name}.json"] = orjson.dumps(
                dict(body), option=options
            )
    return found


def write_files(folder: Path) -> list[Path]:
    """Write the description folder; examples that are no longer declared are removed."""
    for path in _superfluous(folder):
        path.unlink()
    for name, content in files().items():
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_bytes(content)
    return [folder / name for name in files()]


def stale_files(folder: Path) -> list[Path]:
    """Files of the folder that differ from what would be written, are missing or superfluous."""
    stale = [
        folder / name
        for name, content in files().items()
        if not (folder / name).is_file() or (folder / name).read_bytes() != content
    ]
    return stale + _superfluous(folder)


def _superfluous(folder: Path) -> list[Path]:
    present = set((folder / "examples").rglob("*.json"))
    return sorted(present - {folder / name for name in files()})
