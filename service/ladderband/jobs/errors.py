"""What the job records refuse; each message is a sentence for the person who asked."""

from __future__ import annotations

from typing import Any

Problem = dict[str, Any]
"""A problem document (RFC 9457) as JSON: type, title, status, detail and its own members."""


class JobError(Exception):
    """Base of all refusals here."""


class JobNotFound(JobError):
    """No such job, or it belongs to another key: the two look the same from outside."""

    def __init__(self, job_id: str) -> None:
        super().__init__(f"There is no job {job_id!r} under this key.")


class JobFinished(JobError):
    """A finished job cannot be cancelled."""

    def __init__(self, job_id: str, state: str) -> None:
        super().__init__(f"Job {job_id} has already ended ({state}); there is nothing to cancel.")
        self.state = state


class ResultNotReady(JobError):
    """The job has no result yet, or never will have one."""

    def __init__(self, job_id: str, state: str) -> None:
        super().__init__(f"Job {job_id} has no result: its state is {state}.")
        self.state = state


class ResultGone(JobError):
    """The result was there and has been removed at the end of its keeping time."""

    def __init__(self, job_id: str) -> None:
        super().__init__(
            f"The result of job {job_id} was removed at the end of its keeping time. "
            "Send the request again to compute it anew."
        )


class TokenMismatch(JobError):
    """An Idempotency-Key came a second time with another request."""

    def __init__(self) -> None:
        super().__init__(
            "This Idempotency-Key was used before for a different request. "
            "Use a new one for a new request."
        )


class QueueFull(JobError):
    """The key has as many unfinished jobs as it may have."""

    def __init__(self, limit: int) -> None:
        super().__init__(
            f"This key has {limit} unfinished jobs, which is the limit. "
            "Wait until some have ended, cancel some, or send many requests as one sweep."
        )
        self.limit = limit


class SweepError(JobError):
    """A sweep's description is wrong; ``pointer`` tells where in the request."""

    def __init__(self, pointer: str, message: str) -> None:
        super().__init__(message)
        self.pointer = pointer
