"""The running service while its database is gone or has no room left: a clear problem, nothing lost."""

from __future__ import annotations

import contextlib
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import AbstractContextManager, contextmanager
from pathlib import Path
from typing import Any

import httpx
import pytest
import sqlalchemy as sa

from jobs.conftest import SERVER, postgresql_database
from jobs.engine_helpers import until
from jobs.test_kill import check, sweep_of
from live_service import serving

POINTS = 300
SMALL = {**sweep_of(1)["request"], "v_initial_max": 1, "digits": 20}


def unavailable(http: httpx.Client, words: str) -> None:
    """New jobs are refused with a problem that says why; a small request is answered."""
    for number in range(200):  # the last free places of a page may still take some
        body = {**SMALL, "displacement": time.time() % 1 + number}
        found = http.post("/v1/overlaps", json=body, headers={"Prefer": "respond-async"})
        if found.status_code != 202:
            break
    assert (found.status_code, found.json()["type"]) == (503, "/problems/storage-unavailable")
    assert words in found.json()["detail"]
    assert "Retry-After" in found.headers
    assert http.post("/v1/overlaps", json=body).status_code == 200


def sweep_through(url: str, folder: Path, fault: AbstractContextManager[None], words: str) -> None:
    """Begin a sweep, have the fault for some seconds, and get the whole table after it."""
    with (
        serving("--database-url", url, data_dir=folder) as live,
        httpx.Client(base_url=live.url, timeout=60) as http,
    ):
        job: dict[str, Any] = http.post("/v1/sweeps", json=sweep_of(POINTS)).json()
        until(lambda: http.get(job["links"]["self"]).json()["done"] > 0, 120)
        assert http.get(job["links"]["self"]).json()["done"] < POINTS
        with fault:
            unavailable(http, words)
            time.sleep(3.0)  # shards end meanwhile
            unavailable(http, words)
        until(lambda: http.get(job["links"]["self"]).status_code == 200)
        until(lambda: http.get(job["links"]["self"]).json()["finished"] is not None, 120)
        assert http.get(job["links"]["self"]).json()["state"] == "succeeded"
        check(http.get(job["links"]["result"] + "?format=csv").content, POINTS)


# ---------------------------------------------------------------- gone


@contextmanager
def cut_off(url: str) -> Iterator[None]:
    """PostgreSQL ends every connection to a database and lets nobody in."""
    name = sa.make_url(url).database
    server = sa.create_engine(SERVER, isolation_level="AUTOCOMMIT", poolclass=sa.NullPool)
    ended = f"SELECT pg_terminate_backend(pid) FROM pg_stat_activity WHERE datname = '{name}'"
    with server.connect() as connection:
        connection.execute(sa.text(f"ALTER DATABASE {name} ALLOW_CONNECTIONS false"))
        connection.execute(sa.text(ended))
        yield
        connection.execute(sa.text(f"ALTER DATABASE {name} ALLOW_CONNECTIONS true"))
    server.dispose()


def test_a_sweep_survives_a_database_that_was_gone(tmp_path: Path) -> None:
    for url in postgresql_database():
        sweep_through(url, tmp_path, cut_off(url), "cannot be reached")


# ---------------------------------------------------------------- full


@contextmanager
def small_disk(folder: Path, mebibytes: int) -> Iterator[Path]:
    """A file system of this size, which only root can make."""
    folder.mkdir()
    made = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", f"size={mebibytes}m", "tmpfs", str(folder)],
        capture_output=True,
        check=False,
    )
    if made.returncode != 0:
        pytest.skip("a small disk cannot be mounted here")
    try:
        yield folder
    finally:
        subprocess.run(["umount", "--lazy", str(folder)], check=True)


@contextmanager
def filled(disk: Path) -> Iterator[None]:
    """No block is free."""
    filler = disk / "filler"
    with filler.open("wb", buffering=0) as file, contextlib.suppress(OSError):
        while True:
            file.write(bytes(4096))
    try:
        yield
    finally:
        filler.unlink()


@pytest.mark.slow
@pytest.mark.skipif(sys.platform != "linux", reason="mounts a tmpfs")
def test_a_sweep_survives_a_full_disk_under_sqlite(tmp_path: Path) -> None:
    with small_disk(tmp_path / "disk", 32) as disk:
        sweep_through(f"sqlite:///{disk / 'jobs.db'}", tmp_path, filled(disk), "no room left")


@contextmanager
def tablespace(disk: Path) -> Iterator[str]:
    """The URL of a PostgreSQL database that lies on this disk."""
    place = disk / "space"
    place.mkdir(mode=0o700)
    server = sa.create_engine(SERVER, isolation_level="AUTOCOMMIT", poolclass=sa.NullPool)
    try:
        shutil.chown(place, "postgres", "postgres")
        with server.connect() as connection:
            connection.execute(sa.text(f"CREATE TABLESPACE small LOCATION '{place}'"))
    except (LookupError, sa.exc.DBAPIError) as error:
        pytest.skip(f"no tablespace can be made here: {error}")
    try:
        yield from postgresql_database(" TABLESPACE small")
    finally:
        with server.connect() as connection:
            connection.execute(sa.text("DROP TABLESPACE small"))
        server.dispose()


@pytest.mark.slow
@pytest.mark.skipif(sys.platform != "linux", reason="mounts a tmpfs")
def test_a_sweep_survives_a_full_disk_under_postgresql() -> None:
    with tempfile.TemporaryDirectory() as folder:
        Path(folder).chmod(0o755)  # the server enters as another user
        with small_disk(Path(folder) / "disk", 16) as disk, tablespace(disk) as url:
            sweep_through(url, Path(folder), filled(disk), "no room left")
