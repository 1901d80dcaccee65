"""Databases of their own for each test: SQLite in a file, and PostgreSQL when one answers.

The PostgreSQL server is found by LADDERBAND_TEST_POSTGRESQL (default: user postgres on the standard
port of this machine); without one those tests are skipped and say so.
"""

from __future__ import annotations

import os
import secrets
from collections.abc import Iterator
from pathlib import Path

import pytest
import sqlalchemy as sa

from ladderband.jobs.database import Database

SERVER = os.environ.get(
    "LADDERBAND_TEST_POSTGRESQL", "postgresql+psycopg://postgres@127.0.0.1:5432/postgres"
)


@pytest.fixture(params=["sqlite", "postgresql"])
def database_url(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[str]:
    """The URL of an empty database, gone after the test."""
    if request.param == "sqlite":
        yield f"sqlite:///{tmp_path / 'jobs.db'}"
    else:
        yield from postgresql_database()


def postgresql_database(options: str = "") -> Iterator[str]:
    pytest.importorskip("psycopg", reason="the PostgreSQL driver is not installed")
    server = sa.create_engine(SERVER, isolation_level="AUTOCOMMIT", poolclass=sa.NullPool)
    name = f"ladderband_test_{secrets.token_hex(6)}"
    try:
        with server.connect() as connection:
            connection.execute(sa.text(f"CREATE DATABASE {name}{options}"))
    except sa.exc.OperationalError:
        pytest.skip(f"no PostgreSQL answers at {SERVER}")
    try:
        yield sa.make_url(SERVER).set(database=name).render_as_string(hide_password=False)
    finally:
        with server.connect() as connection:
            connection.execute(sa.text(f"DROP DATABASE {name} WITH (FORCE)"))
        server.dispose()


@pytest.fixture
def database(database_url: str) -> Iterator[Database]:
    """An empty database with the tables made."""
    made = Database(database_url)
    made.migrate()
    yield made
    made.close()
