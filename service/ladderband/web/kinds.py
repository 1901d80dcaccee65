"""The resources as kinds of jobs: engines import :func:`kinds` by its name."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

from ladderband.formats.json_stream import require_finite
from ladderband.formats.stored import dump_answer
from ladderband.jobs.kinds import Document, Kind, Refused
from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.warm import warm
from ladderband.settings import load_settings
from ladderband.usecases.limits import Limits
from ladderband.web.problems import document_of
from ladderband.web.resource import Resource
from ladderband.web.resources import RESOURCES


def kinds() -> dict[str, Kind]:
    """Every compute resource by its name, with the limits of jobs; compiled kernels are loaded."""
    warm()
    settings = load_settings()
    limits = Limits(work_s=settings.job_work_s, table_elements=settings.table_elements)
    return {resource.name: _kind(resource, limits) for resource in RESOURCES}


def _kind(resource: Resource[Any, Any], limits: Limits) -> Kind:
    def estimate(body: Document) -> float:
        with refusals():
            return resource.estimated(resource.request.read(body).question)

    def document(body: Document, deadline: Deadline) -> Document:
        with refusals():
            loaded = resource.request.read(body)
            answer = resource.use_case(loaded.question, limits, deadline)
            members = resource.json_members(loaded, answer, resource.digest(loaded.question))
        for name, value in members.items():
            require_finite(name, value)
        return members

    def stored(body: Document, deadline: Deadline) -> bytes:
        with refusals():
            question = resource.request.read(body).question
            return dump_answer(resource.use_case(question, limits, deadline))

    return Kind(resource.name, estimate, document, stored)


@contextmanager
def refusals() -> Iterator[None]:
    """Turn every error that has a problem document into a refusal that carries it."""
    try:
        yield
    except Exception as error:
        problem = document_of(error)
        if problem is None:
            raise
        raise Refused(problem) from error
