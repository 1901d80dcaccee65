"""What a job can compute: a name, an estimate and a function from request to answer.

The web layer makes one kind of every compute resource and names the function that returns them all
as ``module:function``; engines and their compute processes import it by that name, so that nothing
here imports the web layer.
"""

from __future__ import annotations

import importlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from ladderband.jobs.errors import Problem
from ladderband.numerics.accuracy import Deadline

Document = dict[str, Any]
"""A JSON object; numbers of an answer may be numpy arrays."""

SWEEPS = "sweeps"
"""The kind of job that has many points; every other kind has one."""


class Refused(Exception):
    """The request cannot be answered, and trying again would not change that."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(problem.get("detail", ""))
        self.problem = problem


@dataclass(frozen=True)
class Kind:
    """One compute resource.

    ``estimate`` checks the request and returns the seconds it is expected to take. ``document``
    answers with the JSON document a sweep collects from; ``stored`` answers with the bytes kept as
    the result of a single job, in whatever form the owner of the kind can render later. All raise
    :class:`Refused`.
    """

    name: str
    estimate: Callable[[Document], float]
    document: Callable[[Document, Deadline], Document]
    stored: Callable[[Document, Deadline], bytes]


Kinds = Mapping[str, Kind]


def load_kinds(reference: str) -> Kinds:
    """The kinds that ``module:function`` returns."""
    module, _, function = reference.partition(":")
    made: Kinds = getattr(importlib.import_module(module), function)()
    return made
