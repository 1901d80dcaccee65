"""The whole service with its processes killed at random moments during a sweep.

After each story every point is in the table exactly once and the table's bytes are those of an
undisturbed run. Victims of the Dask engine are in test_dask.py.
"""

from __future__ import annotations

import contextlib
import os
import random
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import httpx
import psutil
import pytest

from jobs.engine_helpers import until
from live_service import KERNELS

KILLS = 10
POINTS = 2000


def sweep_of(points: int) -> dict[str, Any]:
    """Overlaps to 60 digits: some ten milliseconds a point."""
    return {
        "resource": "overlaps",
        "request": {
            "wavenumber_initial_cm1": 1000.0,
            "wavenumber_final_cm1": 900.0,
            "displacement": 1.0,
            "v_initial_max": 14,
            "v_final_max": 14,
            "digits": 60,
        },
        "vary": [
            {"pointer": "/displacement", "range": {"start": 0.1, "stop": 3.0, "points": points}}
        ],
        "collect": ["/overlap_integrals/7/9", "/sums/3"],
    }


@dataclass
class Tree:
    """A service that can be killed in parts and started again at the same address."""

    database_url: str
    folder: Path
    port: int
    process: subprocess.Popen[bytes]
    http: httpx.Client

    def restart(self) -> None:
        self.process = start(self.database_url, self.folder, self.port)

    def wards(self, word: str) -> list[psutil.Process]:
        """Main processes of the service whose command has this word."""
        with contextlib.suppress(psutil.Error):
            children = psutil.Process(self.process.pid).children()
            return [p for p in children if word in " ".join(p.cmdline())]
        return []

    def victims(self, what: str) -> list[psutil.Process]:
        if what == "supervisor":
            return [psutil.Process(self.process.pid)]
        if what == "engine":
            return self.wards("engine")
        if what == "web":
            return self.wards("web.server")
        parents = self.wards("web.server" if what == "web worker" else "engine")
        with contextlib.suppress(psutil.Error):
            return [child for parent in parents for child in parent.children()]
        return []

    def get(self, path: str) -> httpx.Response:
        """An answer, however often the web processes die meanwhile."""
        end = time.monotonic() + 60
        while True:
            try:
                return self.http.get(path)
            except httpx.TransportError:
                assert time.monotonic() < end
                time.sleep(0.1)


def living(processes: list[psutil.Process]) -> list[psutil.Process]:
    return [p for p in processes if p.is_running() and p.status() != psutil.STATUS_ZOMBIE]


def start(database_url: str, folder: Path, port: int) -> subprocess.Popen[bytes]:
    command = [sys.executable, "-m", "ladderband", "serve", "--port", str(port)]
    command += ["--database-url", database_url, "--data-dir", str(folder)]
    command += ["--engine-processes", "2", "--no-log-requests"]
    environment = {**os.environ, "NUMBA_CACHE_DIR": str(KERNELS / "kernels")}
    with (folder / "log").open("ab") as log:
        return subprocess.Popen(command, env=environment, stdout=log, stderr=log)


@pytest.fixture
def tree(database_url: str, tmp_path: Path) -> Iterator[Tree]:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    with httpx.Client(base_url=f"http://127.0.0.1:{port}", timeout=60) as http:
        made = Tree(database_url, tmp_path, port, start(database_url, tmp_path, port), http)
        yield made
        everything = psutil.Process(made.process.pid).children(recursive=True)
        made.process.send_signal(signal.SIGTERM)
        made.process.wait(40)
        assert not living(everything)


def submitted(tree: Tree, points: int) -> dict[str, Any]:
    until(lambda: tree.get("/healthz").status_code == 200, 60)
    answer = tree.http.post("/v1/sweeps", json=sweep_of(points))
    assert answer.status_code == 202, answer.text
    job: dict[str, Any] = answer.json()
    return job


def finished_table(tree: Tree, job: dict[str, Any], timeout_s: float) -> bytes:
    until(lambda: tree.get(job["links"]["self"]).json()["finished"] is not None, timeout_s)
    ended = tree.get(job["links"]["self"]).json()
    assert ended["state"] == "succeeded", ended["problem"]
    return tree.get(job["links"]["result"] + "?format=csv").content


def undisturbed_table(points: int) -> list[list[str]]:
    """The same numbers computed in this process, without records, engines or shards."""
    from ladderband.jobs.sweeps import parse_plan
    from ladderband.numerics.accuracy import Deadline
    from ladderband.web.kinds import kinds

    plan, kind = parse_plan(sweep_of(points)), kinds()["overlaps"]
    table = []
    for point in range(points):
        answer = kind.document(plan.request(point), Deadline.none())
        table.append(
            [
                str(point),
                repr(plan.values(point)[0]),
                answer["overlap_integrals"][7][9],
                answer["sums"][3],
                "",
            ]
        )
    return table


def check(content: bytes, points: int) -> None:
    header, *rows = [line.split(",") for line in content.decode().splitlines()]
    assert header == ["point", "displacement", "overlap_integrals/7/9", "sums/3", "error"]
    assert [int(row[0]) for row in rows] == list(range(points))
    assert rows == undisturbed_table(points)


def kill_at_random(tree: Tree, victim: str, job: dict[str, Any], kills: int) -> int:
    """Kill ``victim`` at random moments until the job ends; returns how often."""
    moments = random.Random(victim)
    done = 0
    while done < kills:
        time.sleep(moments.uniform(0.2, 1.5))
        if tree.get(job["links"]["self"]).json()["finished"] is not None:
            break
        found = tree.victims(victim)
        if not found:
            continue
        with contextlib.suppress(psutil.NoSuchProcess):
            moments.choice(found).kill()
            done += 1
        if victim == "supervisor":
            tree.process.wait()
            tree.restart()
            until(lambda: tree.get("/healthz").status_code == 200, 60)
    return done


@pytest.mark.slow
@pytest.mark.timeout(900)
@pytest.mark.parametrize("victim", ["web worker", "web", "engine", "child", "supervisor"])
def test_ten_kills_lose_nothing_and_compute_nothing_twice(tree: Tree, victim: str) -> None:
    kills, points = 0, POINTS
    while kills < KILLS:  # a fast machine ends a sweep before the tenth kill
        job = submitted(tree, points)
        until(lambda now=job: tree.get(now["links"]["self"]).json()["done"] > 0, 300)
        kills += kill_at_random(tree, victim, job, KILLS - kills)
        check(finished_table(tree, job, 280), points)
        points += 1


def test_kills_of_all_kinds_lose_nothing(tree: Tree) -> None:
    job = submitted(tree, 300)
    until(lambda: tree.get(job["links"]["self"]).json()["done"] > 0, 300)
    for victim in ("child", "web worker", "engine", "supervisor"):
        kill_at_random(tree, victim, job, 1)
    check(finished_table(tree, job, 100), 300)
