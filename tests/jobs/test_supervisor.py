"""The supervisor with small processes: restarts, orderly ends, and its own sudden death."""

from __future__ import annotations

import signal
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import psutil
import pytest

from jobs.engine_helpers import until

SCRIPT = """
import sys
from ladderband.jobs.supervisor import Supervisor, Ward
parent = "import subprocess, sys, time; subprocess.Popen([sys.executable, '-c', 'import time; time.sleep(99)']); time.sleep(99)"
stubborn = "import signal, time; signal.signal(signal.SIGTERM, signal.SIG_IGN); time.sleep(99)"
wards = [Ward(name, [sys.executable, "-c", code]) for name, code in {"parent": parent, "stubborn": stubborn}.items()]
Supervisor(wards, grace_s=0.5).run()
"""  # noqa: E501


@pytest.fixture
def supervisor(tmp_path: Path) -> Iterator[psutil.Process]:
    started = subprocess.Popen([sys.executable, "-c", SCRIPT], stderr=subprocess.DEVNULL)
    process = psutil.Process(started.pid)
    until(lambda: len(process.children(recursive=True)) == 3)
    yield process
    started.kill()
    started.wait()


def living(processes: list[psutil.Process]) -> list[psutil.Process]:
    return [p for p in processes if p.is_running() and p.status() != psutil.STATUS_ZOMBIE]


def test_a_process_that_dies_is_started_again(supervisor: psutil.Process) -> None:
    for _ in range(2):
        before = supervisor.children()
        before[0].kill()
        until(lambda old=before[0]: not living([old]))
        until(lambda: len(supervisor.children(recursive=True)) == 3)


def test_an_end_in_order_leaves_no_process(supervisor: psutil.Process) -> None:
    everything = supervisor.children(recursive=True)
    supervisor.send_signal(signal.SIGTERM)
    until(lambda: not living([supervisor, *everything]))


def test_the_main_processes_end_with_a_supervisor_that_was_killed(
    supervisor: psutil.Process,
) -> None:
    main = supervisor.children()
    others = [p for p in supervisor.children(recursive=True) if p not in main]
    supervisor.kill()
    until(lambda: not living(main))
    for process in others:  # these know nothing of the rule; the children of engines do
        process.kill()
