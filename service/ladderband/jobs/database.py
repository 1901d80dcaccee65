"""One database behind the records: SQLite in a file, or PostgreSQL by URL.

Every statement runs inside :meth:`Database.reading` or :meth:`Database.writing`. On SQLite a writer
takes the write lock at its first statement (``BEGIN IMMEDIATE``), so that two writers queue instead
of failing in mid-transaction, and a reader never takes it. Rows are locked on PostgreSQL in one
order: the job first, its shards after.
"""

from __future__ import annotations

import sqlite3
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import sqlalchemy as sa
from alembic import command
from alembic.config import Config
from alembic.runtime.migration import MigrationContext
from alembic.script import ScriptDirectory
from sqlalchemy.engine import Connection
from sqlalchemy.pool import ConnectionPoolEntry

BUSY_S = 20.0
"""How long a SQLite writer queues for the lock; far above any transaction of ours."""

LOCK_NUMBER = 0x6C616464
"""Names the advisory lock that lets one process at a time migrate on PostgreSQL."""

DISK_FULL = "53100"
"""SQLSTATE of a full disk; a server words its messages in its own language."""

_WRITES = "ladderband_writes"


class StorageUnavailable(Exception):
    """The database cannot be reached, or has no room left; nothing was changed."""


class Database:
    """A database that may be away at times.

    Both context managers raise :class:`StorageUnavailable` when the database cannot be reached or
    cannot take the change; the transaction is then undone.
    """

    def __init__(self, url: str) -> None:
        self.url = url
        self._engine = _make_engine(url)

    @property
    def is_sqlite(self) -> bool:
        return self._engine.dialect.name == "sqlite"

    @contextmanager
    def reading(self) -> Iterator[Connection]:
        """One read transaction."""
        with _storage_errors(self), self._engine.connect() as connection:
            yield connection

    @contextmanager
    def writing(self) -> Iterator[Connection]:
        """One write transaction, committed when the block ends without an error."""
        with _storage_errors(self), self._engine.connect() as connection:
            writer = connection.execution_options(**{_WRITES: True})
            with writer.begin():
                yield writer

    def now(self, connection: Connection) -> float:
        """Seconds since 1970 by the one clock all engines and web processes share."""
        if self.is_sqlite:
            return time.time()  # one machine only
        return float(connection.scalar(sa.text("SELECT extract(epoch FROM clock_timestamp())")))

    def migrate(self, revision: str = "head") -> None:
        """Bring the tables to this version's schema; safe when several processes do it at once."""
        with _storage_errors(self), self._engine.connect() as connection:
            writer = connection.execution_options(**{_WRITES: True})
            with writer.begin():
                if not self.is_sqlite:
                    writer.execute(sa.select(sa.func.pg_advisory_xact_lock(LOCK_NUMBER)))
                command.upgrade(_alembic(writer), revision)

    def is_current(self) -> bool:
        """True when the tables have this version's schema."""
        with self.reading() as connection:
            found = MigrationContext.configure(connection).get_current_revision()
        return found == ScriptDirectory.from_config(_alembic(None)).get_current_head()

    def close(self) -> None:
        self._engine.dispose()


def described(url: str) -> str:
    """The URL for people: without its password."""
    return sa.make_url(url).render_as_string(hide_password=True)


def _make_engine(url: str) -> sa.Engine:
    parsed = sa.make_url(url)
    if parsed.drivername in {"postgresql", "postgres"}:
        parsed = parsed.set(drivername="postgresql+psycopg")
    if parsed.get_backend_name() != "sqlite":
        return sa.create_engine(parsed, pool_pre_ping=True, pool_size=8, max_overflow=8)
    if parsed.database:
        Path(parsed.database).parent.mkdir(parents=True, exist_ok=True)
    made = sa.create_engine(parsed, connect_args={"timeout": BUSY_S, "check_same_thread": False})
    sa.event.listen(made, "connect", _prepare_sqlite)
    sa.event.listen(made, "begin", _begin_sqlite)
    return made


def _prepare_sqlite(raw: sqlite3.Connection, _: ConnectionPoolEntry) -> None:
    raw.isolation_level = None  # the begin event below decides how a transaction starts
    for pragma in ("journal_mode=WAL", "synchronous=NORMAL", "foreign_keys=ON"):
        raw.execute(f"PRAGMA {pragma}").close()


def _begin_sqlite(connection: Connection) -> None:
    writes = connection.get_execution_options().get(_WRITES, False)
    connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")


def _alembic(connection: Connection | None) -> Config:
    config = Config()
    config.set_main_option("script_location", str(Path(__file__).parent / "migrations"))
    config.attributes["connection"] = connection
    return config


@contextmanager
def _storage_errors(database: Database) -> Iterator[None]:
    try:
        yield
    except sa.exc.IntegrityError:
        raise
    except (sa.exc.DBAPIError, sa.exc.TimeoutError) as error:
        raise StorageUnavailable(_reason(error)) from error


def _reason(error: sa.exc.SQLAlchemyError) -> str:
    """A sentence without the server's internals: full, or not reachable."""
    cause = getattr(error, "orig", None)
    state, code = getattr(cause, "sqlstate", None), getattr(cause, "sqlite_errorcode", None)
    if state == DISK_FULL or code == sqlite3.SQLITE_FULL:
        return "The job database has no room left; nothing was changed. Free space, then try again."
    return "The job database cannot be reached at the moment; nothing was changed. Try again soon."
