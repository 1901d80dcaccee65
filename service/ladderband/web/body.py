"""Reading a JSON body within limits: size, media type, nesting, repeated members.

Flask's own limit cuts a chunked body silently at the limit and passes on the rest as if it were
whole; and orjson keeps the last of repeated members. Both are checked here.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

import orjson

from ladderband.web.problems import BodyTooLarge, MalformedJson, UnsupportedMediaType

BLOCK = 65536
PLAIN = frozenset({int, float, str, bool, type(None)})


def read_json(environ: Mapping[str, Any], max_bytes: int, max_depth: int) -> Any:
    """The parsed JSON body of a WSGI request.

    Raises
    ------
    UnsupportedMediaType, BodyTooLarge, MalformedJson
        See the classes.
    """
    kind = environ.get("CONTENT_TYPE", "")
    if kind != "application/json" and not _is_json(kind):
        raise UnsupportedMediaType(
            f"The media type is {kind[:80] or 'missing'}.", allowed="application/json"
        )
    if environ.get("HTTP_CONTENT_ENCODING", "identity") != "identity":
        raise UnsupportedMediaType("Encoded bodies are not read.", allowed="application/json")
    return parse(read_bytes(environ, max_bytes), max_depth)


def _is_json(kind: str) -> bool:
    media = kind.partition(";")[0].strip().lower()
    return media == "application/json" or (
        media.startswith("application/") and media.endswith("+json")
    )


def read_bytes(environ: Mapping[str, Any], max_bytes: int) -> bytes:
    """The whole body, of known length or chunked; refused as soon as it is known to be too large."""
    stream = environ["wsgi.input"]
    length = environ.get("CONTENT_LENGTH") or ""
    if length.isdecimal():
        if len(length) > 18 or int(length) > max_bytes:
            raise _too_large(max_bytes)
        whole: bytes = stream.read(int(length))
        return whole
    if not environ.get("wsgi.input_terminated"):
        return b""  # neither a length nor an end: no body
    parts, size = [], 0
    while part := stream.read(BLOCK):
        size += len(part)
        if size > max_bytes:
            raise _too_large(max_bytes)
        parts.append(part)
    return b"".join(parts)


def _too_large(max_bytes: int) -> BodyTooLarge:
    return BodyTooLarge(f"The body is larger than {max_bytes} bytes.", limit_bytes=max_bytes)


def parse(raw: bytes, max_depth: int) -> Any:
    """Parse JSON; every object has each member once and nothing nests deeper than ``max_depth``."""
    try:
        value = orjson.loads(raw)
    except orjson.JSONDecodeError as error:
        where = f" at line {error.lineno}, column {error.colno}" if raw else ""
        reason = error.msg.split(":")[0][:120] if raw else "the body is empty"
        raise MalformedJson(f"This is not JSON: {reason}{where}.") from None
    members = _count_members(value, max_depth)
    # A colon outside a string belongs to exactly one member. As many colons as members: none is
    # repeated. More: one is, or a string holds a colon, and the slow parser tells which.
    if raw.count(b":") != members:
        json.loads(raw, object_pairs_hook=_refuse_repeated)
    return value


def _count_members(value: Any, max_depth: int) -> int:
    members, level = 0, [value]
    for _ in range(max_depth):
        inner: list[Any] = []
        for node in level:
            if type(node) is dict:
                members += len(node)
                inner += [child for child in node.values() if type(child) not in PLAIN]
            elif type(node) is list and not set(map(type, node)) <= PLAIN:
                inner += [child for child in node if type(child) not in PLAIN]
        if not inner:
            return members
        level = inner
    raise MalformedJson(f"The body nests deeper than {max_depth} levels.", limit_depth=max_depth)


def _refuse_repeated(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    seen: dict[str, Any] = {}
    for name, value in pairs:
        if name in seen:
            raise MalformedJson(f"The member {name[:80]!r} is given more than once in one object.")
        seen[name] = value
    return seen
