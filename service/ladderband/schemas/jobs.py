"""Jobs as clients see them."""

from __future__ import annotations

from ladderband.schemas.base import StrictSchema
from ladderband.schemas.fields import Many, Part, Reply

TEXT = {"type": "string"}
TIME = {"type": ["string", "null"], "format": "date-time"}
COUNT = {"type": "integer", "minimum": 0}
MAYBE_NUMBER = {"type": ["number", "null"]}
STATES = ("queued", "running", "succeeded", "failed", "cancelled")


class JobLinksSchema(StrictSchema):
    """Addresses that belong to a job."""

    self = Reply("The job; DELETE cancels it.", TEXT)
    events = Reply("Its progress as server-sent events.", TEXT)
    result = Reply("Its result, once it has succeeded.", TEXT)


class JobSchema(StrictSchema):
    """One request on record, and how far it is."""

    id = Reply("Name of the job.", TEXT)
    kind = Reply("The resource that computes it, or sweeps.", TEXT)
    state = Reply("Where it stands.", {"type": "string", "enum": list(STATES)})
    total = Reply("Points to compute; 1 for a single request.", COUNT)
    done = Reply("Points computed.", COUNT)
    rate_per_s = Reply("Points a second since the start.", MAYBE_NUMBER)
    created = Reply("When it was submitted.", {"type": "string", "format": "date-time"})
    started = Reply("When its first point began.", TIME)
    finished = Reply("When it ended.", TIME)
    estimated_end = Reply("When it will end at this rate.", TIME)
    result_expired = Reply("True once the result was removed.", {"type": "boolean"})
    request_digest = Reply("Hash of the checked request and the version.", TEXT)
    problem = Reply(
        "What it failed with.",
        {"anyOf": [{"$ref": "#/components/schemas/Problem"}, {"type": "null"}]},
    )
    links = Part(JobLinksSchema, "Addresses that belong to it.", required=True)


class JobListSchema(StrictSchema):
    """The key's jobs, newest first."""

    jobs = Many(JobSchema, "The jobs of this page.", required=True)
    next = Reply("Address of the next page.", {"type": ["string", "null"]})
