"""What the web side does with the records: submit, look, list, cancel, expire."""

from __future__ import annotations

import hashlib
import secrets
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import orjson
import sqlalchemy as sa
from sqlalchemy.dialects import postgresql, sqlite
from sqlalchemy.engine import Connection, Row

from ladderband.jobs.database import Database
from ladderband.jobs.errors import (
    JobFinished,
    JobNotFound,
    Problem,
    QueueFull,
    TokenMismatch,
)
from ladderband.jobs.records import (
    BATCH,
    FINAL_STATES,
    OPEN_STATES,
    engine,
    job,
    shard,
    token,
    turn,
)

_COLUMNS = [column for column in job.c if column.name != "request"]

# made once: to make such a query costs as much as SQLite's answer to it
_VIEW = sa.select(*_COLUMNS, job.c.request.is_not(None).label("kept"))
_OF_KEY = _VIEW.where(job.c.key_id == sa.bindparam("key_id"))
_ONE = _OF_KEY.where(job.c.id == sa.bindparam("job_id"))
_LIVE = _OF_KEY.where(job.c.live_digest == sa.bindparam("digest"))


@dataclass(frozen=True, slots=True)
class NewJob:
    """A validated request to be put on record.

    ``point_s`` is the estimated time of one point in seconds; ``token`` stands for
    the client's Idempotency-Key.
    """

    kind: str
    request: bytes
    digest: str
    total: int = 1
    point_s: float = 0.05
    lane: int = BATCH
    key_id: str = ""
    token: str | None = None


@dataclass(frozen=True, slots=True)
class JobView:
    """A job as it stands. Times in seconds since 1970; ``total`` and ``done`` count points."""

    id: str
    key_id: str
    kind: str
    digest: str
    lane: int
    state: str
    total: int
    done: int
    revision: int
    created: float
    started: float | None
    finished: float | None
    expires: float | None
    has_result: bool
    now: float
    problem: Problem | None

    @property
    def ended(self) -> bool:
        return self.state in FINAL_STATES

    @property
    def rate(self) -> float | None:
        """Points a second since the start."""
        if self.started is None or self.done == 0:
            return None
        return self.done / max((self.finished or self.now) - self.started, 1e-3)

    @property
    def estimated_end(self) -> float | None:
        rate = self.rate
        if self.ended or rate is None:
            return None
        return self.now + (self.total - self.done) / rate


def canonical(document: Any) -> bytes:
    """JSON text with sorted members: equal requests have equal bytes."""
    return orjson.dumps(document, option=orjson.OPT_SORT_KEYS | orjson.OPT_SERIALIZE_NUMPY)


def request_digest(kind: str, request: bytes, version: str) -> str:
    """Hash of what decides the answer: the kind, the canonical request, the program's version."""
    return hashlib.sha256(b"\n".join([version.encode(), kind.encode(), request])).hexdigest()


def submit(database: Database, new: NewJob, open_limit: int) -> tuple[JobView, bool]:
    """Put the job on record, or find the one that answers the same request already.

    Returns the job and whether it is new. Of any number of equal submissions at once exactly one is
    new. A failed or cancelled job does not answer a later submission, except by its own token.

    Raises
    ------
    TokenMismatch
        The token came with another request before.
    QueueFull
        The key has ``open_limit`` unfinished jobs.
    """
    found = _existing(database, new)
    if found is not None:
        return found, False
    with database.writing() as connection:
        known = _by_token(connection, new)
        if known is None:
            known, made = _insert(connection, database, new, open_limit)
            _remember(connection, new, known)
        else:
            made = False
        return _view(connection, database, known, new.key_id), made


def _existing(database: Database, new: NewJob) -> JobView | None:
    """The fast way out, without the write lock, when nothing has to be written."""
    with database.reading() as connection:
        if new.token is not None:
            known = _by_token(connection, new)
            return None if known is None else _view(connection, database, known, new.key_id)
        row = _live(connection, new)
        if row is None or row.lane > new.lane:
            return None
        return _as_view(row, database.now(connection))


