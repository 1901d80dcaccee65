"""The whole service under load, on both databases: many equal requests, and a large sweep."""

from __future__ import annotations

import json
import os
import threading
import time
from collections import Counter
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import closing
from http.client import HTTPConnection
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import httpx
import pytest
import sqlalchemy as sa

from jobs.engine_helpers import OVERLAPS, until
from ladderband.jobs import records
from ladderband.jobs.database import Database
from live_service import LiveServer, serving

pytestmark = [pytest.mark.slow, pytest.mark.timeout(1800)]

CLIENTS, REQUESTS = 64, 1000
POINTS = 100_000


@pytest.fixture
def marks(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Compute processes write a line here for each single request they compute."""
    file = tmp_path / "marks"
    tests = str(Path(__file__).parents[1])
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join([tests, os.environ.get("PYTHONPATH", "")]))
    monkeypatch.setenv("LADDERBAND_KINDS", "jobs.sample_kinds:counted_kinds")
    monkeypatch.setenv("LADDERBAND_TEST_MARKS", str(file))
    return file


@pytest.fixture
def live(marks: Path, database_url: str, tmp_path: Path) -> Iterator[LiveServer]:
    with serving("--database-url", database_url, data_dir=tmp_path) as server:
        yield server


# ---------------------------------------------------------------- equal requests


def one_client(url: str, begin: threading.Barrier) -> list[str]:
    """Submit all requests over one connection; the ids of the jobs they led to."""
    http = HTTPConnection(urlsplit(url).netloc, timeout=120)
    begin.wait()
    found = []
    for number in range(REQUESTS):
        body = json.dumps({**OVERLAPS, "displacement": number / 500})
        head = {"Content-Type": "application/json", "Prefer": "respond-async"}
        http.request("POST", "/v1/overlaps", body, head)
        answer = http.getresponse()
        document = json.loads(answer.read())
        assert answer.status == 202, document
        found.append(document["id"])
    http.close()
    return found


def unfinished(database: Database) -> int:
    with database.reading() as connection:
        query = sa.select(sa.func.count()).where(records.job.c.state != "succeeded")
        return connection.scalar(query) or 0


def test_equal_requests_of_64_clients_are_computed_once_each(
    live: LiveServer, database_url: str, marks: Path
) -> None:
    begin = threading.Barrier(CLIENTS)
    begun = time.monotonic()
    with ThreadPoolExecutor(CLIENTS) as pool:
        answers = list(pool.map(lambda _: one_client(live.url, begin), range(CLIENTS)))
    rate = CLIENTS * REQUESTS / (time.monotonic() - begun)
    print(f"{rate:.0f} submissions/s")
    assert {tuple(found) for found in answers} == {tuple(answers[0])}
    assert len(set(answers[0])) == REQUESTS
    with closing(Database(database_url)) as database:
        until(lambda: unfinished(database) == 0, 300)
        with database.reading() as connection:
            jobs = list(connection.scalars(sa.select(records.job.c.id)))
            columns = sa.select(records.shard.c.job_id, records.shard.c.attempt)
            attempts = {row.job_id: row.attempt for row in connection.execute(columns)}
    assert set(jobs) == set(answers[0])
    assert attempts == dict.fromkeys(jobs, 1)
    computed = Counter(marks.read_text().split())
    assert len(computed) == REQUESTS
    assert set(computed.values()) == {1}


# ---------------------------------------------------------------- a large sweep


def sweep(points: int) -> dict[str, Any]:
    span = {"start": 0.0, "stop": 3.0, "points": points}
    return {
        "resource": "overlaps",
        "request": OVERLAPS,
        "vary": [{"pointer": "/displacement", "range": span}],
        "collect": ["/sums/0", "/accuracy/bound"],
    }


def web_memory(live: LiveServer) -> float:
    """MiB of the larger web process."""
    return max(process.memory_info().rss for process in live.web_workers()) / 2**20


class Peak:
    """The highest memory of the web processes while it is watched."""

    def __init__(self, live: LiveServer) -> None:
        self._live = live
        self._over = threading.Event()
        self.mib = 0.0

    def __enter__(self) -> Peak:
        self._thread = threading.Thread(target=self._watch)
        self._thread.start()
        return self

    def _watch(self) -> None:
        while not self._over.wait(0.05):
            self.mib = max(self.mib, web_memory(self._live))

    def __exit__(self, *_: object) -> None:
        self._over.set()
        self._thread.join()


def lines_of_a_sweep(http: httpx.Client, points: int) -> int:
    """Have it computed, then fetched as CSV, JSON and npy; the lines of the CSV."""
    job = http.post("/v1/sweeps", json=sweep(points)).json()
    until(lambda: http.get(job["links"]["self"]).json()["finished"] is not None, 900)
    for name in ("json", "npy", "csv"):
        with http.stream("GET", job["links"]["result"] + f"?format={name}") as answer:
            assert answer.status_code == 200
            lines = sum(chunk.count(b"\n") for chunk in answer.iter_bytes())
    return lines


def test_web_processes_do_not_grow_with_the_points_of_a_sweep(live: LiveServer) -> None:
    with httpx.Client(base_url=live.url, timeout=600) as http:
        for more in range(8):  # both processes have rendered tables, all code is loaded
            lines_of_a_sweep(http, 200 + more)
        idle = web_memory(live)
        with Peak(live) as peak:
            assert lines_of_a_sweep(http, POINTS) == POINTS + 1
    print(f"web process: {idle:.0f} MiB idle, {peak.mib:.0f} MiB at most")
    assert peak.mib - idle < 30  # 14 part by part; with the whole table in one part 59
