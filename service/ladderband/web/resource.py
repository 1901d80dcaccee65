"""One declaration a resource: what it takes, who answers, how the answer looks.

To add a resource (four steps):

1. ``usecases/NAME.py``: a frozen ``Question``, a frozen answer, ``answer(question, limits,
   deadline)``.
2. ``schemas/NAME.py``: a ``RequestSchema`` whose ``build`` makes the question, an ``AnswerSchema``
   that describes the answer, and ``NAME_members(question, answer)``: its JSON members, arrays as
   numpy arrays. ``warnings``, ``service_version`` and ``request_digest`` are added here.
3. ``web/NAME.py``: one ``Resource(...)`` (see ``web/wavefunctions.py``); a renderer for each format
   beside JSON: a function of (sheet, question, answer) to bytes or an iterator of bytes. Its
   ``estimate`` decides which requests are dear and run in a compute process.
4. Add it to ``RESOURCES`` in ``web/resources.py`` and run ``ladderband describe``.

Routing, limits, negotiation, digest, ETag, problem documents, metrics, log line, jobs, sweeps,
OpenAPI and the tests of its examples follow from the declaration.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from contextlib import suppress
from dataclasses import dataclass, field
from typing import Any, Generic, TypeVar, cast

from flask import Blueprint, Response, current_app, g, request

from ladderband import __version__
from ladderband.formats.json_stream import json_chunks, require_finite
from ladderband.formats.sheet import Sheet
from ladderband.formats.stored import UnreadableAnswer, load_answer
from ladderband.jobs.submissions import JobView
from ladderband.numerics.accuracy import Deadline
from ladderband.schemas.base import AnswerSchema, Loaded, RequestSchema
from ladderband.schemas.query import QuerySchema, ViewQuery
from ladderband.settings import Settings
from ladderband.usecases.limits import Limits
from ladderband.web.body import read_json
from ladderband.web.desk import Desk, accepted, prefers_async
from ladderband.web.digest import request_digest
from ladderband.web.negotiation import MEDIA_TYPES, chosen_format
from ladderband.web.problems import AlreadyHeld
from ladderband.web.reuse import KeptBodies, allow_reuse

Q = TypeVar("Q")
A = TypeVar("A")
Body = bytes | Iterable[bytes]
VIEW = ViewQuery()
VIEW_NAMES = frozenset(VIEW.fields)
NO_VIEW: dict[str, Any] = VIEW.read({})


@dataclass(frozen=True)
class Resource(Generic[Q, A]):
    """A resource that answers one kind of question; see the recipe above."""

    path: str
    operation_id: str
    """camelCase; generated clients name their function after it."""
    summary: str
    description: str
    request: RequestSchema[Q]
    response: type[AnswerSchema]
    use_case: Callable[[Q, Limits, Deadline], A]
    members: Callable[[Q, A], dict[str, Any]]
    formats: Mapping[str, Callable[[Sheet, Q, A], Body]] = field(default_factory=dict)
    """Renderers beside JSON, by a name of ``negotiation.MEDIA_TYPES``."""
    examples: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    """Request bodies by name; each is published and run as a test."""
    short_form: QuerySchema | None = None
    """Also answer GET, with the body written as a query string."""
    estimate: Callable[[Q], float] | None = None
    """Seconds of work a question is expected to take, without doing any; None: always few."""

    @property
    def name(self) -> str:
        """The resource's word in its path; jobs and sweeps call it by this."""
        return self.path.rpartition("/")[2]

    @property
    def offered(self) -> tuple[str, ...]:
        """Names of all formats, JSON first."""
        return ("json", *self.formats)

    def from_body(self) -> Response:
        """Answer a POST."""
        settings: Settings = current_app.config["SETTINGS"]
        body = read_json(request.environ, settings.max_body_bytes, settings.max_json_depth)
        return self.answer(body, _view())

    def from_query(self) -> Response:
        """Answer a GET in the short form."""
        assert self.short_form is not None
        names = {k: v for k, v in request.args.to_dict(flat=False).items() if k not in VIEW_NAMES}
        body = self.short_form.body(self.short_form.read(names))
        return self.answer(body, _view())

    def answer(self, body: Any, view: dict[str, Any]) -> Response:
        """Compute, unless the client holds the answer already, and render; or accept a job."""
        loaded = self.request.read(body)
        name = chosen_format(request, self.offered, view.get("format"))
        digest = g.digest = self.digest(loaded.question)
        tag = tag_of(digest, name, view)
        if "HTTP_IF_NONE_MATCH" in request.environ and tag in request.if_none_match:
            return not_modified(tag)
        kept = _kept(loaded, name)
        if kept is not None and (held := kept.find(tag)) is not None:
            return _response(held, name, tag)
        found = self._answered(body, loaded.question, digest)
        if isinstance(found, JobView):
            return accepted(found)
        made = self.rendered(loaded, found, name, view)
        if kept is not None and isinstance(made, bytes):
            kept.keep(tag, made)
        return _response(made, name, tag)

    def _answered(self, body: Any, question: Q, digest: str) -> A | JobView:
        """The answer, computed here or, when it is dear, in a compute process; or the job."""
        desk: Desk | None = current_app.config["DESK"]
        estimate_s = self.estimated(question)
        if desk is not None and desk.wants(estimate_s):
            found = desk.answered(self.name, body, digest, estimate_s)
            if isinstance(found, JobView):
                return found
            with suppress(UnreadableAnswer):  # of another build: computed again, here
                return cast(A, load_answer(found))
        limits: Limits = current_app.config["LIMITS"]
        deadline = Deadline.after(current_app.config["SETTINGS"].deadline_s)
        return self.use_case(question, limits, deadline)

    def digest(self, question: Q) -> str:
        """Name of the answer to a question."""
        return request_digest(self.path, question)

    def estimated(self, question: Q) -> float:
        """Expected seconds of work."""
        return 0.0 if self.estimate is None else self.estimate(question)

    def rendered(self, loaded: Loaded[Q], answer: A, name: str, view: dict[str, Any]) -> Body:
        """The body of an answer in one of the offered formats."""
        digest = self.digest(loaded.question)
        if name == "json":
            return json_chunks(self.json_members(loaded, answer, digest))
        require_finite("answer", answer)
        warnings = [*loaded.warnings, *getattr(answer, "warnings", ())]
        sheet = Sheet.of(self.summary, digest, warnings, view)
        return self.formats[name](sheet, loaded.question, answer)

    def json_members(self, loaded: Loaded[Q], answer: A, digest: str) -> dict[str, Any]:
        """The members of the JSON answer; arrays as numpy arrays."""
        members = self.members(loaded.question, answer)
        members["warnings"] = [*loaded.warnings, *getattr(answer, "warnings", ())]
        members["service_version"] = __version__
        members["request_digest"] = digest
        return members


