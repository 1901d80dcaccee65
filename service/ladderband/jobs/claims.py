"""What an engine does with the records: claim, finish, fail, give back, renew, reap.

A *ticket* is the right to work on one shard until its lease ends. Three rules keep every point
computed into the result exactly once, whatever dies:

- **Fence.** Each claim raises the shard's ``attempt``, and all that a ticket's holder writes is on
  the condition that the attempt is still its own. A paused or cut-off engine can therefore never
  write over a newer one: its change touches no row and is thrown away.
- **One transaction.** The output, the shard's state and the job's count of finished points change
  together or not at all.
- **Order of locks.** A transaction takes the job's row before any of its shards.

Shards are carved off the job's range of points at the moment they are claimed, in the size that
takes about :data:`SHARD_S` by the time its points took so far: a sweep of a million points costs
one row when it is submitted.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from ladderband.jobs.database import Database
from ladderband.jobs.errors import Problem
from ladderband.jobs.kinds import SWEEPS
from ladderband.jobs.records import OPEN_STATES, engine, job, output, shard, turn
from ladderband.jobs.submissions import end, lock

SHARD_S = 0.3
"""Aimed length of a shard: a hundred times the cost of a claim, and short enough to lose."""

SHARD_POINTS = 4096
"""Most points in a shard, so that its message and its output stay small."""

CRASH_LIMIT = 3
"""Deaths of a compute process under one shard before its job fails."""

LOSS_LIMIT = 20
"""Engines that vanished under one shard before its job fails. Far above CRASH_LIMIT: an engine may
die of anything, and a shard that kills one kills its compute process first."""


@dataclass(frozen=True, slots=True)
class Ticket:
    """The right to work on points start..stop of a job; ``attempt`` is the fence."""

    job_id: str
    shard_id: int
    attempt: int
    kind: str
    role: str
    start: int
    stop: int

    @property
    def fence(self) -> tuple[int, int]:
        return self.shard_id, self.attempt


def claim(
    database: Database, owner: str, lease_s: float, lanes: Sequence[int] = (0, 1)
) -> Ticket | None:
    """The next shard to work on, or None when there is none.

    The lowest lane goes first; in it the key, and of that key the job, that was served the longest
    time ago. Without work this is one plain read.
    """
    with database.reading() as connection:
        candidate = connection.scalar(_next_job(lanes))
    if candidate is None:
        return None
    with database.writing() as connection:
        row = lock(connection, candidate)
        if row is None or row.state not in OPEN_STATES:
            return None
        now = database.now(connection)
        ticket = _requeued(connection, row) if row.waiting else _carved(connection, row)
        if ticket is None:
            return None
        _hold(connection, ticket, owner, now + lease_s)
        _count_turn(connection, row, now)
        return ticket


def _next_job(lanes: Sequence[int]) -> sa.Select[Any]:
    return (
        sa.select(job.c.id)
        .join(turn, turn.c.key_id == job.c.key_id)
        .where(
            job.c.state.in_(OPEN_STATES),
            job.c.lane.in_(lanes),
            sa.or_(job.c.waiting > 0, job.c.next_point < job.c.total),
        )
        .order_by(job.c.lane, turn.c.served, job.c.turn)
        .limit(1)
    )


def _requeued(connection: Connection, row: Row[*tuple[Any, ...]]) -> Ticket | None:
    found = connection.execute(
        sa.select(shard)
        .where(shard.c.job_id == row.id, shard.c.state == "queued")
        .order_by(shard.c.id)
        .limit(1)
        .with_for_update()
    ).one_or_none()
    if found is None:
        return None
    connection.execute(sa.update(job).where(job.c.id == row.id).values(waiting=job.c.waiting - 1))
    return Ticket(
        row.id, found.id, found.attempt + 1, row.kind, found.role, found.start, found.stop
    )


def _carved(connection: Connection, row: Row[*tuple[Any, ...]]) -> Ticket | None:
    start, stop = row.next_point, row.next_point + shard_points(row)
    if start >= row.total:
        return None
    values = {
        "job_id": row.id,
        "role": "points",
        "start": start,
        "stop": stop,
        "state": "queued",
        "attempt": 0,
        "crashes": 0,
        "losses": 0,
    }
    ident = connection.scalar(sa.insert(shard).values(values).returning(shard.c.id))
    assert ident is not None
    connection.execute(sa.update(job).where(job.c.id == row.id).values(next_point=stop))
    return Ticket(row.id, ident, 1, row.kind, "points", start, stop)


def shard_points(row: Row[*tuple[Any, ...]]) -> int:
    """Points of the next shard: SHARD_S of work, never more than what is left."""
    wanted = int(SHARD_S / max(row.point_s, SHARD_S / SHARD_POINTS))
    return min(max(wanted, 1), int(row.total - row.next_point))


def _hold(connection: Connection, ticket: Ticket, owner: str, lease: float) -> None:
    connection.execute(
        sa.update(shard)
        .where(shard.c.id == ticket.shard_id)
        .values(state="running", attempt=ticket.attempt, owner=owner, lease=lease)
    )


def _count_turn(connection: Connection, row: Row[*tuple[Any, ...]], now: float) -> None:
    connection.execute(
        sa.update(job)
        .where(job.c.id == row.id)
        .values(
            state="running",
            started=sa.func.coalesce(job.c.started, now),
            turn=now,
            revision=job.c.revision + 1,
        )
    )
    connection.execute(sa.update(turn).where(turn.c.key_id == row.key_id).values(served=now))


def finish(database: Database, ticket: Ticket, parts: Iterable[bytes], seconds: float) -> bool:
    """Record the shard's output; False when the ticket is no longer valid and all was thrown away.

    The transaction that finishes the last points ends the job, or queues the merge of a sweep.
    ``seconds`` is the time the work took; it sizes the next shards.
    """
    with database.writing() as connection:
        row = lock(connection, ticket.job_id)
        if row is None or not _fenced(connection, ticket, state="done", lease=None):
            return False
        for number, part in enumerate(parts):
            connection.execute(
                sa.insert(output).values(shard_id=ticket.shard_id, part=number, data=part)
            )
        now = database.now(connection)
        if ticket.role == "merge":
            _drop_points(connection, row.id)
            _succeed(connection, row.id, now)
        else:
            _count_points(connection, row, ticket, seconds, now)
        return True


def _fenced(connection: Connection, ticket: Ticket, **values: Any) -> bool:
    """Change the shard if it is still held under this ticket."""
    changed = connection.execute(
        sa.update(shard)
        .where(
            shard.c.id == ticket.shard_id,
            shard.c.attempt == ticket.attempt,
            shard.c.state == "running",
        )
        .values(**values)
    )
    return changed.rowcount == 1


def _count_points(
    connection: Connection, row: Row[*tuple[Any, ...]], ticket: Ticket, seconds: float, now: float
) -> None:
    count = ticket.stop - ticket.start
    measured = max(seconds, 1e-6) / count
    # the mean of the old and the new figure settles in a few shards and forgets an odd one
    point_s = measured if row.done == 0 else (row.point_s + measured) / 2
    connection.execute(
        sa.update(job)
        .where(job.c.id == row.id)
        .values(done=job.c.done + count, point_s=point_s, revision=job.c.revision + 1)
    )
    if row.done + count < row.total:
        return
    if row.kind != SWEEPS:
        _succeed(connection, row.id, now)
    else:
        _queue_merge(connection, row)


def _queue_merge(connection: Connection, row: Row[*tuple[Any, ...]]) -> None:
    connection.execute(
        sa.insert(shard).values(
            job_id=row.id,
            role="merge",
            start=0,
            stop=row.total,
            state="queued",
            attempt=0,
            crashes=0,
            losses=0,
        )
    )
    connection.execute(sa.update(job).where(job.c.id == row.id).values(waiting=1))


def _drop_points(connection: Connection, job_id: str) -> None:
    connection.execute(sa.delete(shard).where(shard.c.job_id == job_id, shard.c.role == "points"))


def _succeed(connection: Connection, job_id: str, now: float) -> None:
    connection.execute(
        sa.update(job)
        .where(job.c.id == job_id)
        .values(state="succeeded", finished=now, revision=job.c.revision + 1)
    )


def fail(database: Database, ticket: Ticket, problem: Problem) -> bool:
    """End the job with a problem, for a reason that trying again would not change."""
    with database.writing() as connection:
        row = lock(connection, ticket.job_id)
        if row is None or not _fenced(connection, ticket, lease=None):
            return False
        end(connection, ticket.job_id, "failed", database.now(connection), problem)
        return True


def give_back(database: Database, ticket: Ticket, *, crashed: bool, reason: str = "") -> bool:
    """Queue the shard again after its compute process died (``crashed``) or its engine was lost.

    At the limit the job fails instead; no other job is touched.
    """
    with database.writing() as connection:
        row = lock(connection, ticket.job_id)
        counter = shard.c.crashes if crashed else shard.c.losses
        values = {"state": "queued", "lease": None, "owner": None, counter.name: counter + 1}
        if row is None or not _fenced(connection, ticket, **values):
            return False
        count = connection.scalar(sa.select(counter).where(shard.c.id == ticket.shard_id)) or 0
        if count >= (CRASH_LIMIT if crashed else LOSS_LIMIT):
            problem = _crash_problem(ticket, count, reason)
            end(connection, ticket.job_id, "failed", database.now(connection), problem)
        else:
            connection.execute(
                sa.update(job)
                .where(job.c.id == row.id)
                .values(waiting=job.c.waiting + 1, revision=job.c.revision + 1)
            )
        return True


def _crash_problem(ticket: Ticket, count: int, reason: str) -> Problem:
    where = (
        f"point {ticket.start}"
        if ticket.stop - ticket.start == 1
        else (f"one of the points {ticket.start} to {ticket.stop - 1}")
    )
    return {
        "type": "/problems/compute-crashed",
        "title": "The computation crashed",
        "status": 500,
        "detail": (
            f"The compute process died {count} times while working on {where}{reason}; the job was "
            "stopped. Leave that part of the request out, or report it as a defect."
        ),
        "points": [ticket.start, ticket.stop],
    }


def renew(database: Database, tickets: Sequence[Ticket], lease_s: float) -> set[tuple[int, int]]:
    """Extend the leases; returns the fences of the tickets that are still valid.

    A ticket that is missing from the answer was cancelled or given to somebody else: stop its work.
    """
    if not tickets:
        return set()
    with database.writing() as connection:
        held = sa.tuple_(shard.c.id, shard.c.attempt).in_([t.fence for t in tickets])
        rows = connection.execute(
            sa.update(shard)
            .where(held, shard.c.state == "running")
            .values(lease=database.now(connection) + lease_s)
            .returning(shard.c.id, shard.c.attempt)
        ).all()
    return {(row.id, row.attempt) for row in rows}


def reap(database: Database, gone_owners: Sequence[str] = ()) -> int:
    """Give back the shards whose lease has ended or whose owner is known to be gone."""
    with database.reading() as connection:
        now = database.now(connection)
        rows = connection.execute(
            sa.select(shard, job.c.kind)
            .join(job, job.c.id == shard.c.job_id)
            .where(
                shard.c.state == "running",
                sa.or_(shard.c.lease < now, shard.c.owner.in_(gone_owners)),
            )
        ).all()
    tickets = [Ticket(r.job_id, r.id, r.attempt, r.kind, r.role, r.start, r.stop) for r in rows]
    return sum(give_back(database, ticket, crashed=False) for ticket in tickets)


def beat(database: Database, owner: str, executor: str, slots: int) -> None:
    """Tell that this engine is alive; forget engines silent for an hour."""
    with database.writing() as connection:
        now = database.now(connection)
        known = connection.execute(
            sa.update(engine).where(engine.c.owner == owner).values(seen=now, slots=slots)
        )
        if known.rowcount == 0:
            connection.execute(
                sa.insert(engine).values(owner=owner, executor=executor, slots=slots, seen=now)
            )
            connection.execute(sa.delete(engine).where(engine.c.seen < now - 3600))


def owners(database: Database) -> list[str]:
    """The engines that hold a shard at the moment."""
    with database.reading() as connection:
        query = sa.select(shard.c.owner).where(shard.c.state == "running").distinct()
        return [owner for owner in connection.scalars(query) if owner]


def leave(database: Database, owner: str) -> None:
    """Forget an engine that stops in good order."""
    with database.writing() as connection:
        connection.execute(sa.delete(engine).where(engine.c.owner == owner))


def parts_of(database: Database, job_id: str, *, last: bool = False) -> Iterable[bytes]:
    """The outputs of a job's shards in the order of their points, one at a time; or the last."""
    with database.reading() as connection:
        keys = connection.execute(
            sa.select(output.c.shard_id, output.c.part)
            .join(shard, shard.c.id == output.c.shard_id)
            .where(shard.c.job_id == job_id, shard.c.state == "done")
            .order_by(shard.c.start, output.c.part)
        ).all()
    for key in keys[-1:] if last else keys:
        with database.reading() as connection:
            data = connection.scalar(
                sa.select(output.c.data).where(
                    output.c.shard_id == key.shard_id, output.c.part == key.part
                )
            )
        if data is not None:
            yield data
