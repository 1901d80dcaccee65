"""The Dask executor with a real scheduler and two workers, each a process of its own."""

from __future__ import annotations

import os
import random
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from jobs.engine_helpers import KINDS, ended, put, sweep, table, until
from ladderband.jobs.database import Database
from ladderband.jobs.dispatcher import Engine
from ladderband.jobs.executors.local import ChildOptions, LocalExecutor
from ladderband.jobs.submissions import view

pytest.importorskip("distributed", reason="the extra 'dask' is not installed")
# the library's own threads and sockets end in their own time
pytestmark = [
    pytest.mark.filterwarnings("ignore::ResourceWarning"),
    pytest.mark.filterwarnings("ignore::pytest.PytestUnraisableExceptionWarning"),
    pytest.mark.filterwarnings("ignore::DeprecationWarning"),
]


class Cluster:
    """A scheduler and workers that can be killed and started again."""

    def __init__(self, folder: Path) -> None:
        with socket.socket() as probe:
            probe.bind(("127.0.0.1", 0))
            self.port = probe.getsockname()[1]
        self.address = f"tcp://127.0.0.1:{self.port}"
        self._log = (folder / "dask.log").open("wb")
        self._folder = folder
        self.scheduler = self.start_scheduler()
        self.workers = [self.start_worker() for _ in range(2)]

    def start_scheduler(self) -> subprocess.Popen[bytes]:
        return self._run("scheduler", "--host", "127.0.0.1", "--port", str(self.port))

    def start_worker(self) -> subprocess.Popen[bytes]:
        options = ["--nthreads", "1", "--no-nanny", "--local-directory", str(self._folder)]
        return self._run("worker", self.address, "--host", "127.0.0.1", *options)

    def _run(self, role: str, *options: str) -> subprocess.Popen[bytes]:
        command = [sys.executable, "-m", "dask", role, "--no-dashboard", *options]
        return subprocess.Popen(command, stdout=self._log, stderr=self._log)

    def close(self) -> None:
        for process in [*self.workers, self.scheduler]:
            process.kill()
            process.wait()
        self._log.close()


@pytest.fixture
def cluster(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Iterator[Cluster]:
    tests = str(Path(__file__).parents[1])
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join([tests, os.environ.get("PYTHONPATH", "")]))
    made = Cluster(tmp_path)
    yield made
    made.close()


@contextmanager
def at_work(database: Database, cluster: Cluster) -> Iterator[Engine]:
    from ladderband.jobs.executors.dask import DaskExecutor

    engine = Engine(database, DaskExecutor(cluster.address, ChildOptions(KINDS, nice=0)))
    thread = threading.Thread(target=engine.run)
    thread.start()
    try:
        yield engine
    finally:
        engine.stop()
        thread.join(30)
        assert not thread.is_alive()


def undisturbed(tmp_path: Path, values: list[float]) -> dict[str, list[object]]:
    """The same sweep by the local executor, without any disturbance."""
    database = Database(f"sqlite:///{tmp_path / 'undisturbed.db'}")
    database.migrate()
    job = sweep(database, "spin", {"seconds": 0.0}, values, ["/x", "/y", "/z"])
    engine = Engine(database, LocalExecutor(1, ChildOptions(KINDS, nice=0)))
    thread = threading.Thread(target=engine.run)
    thread.start()
    ended(database, job)
    engine.stop()
    thread.join(20)
    found = table(database, job)
    database.close()
    return found


def test_a_cluster_computes_the_same_bits_as_this_machine(
    database: Database, cluster: Cluster, tmp_path: Path
) -> None:
    values = [i / 7 for i in range(200)]
    job = sweep(database, "spin", {"seconds": 0.005}, values, ["/x", "/y", "/z"])
    with at_work(database, cluster):
        assert ended(database, job, 60).state == "succeeded"
    assert table(database, job) == undisturbed(tmp_path, values)


def test_a_crash_ends_its_job_and_no_worker(database: Database, cluster: Cluster) -> None:
    poison = put(database, "crash", {})
    with at_work(database, cluster):
        found = ended(database, poison, 60)
        assert (found.problem or {})["type"] == "/problems/compute-crashed"
        after = put(database, "add", {"a": 1, "b": 2})
        assert ended(database, after).state == "succeeded"
    assert all(process.poll() is None for process in cluster.workers)


def disturbed(cluster: Cluster, victim: str) -> None:
    """Kill one worker, or the scheduler, and start what was lost."""
    if victim == "worker":
        cluster.workers[0].kill()
        cluster.workers.pop(0).wait()
        cluster.workers.append(cluster.start_worker())
        return
    cluster.scheduler.kill()
    cluster.scheduler.wait()
    for worker in cluster.workers:  # they end themselves without a scheduler; this is sooner
        worker.kill()
        worker.wait()
    cluster.scheduler = cluster.start_scheduler()
    cluster.workers = [cluster.start_worker() for _ in range(2)]


@pytest.mark.timeout(900)
@pytest.mark.parametrize("victim", ["worker", "scheduler"])
@pytest.mark.parametrize(
    ("points", "kills"),
    [(300, 1), pytest.param(2000, 10, marks=pytest.mark.slow)],
    ids=["once", "ten times"],
)
def test_killing_a_part_of_the_cluster_loses_nothing(
    database: Database, cluster: Cluster, tmp_path: Path, victim: str, points: int, kills: int
) -> None:
    values = [i / 7 for i in range(points)]
    job = sweep(database, "spin", {"seconds": 0.01}, values, ["/x", "/y", "/z"])
    moments = random.Random(victim)
    with at_work(database, cluster):
        until(lambda: view(database, job.id).done > 0, 60)
        for _ in range(kills):
            disturbed(cluster, victim)
            done = view(database, job.id).done
            # the next kill only once the cluster works again, else nothing would be disturbed
            until(lambda done=done: view(database, job.id).done > done, 60)
            time.sleep(moments.uniform(0.0, 0.5))
        assert ended(database, job, 200).state == "succeeded"
    assert table(database, job) == undisturbed(tmp_path, values)
