"""An engine with real compute processes: results, crashes, limits, cancelling, lost databases."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import orjson
import psutil
import pytest

from jobs.engine_helpers import KINDS, ended, put, sweep, table, until
from ladderband.jobs import claims
from ladderband.jobs.database import Database
from ladderband.jobs.dispatcher import Engine, EngineOptions, gone, own_name
from ladderband.jobs.executors.local import ChildOptions, LocalExecutor
from ladderband.jobs.submissions import (
    cancel,
    view,
)


@pytest.fixture(autouse=True)
def kinds_path(monkeypatch: pytest.MonkeyPatch) -> None:
    """Compute processes find the kinds of the tests."""
    tests = str(Path(__file__).parents[1])
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join([tests, os.environ.get("PYTHONPATH", "")]))


@contextmanager
def running(database: Database, slots: int = 2, **options: float) -> Iterator[Engine]:
    """An engine at work in a thread of this process."""
    memory = int(options.pop("memory_bytes", 2**31))
    executor = LocalExecutor(slots, ChildOptions(KINDS, nice=0, memory_bytes=memory))
    engine = Engine(database, executor, EngineOptions(**options))
    thread = threading.Thread(target=engine.run)
    thread.start()
    try:
        yield engine
    finally:
        engine.stop()
        thread.join(20)
        assert not thread.is_alive()


def test_a_single_job_and_a_sweep_are_computed(database: Database) -> None:
    single = put(database, "add", {"a": 1, "b": 2})
    many = sweep(database, "refuse", {"steps": 2}, [0, 1, 2, 4], ["/half", "/steps"])
    with running(database):
        assert ended(database, single).state == "succeeded"
        assert ended(database, many).state == "succeeded"
    assert orjson.loads(b"".join(claims.parts_of(database, single.id))) == {"sum": 3, "root": 1.0}
    assert table(database, many) == {
        "point": [0, 0, 1, 2, 2, 3],
        "x": [0, 0, 1, 2, 2, 4],
        "half": [0, 0, None, 1, 1, None],
        "steps": [0, 1, None, 0, 1, None],
        "error": [
            None,
            None,
            "x is odd.",
            None,
            None,
            "The computation failed for a reason of the service's own; its log tells more.",
        ],
    }


def test_a_refused_single_job_fails_with_its_problem(database: Database) -> None:
    job = put(database, "refuse", {"x": 1})
    with running(database):
        found = ended(database, job)
    assert found.state == "failed"
    assert found.problem is not None
    assert found.problem["type"] == "odd"


def test_a_poison_shard_ends_its_job_and_harms_no_other(database: Database) -> None:
    poison = sweep(database, "crash", {"at": 3}, list(range(6)), ["/x"])
    fine = sweep(database, "crash", {"at": -1}, list(range(50)), ["/x"])
    with running(database):
        assert ended(database, fine).state == "succeeded"
        found = ended(database, poison)
    assert found.state == "failed"
    assert found.problem is not None
    assert "died 3 times" in found.problem["detail"]
    assert "SIGKILL" in found.problem["detail"]
    assert table(database, fine)["x"] == list(range(50))


def test_time_and_memory_limits_are_enforced(database: Database) -> None:
    slow = put(database, "sleep", {"seconds": 60})
    hungry = put(database, "hog", {"bytes": 2**33})
    with running(database, limit_s=0.2):
        assert (ended(database, hungry).problem or {})["type"] == "/problems/memory-limit"
        assert (ended(database, slow).problem or {})["type"] == "/problems/deadline"
        after = put(database, "add", {"a": 1, "b": 1})
        assert ended(database, after).state == "succeeded"


def test_a_cancelled_job_leaves_its_place_to_others(database: Database) -> None:
    long = put(database, "sleep", {"seconds": 50})
    with running(database, slots=1):
        until(lambda: view(database, long.id).state == "running")
        cancel(database, long.id)
        after = put(database, "add", {"a": 1, "b": 1})
        assert ended(database, after).state == "succeeded"


def test_work_continues_when_the_database_was_away(
    database: Database, monkeypatch: pytest.MonkeyPatch
) -> None:
    job = sweep(database, "spin", {"seconds": 0.01}, [float(i) for i in range(100)], ["/y"])
    with running(database):
        until(lambda: view(database, job.id).done > 0)
        good = database._engine
        monkeypatch.setattr(database, "_engine", Database("postgresql://x@127.0.0.1:1/x")._engine)
        time.sleep(1.5)
        monkeypatch.setattr(database, "_engine", good)
        assert ended(database, job).state == "succeeded"
    assert table(database, job)["point"] == list(range(100))


def test_an_engine_that_stops_gives_its_shards_back(database: Database) -> None:
    job = put(database, "sleep", {"seconds": 30})
    with running(database, slots=1):
        until(lambda: view(database, job.id).state == "running")
    ticket = claims.claim(database, "next", 30)
    assert ticket is not None
    assert (ticket.job_id, ticket.attempt) == (job.id, 2)


def test_no_compute_process_outlives_its_engine(database: Database) -> None:
    before = set(psutil.Process().children())
    with running(database, slots=2):
        until(lambda: len(psutil.Process().children()) == len(before) + 2)
    assert set(psutil.Process().children()) <= before


def test_a_dead_process_of_this_machine_is_known_to_be_gone() -> None:
    name = own_name()
    other = name.rpartition(":")[0] + ":1"
    assert gone([name, other, "elsewhere/1/2:3:4"]) == [other]