def _by_token(connection: Connection, new: NewJob) -> str | None:
    if new.token is None:
        return None
    row = connection.execute(
        sa.select(token).where(token.c.key_id == new.key_id, token.c.token == new.token)
    ).one_or_none()
    if row is not None and row.digest != new.digest:
        raise TokenMismatch
    return None if row is None else str(row.job_id)


def _live(connection: Connection, new: NewJob) -> Row[*tuple[Any, ...]] | None:
    values = {"key_id": new.key_id, "digest": new.digest}
    return connection.execute(_LIVE, values).one_or_none()


def _insert(
    connection: Connection, database: Database, new: NewJob, open_limit: int
) -> tuple[str, bool]:
    now = database.now(connection)
    ident = "j" + secrets.token_hex(12)
    values = {
        "id": ident,
        "key_id": new.key_id,
        "kind": new.kind,
        "request": new.request,
        "digest": new.digest,
        "live_digest": new.digest,
        "lane": new.lane,
        "state": "queued",
        "total": new.total,
        "next_point": 0,
        "done": 0,
        "waiting": 0,
        "point_s": new.point_s,
        "turn": now,
        "revision": 1,
        "created": now,
    }
    if _insert_or_ignore(connection, job, values):
        _check_queue(connection, new, open_limit)
        _insert_or_ignore(connection, turn, {"key_id": new.key_id, "served": 0.0})
        return ident, True
    row = _live(connection, new)
    if row is None:  # ended without a result between the two statements
        return _insert(connection, database, new, open_limit)
    if row.lane > new.lane:  # somebody now waits for it
        connection.execute(sa.update(job).where(job.c.id == row.id).values(lane=new.lane))
    return str(row.id), False


def _check_queue(connection: Connection, new: NewJob, open_limit: int) -> None:
    unfinished = connection.scalar(
        sa.select(sa.func.count())
        .select_from(job)
        .where(job.c.key_id == new.key_id, job.c.state.in_(OPEN_STATES))
    )
    if unfinished is not None and unfinished > open_limit:
        raise QueueFull(open_limit)


def _remember(connection: Connection, new: NewJob, job_id: str) -> None:
    if new.token is None:
        return
    values = {"key_id": new.key_id, "token": new.token, "digest": new.digest, "job_id": job_id}
    if not _insert_or_ignore(connection, token, values):
        _by_token(connection, new)  # the same token at the same moment: must be the same request


def _insert_or_ignore(connection: Connection, table: sa.Table, values: dict[str, Any]) -> bool:
    insert = sqlite.insert if connection.dialect.name == "sqlite" else postgresql.insert
    first = next(iter(table.primary_key))
    wanted = insert(table).values(values).on_conflict_do_nothing().returning(first)
    return connection.execute(wanted).one_or_none() is not None


def view(database: Database, job_id: str, key_id: str = "") -> JobView:
    """The job as it stands; raises JobNotFound, also when it belongs to another key."""
    with database.reading() as connection:
        return _view(connection, database, job_id, key_id)


def _view(connection: Connection, database: Database, job_id: str, key_id: str) -> JobView:
    row = connection.execute(_ONE, {"job_id": job_id, "key_id": key_id}).one_or_none()
    if row is None:
        raise JobNotFound(job_id)
    return _as_view(row, database.now(connection))


def _as_view(row: Row[*tuple[Any, ...]], now: float) -> JobView:
    return JobView(
        id=row.id,
        key_id=row.key_id,
        kind=row.kind,
        digest=row.digest,
        lane=row.lane,
        state=row.state,
        total=row.total,
        done=row.done,
        revision=row.revision,
        created=row.created,
        started=row.started,
        finished=row.finished,
        expires=row.expires,
        has_result=row.state == "succeeded" and row.kept,
        now=now,
        problem=None if row.problem is None else orjson.loads(row.problem),
    )


