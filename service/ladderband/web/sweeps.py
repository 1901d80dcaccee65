"""``POST /v1/sweeps``: one request with some members varied, as a job."""

from __future__ import annotations

from typing import Any

from flask import Blueprint, Response, current_app, g, request
from marshmallow import ValidationError

from ladderband.jobs.errors import SweepError
from ladderband.jobs.kinds import SWEEPS
from ladderband.jobs.records import BATCH
from ladderband.jobs.submissions import NewJob, canonical, submit
from ladderband.jobs.sweeps import Plan, parse_plan
from ladderband.numerics.errors import NumericsError
from ladderband.schemas.sweeps import SweepRequest
from ladderband.settings import Settings
from ladderband.usecases.limits import CostLimitExceeded
from ladderband.web.body import read_json
from ladderband.web.desk import accepted, desk, token
from ladderband.web.digest import request_digest
from ladderband.web.resources import RESOURCES

blueprint = Blueprint("sweeps", __name__)

PATH = "/v1/sweeps"
REQUEST = SweepRequest()
EXTRA_DEPTH = 2
"""A sweep's request holds another request, so it nests deeper."""

LEAST_POINT_S = 1e-3
"""What a point costs at least: expanding, checking and collecting."""


@blueprint.post(PATH)
def sweep() -> Response:
    """Check a sweep, put it on record, answer with the job."""
    settings: Settings = current_app.config["SETTINGS"]
    counter = desk()
    body = read_json(
        request.environ, settings.max_body_bytes, settings.max_json_depth + EXTRA_DEPTH
    )
    document = REQUEST.read(body)
    plan = parse_plan(document, settings.sweep_points)
    point_s = _estimated(plan, settings.job_work_s)
    g.digest = digest = request_digest(PATH, document)
    total = plan.total
    new = NewJob(SWEEPS, canonical(document), digest, total, point_s, BATCH, g.key_id, token())
    job, _ = submit(counter.database, new, settings.queue_limit)
    return accepted(job)


def _estimated(plan: Plan, limit_s: float) -> float:
    """Seconds a point: the mean of some of the points.

    Raises the first point's error when all of them are refused, so that a sweep with a slip in it
    does not start; a point that is refused among others is an entry in the table.
    """
    resource = next((found for found in RESOURCES if found.name == plan.resource), None)
    if resource is None:
        known = ", ".join(found.name for found in RESOURCES)
        raise SweepError("/resource", f"{plan.resource!r} is no compute resource; use {known}.")
    estimates, errors = [], []
    for point in plan.samples():
        try:
            question = resource.request.read(plan.request(point)).question
            estimates.append(resource.estimated(question))
        except (ValidationError, NumericsError) as error:
            errors.append(error)
    if not estimates:
        raise _inside(errors[0])
    if max(estimates) > limit_s:
        raise CostLimitExceeded(max(estimates), limit_s, "Ask for less at each point.")
    return max(sum(estimates) / len(estimates), LEAST_POINT_S)


def _inside(error: Any) -> Exception:
    """An error of the varied request, its pointers as seen from the sweep's."""
    if isinstance(error, ValidationError):
        return ValidationError({"request": error.messages})
    error.pointer = "/request" + getattr(error, "pointer", "")
    found: Exception = error
    return found