def _view() -> dict[str, Any]:
    if not request.query_string:
        return NO_VIEW
    given = request.args.to_dict(flat=False)
    if request.method == "POST":
        return VIEW.read(given)  # a POST has no other parameters: unknown ones are refused
    return VIEW.read({name: values for name, values in given.items() if name in VIEW_NAMES})


def _kept(loaded: Loaded[Any], name: str) -> KeptBodies | None:
    """Where answers to this request are kept; None where a tag does not say all.

    Warnings about the spelling of a request belong to it and not to its question; and who prefers a
    job gets one.
    """
    if loaded.warnings or prefers_async():
        return None
    kept: KeptBodies = current_app.config["KEPT"].of(name)
    return kept


def tag_of(digest: str, name: str, view: dict[str, Any]) -> str:
    """The ETag of one rendering of an answer."""
    return digest if name == "json" else f"{digest}-{name}-{request_digest(name, view)[:16]}"


def not_modified(tag: str) -> Response:
    """304, or the refusal of a POST, for a client that holds the answer already."""
    if request.method not in ("GET", "HEAD"):  # RFC 9110, section 13.1.2
        raise AlreadyHeld("If-None-Match names the answer to this request.", etag=tag)
    response = Response(status=304)
    response.set_etag(tag)
    return allow_reuse(response)


def _response(body: Body, name: str, tag: str) -> Response:
    headers = [("Content-Type", MEDIA_TYPES[name]), ("ETag", f'"{tag}"')]
    return allow_reuse(Response(body, headers=headers))


def blueprint_of(resource: Resource[Any, Any]) -> Blueprint:
    """The routes of a resource."""
    blueprint = Blueprint(resource.operation_id, __name__)
    blueprint.add_url_rule(resource.path, "post", resource.from_body, methods=["POST"])
    if resource.short_form is not None:
        blueprint.add_url_rule(resource.path, "get", resource.from_query, methods=["GET"])
    return blueprint
