"""The tables: what is on record is the truth, processes only borrow it.

job          one request to be computed: a single calculation or a sweep of many points
shard        a range of a job's points that one compute process works on
output       the bytes a finished shard (or a merged job) left, in parts
token        an Idempotency-Key and the job it led to
turn         when a key was last served, for a fair share between keys
api_key      who may ask
engine       which engines are alive

Times are seconds since 1970 by the database's clock (see :class:`~ladderband.jobs.database.
Database`), so that machines need not agree on the time. The schema is made by the migrations; a
test compares both.
"""

from __future__ import annotations

from typing import Final

from sqlalchemy import (
    BigInteger,
    Column,
    Float,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    String,
    Table,
    UniqueConstraint,
    text,
)

metadata = MetaData(
    naming_convention={
        "pk": "pk_%(table_name)s",
        "fk": "fk_%(table_name)s_%(column_0_name)s",
        "uq": "uq_%(table_name)s_%(column_0_name)s",
        "ix": "ix_%(table_name)s_%(column_0_name)s",
    }
)

OPEN_STATES: Final = ("queued", "running")
FINAL_STATES: Final = ("succeeded", "failed", "cancelled")
INTERACTIVE: Final = 0
BATCH: Final = 1

RowNumber = BigInteger().with_variant(Integer, "sqlite")
"""SQLite numbers rows by itself only in a column declared INTEGER."""

_OPEN = text("state IN ('queued', 'running')")
_RUNNING = text("state = 'running'")

job = Table(
    "job",
    metadata,
    Column("id", String(32), primary_key=True),
    Column("key_id", String(32), nullable=False),  # "" without keys
    Column("kind", String(64), nullable=False),
    Column("request", LargeBinary),  # canonical JSON; NULL once expired
    Column("digest", String(64), nullable=False),
    Column("live_digest", String(64)),  # NULL once failed, cancelled or expired: may run again
    Column("lane", Integer, nullable=False),
    Column("state", String(10), nullable=False),
    Column("total", Integer, nullable=False),  # points
    Column("next_point", Integer, nullable=False),  # first point not yet in any shard
    Column("done", Integer, nullable=False),
    Column("waiting", Integer, nullable=False),  # shards in state queued
    Column("point_s", Float, nullable=False),  # seconds a point: estimated, then measured
    Column("turn", Float, nullable=False),
    Column("revision", Integer, nullable=False),  # grows with every change; the events' id
    Column("problem", LargeBinary),
    Column("created", Float, nullable=False),
    Column("started", Float),
    Column("finished", Float),
    Column("expires", Float),
    UniqueConstraint("key_id", "live_digest"),
    Index("ix_job_open", "lane", "turn", sqlite_where=_OPEN, postgresql_where=_OPEN),
    Index("ix_job_expires", "expires"),
    Index("ix_job_owner", "key_id", "created"),
)

shard = Table(
    "shard",
    metadata,
    Column("id", RowNumber, primary_key=True, autoincrement=True),
    Column("job_id", String(32), ForeignKey("job.id", ondelete="CASCADE"), nullable=False),
    Column("role", String(6), nullable=False),  # points | merge
    Column("start", Integer, nullable=False),
    Column("stop", Integer, nullable=False),
    Column("state", String(8), nullable=False),  # queued | running | done | dropped
    Column("attempt", Integer, nullable=False),  # only grows: the fence
    Column("crashes", Integer, nullable=False),  # its compute process died under it
    Column("losses", Integer, nullable=False),  # its engine vanished
    Column("lease", Float),
    Column("owner", String(120)),
    UniqueConstraint("job_id", "role", "start"),  # no point can be in two shards
    Index("ix_shard_job", "job_id", "state"),
    Index("ix_shard_lease", "lease", sqlite_where=_RUNNING, postgresql_where=_RUNNING),
)

output = Table(
    "output",
    metadata,
    Column("shard_id", RowNumber, ForeignKey("shard.id", ondelete="CASCADE"), primary_key=True),
    Column("part", Integer, primary_key=True, autoincrement=False),
    Column("data", LargeBinary, nullable=False),
)

token = Table(
    "token",
    metadata,
    Column("key_id", String(32), primary_key=True),
    Column("token", String(255), primary_key=True),
    Column("digest", String(64), nullable=False),
    Column("job_id", String(32), ForeignKey("job.id", ondelete="CASCADE"), nullable=False),
    Index("ix_token_job", "job_id"),
)

turn = Table(
    "turn",
    metadata,
    Column("key_id", String(32), primary_key=True),
    Column("served", Float, nullable=False),
)

api_key = Table(
    "api_key",
    metadata,
    Column("id", String(32), primary_key=True),
    Column("name", String(100), nullable=False),
    Column("digest", String(64), nullable=False, unique=True),
    Column("created", Float, nullable=False),
    Column("revoked", Float),
)

engine = Table(
    "engine",
    metadata,
    Column("owner", String(120), primary_key=True),
    Column("executor", String(16), nullable=False),
    Column("slots", Integer, nullable=False),
    Column("seen", Float, nullable=False),
)