def listed(
    database: Database, key_id: str, *, limit: int, states: Sequence[str] = (), before: float = 0.0
) -> list[JobView]:
    """The key's jobs, newest first; ``before`` (a ``created`` time) asks for the next page."""
    query = _VIEW.where(job.c.key_id == key_id)
    if states:
        query = query.where(job.c.state.in_(states))
    if before:
        query = query.where(job.c.created < before)
    with database.reading() as connection:
        rows = connection.execute(query.order_by(job.c.created.desc()).limit(limit)).all()
        now = database.now(connection)
    return [_as_view(row, now) for row in rows]


@dataclass(frozen=True, slots=True)
class Overview:
    """What is going on at the moment: unfinished jobs by state, engines that gave a sign of life."""

    queued: int
    running: int
    engines: int


def overview(database: Database, alive_s: float = 60.0) -> Overview:
    """Counts for operators; reads unfinished jobs only."""
    with database.reading() as connection:
        states = sa.select(job.c.state, sa.func.count()).where(job.c.state.in_(OPEN_STATES))
        counts = {row[0]: row[1] for row in connection.execute(states.group_by(job.c.state))}
        alive = sa.select(sa.func.count()).select_from(engine)
        engines = connection.scalar(alive.where(engine.c.seen > database.now(connection) - alive_s))
    return Overview(counts.get("queued", 0), counts.get("running", 0), engines or 0)


def request_of(database: Database, job_id: str) -> bytes | None:
    """The canonical request; None when it has expired or the job is unknown."""
    with database.reading() as connection:
        return connection.scalar(sa.select(job.c.request).where(job.c.id == job_id))


def cancel(database: Database, job_id: str, key_id: str = "") -> JobView:
    """End the job; its shards lose their leases, so engines stop working on them.

    Raises JobNotFound, and JobFinished for a job that has ended.
    """
    with database.writing() as connection:
        row = lock(connection, job_id)
        if row is None or row.key_id != key_id:
            raise JobNotFound(job_id)
        if row.state in FINAL_STATES:
            raise JobFinished(job_id, row.state)
        end(connection, job_id, "cancelled", database.now(connection))
        return _view(connection, database, job_id, key_id)


def lock(connection: Connection, job_id: str) -> Row[*tuple[Any, ...]] | None:
    """The job's row, held until the transaction ends. Always taken before rows of its shards."""
    return connection.execute(
        sa.select(*_COLUMNS).where(job.c.id == job_id).with_for_update()
    ).one_or_none()


def end(
    connection: Connection, job_id: str, state: str, now: float, problem: Problem | None = None
) -> None:
    """Fail or cancel a locked job: no shard of it is worked on or kept any longer."""
    connection.execute(
        sa.update(job)
        .where(job.c.id == job_id)
        .values(
            state=state,
            live_digest=None,
            waiting=0,
            finished=now,
            problem=None if problem is None else orjson.dumps(problem),
            revision=job.c.revision + 1,
        )
    )
    connection.execute(sa.delete(shard).where(shard.c.job_id == job_id))


def expire(database: Database, keep_s: float, batch: int = 100) -> int:
    """Remove requests and results of jobs that ended more than ``keep_s`` seconds ago.

    The job's row stays ten times as long, so that asking for it tells what happened to it.
    """
    with database.writing() as connection:
        now = database.now(connection)
        old = (
            sa.select(job.c.id)
            .where(job.c.finished < now - keep_s, job.c.request.is_not(None))
            .limit(batch)
        )
        ids = list(connection.scalars(old))
        connection.execute(sa.delete(shard).where(shard.c.job_id.in_(ids)))
        connection.execute(
            sa.update(job)
            .where(job.c.id.in_(ids))
            .values(request=None, live_digest=None, expires=now, revision=job.c.revision + 1)
        )
        connection.execute(sa.delete(job).where(job.c.expires < now - 9 * keep_s))
    return len(ids)
