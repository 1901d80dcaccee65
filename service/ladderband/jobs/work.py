"""What a compute process does with one shard: from task to outcome, wherever it runs.

A task and an outcome are bytes, so that they travel through a pipe or an engine's network alike. An
outcome is one letter and a body: ``r`` and the shard's output, or ``p`` and a problem document.
"""

from __future__ import annotations

import logging
import signal
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from typing import Any

import orjson

from ladderband.jobs.claims import Ticket
from ladderband.jobs.kinds import Document, Kind, Kinds, Refused
from ladderband.jobs.sweeps import Plan, varied
from ladderband.jobs.tables import Block, append_point, collected, column_names
from ladderband.numerics.accuracy import Deadline

HARD_LIMIT_S = 2.0
"""Time past the deadline after which the system ends the process, whatever it is doing."""

INTERNAL = {
    "type": "/problems/internal",
    "title": "The service failed",
    "status": 500,
    "detail": "The computation failed for a reason of the service's own; its log tells more.",
}

log = logging.getLogger("ladderband.compute")

JSON_OPTIONS = orjson.OPT_SERIALIZE_NUMPY


def single_task(ticket: Ticket, request: bytes, limit_s: float) -> bytes:
    """The task of a job with one point."""
    return orjson.dumps(
        {"kind": ticket.kind, "request": orjson.Fragment(request), "limit_s": limit_s}
    )


def sweep_task(ticket: Ticket, plan: Plan, limit_s: float) -> bytes:
    """The task of a range of a sweep's points; ``limit_s`` is for each point."""
    return orjson.dumps(
        {
            "kind": plan.resource,
            "request": plan.base,
            "pointers": [axis.pointer for axis in plan.axes],
            "values": [plan.values(point) for point in range(ticket.start, ticket.stop)],
            "start": ticket.start,
            "collect": plan.collect,
            "limit_s": limit_s,
        }
    )


def perform(task: bytes, kinds: Kinds) -> tuple[bytes, bytes]:
    """Compute one task; returns the outcome's letter and body, apart so that none is copied."""
    document = orjson.loads(task)
    try:
        if "values" in document:
            return b"r", orjson.dumps(_points(document, kinds), option=JSON_OPTIONS)
        kind = kinds[document["kind"]]
        with _limited(kind, document["limit_s"]) as deadline:
            return b"r", kind.stored(document["request"], deadline)
    except Refused as refusal:
        return b"p", orjson.dumps(refusal.problem)


@contextmanager
def _limited(kind: Kind, limit_s: float) -> Iterator[Deadline]:
    """The time of one answer is limited twice: by a deadline, which loops look at, and by an alarm
    whose default action is to end this process. A defect becomes a refusal and a line in the log.
    """
    signal.setitimer(signal.ITIMER_REAL, limit_s + HARD_LIMIT_S)
    try:
        yield Deadline.after(limit_s)
    except (Refused, MemoryError):
        raise
    except Exception as error:
        log.exception("%s failed", kind.name)
        raise Refused(INTERNAL) from error
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)


def _points(document: Document, kinds: Kinds) -> Block:
    kind, pointers, collect = (
        kinds[document["kind"]],
        document["pointers"],
        document["collect"],
    )
    base = orjson.dumps(document["request"])
    block: Block = {name: [] for name in column_names(pointers, collect)}
    for point, values in enumerate(document["values"], start=document["start"]):
        request = varied(base, pointers, values)
        found, error = _one_point(kind, request, collect, document["limit_s"])
        append_point(block, point, values, found, error)
    return block


def _one_point(
    kind: Kind, request: Document, collect: Sequence[str], limit_s: float
) -> tuple[list[Any], str | None]:
    """The collected values, or why there are none."""
    try:
        with _limited(kind, limit_s) as deadline:
            answer = kind.document(request, deadline)
        return collected(answer, collect), None
    except Refused as refusal:
        return [], str(refusal.problem.get("detail") or refusal.problem.get("title"))
    except LookupError as error:
        return [], str(error.args[0])
    except MemoryError:
        return [], "This point needed more memory than its limit."
