"""The whole service as a child process, for tests that need real HTTP and real processes."""

from __future__ import annotations

import contextlib
import os
import re
import signal
import subprocess
import sys
import tempfile
import threading
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import IO

import psutil

KERNELS = Path(tempfile.gettempdir()) / f"ladderband-tests-{os.getuid()}"
ADDRESS = re.compile(rb"Ladderband answers at (http://\S+)")


@dataclass
class LiveServer:
    """A running ``ladderband serve``."""

    url: str
    process: subprocess.Popen[bytes]

    def family(self) -> list[psutil.Process]:
        """Every process of the service: supervisor, web, engines and their children."""
        supervisor = psutil.Process(self.process.pid)
        return [supervisor, *supervisor.children(recursive=True)]

    def web_workers(self) -> list[psutil.Process]:
        """The processes that answer requests."""
        (web,) = (
            child
            for child in psutil.Process(self.process.pid).children()
            if "ladderband.web.server" in child.cmdline()
        )
        return web.children()

    def stop(self, grace_s: float = 30.0) -> int:
        """Send SIGTERM and wait; returns the exit status."""
        self.process.send_signal(signal.SIGTERM)
        return self.process.wait(grace_s)


@contextlib.contextmanager
def serving(*options: str, data_dir: Path | None = None) -> Iterator[LiveServer]:
    """``ladderband serve`` on a free port with further options; records of its own unless given."""
    with tempfile.TemporaryDirectory(prefix="ladderband-") as own:
        yield from _serving(data_dir or Path(own), options)


def _serving(data_dir: Path, options: tuple[str, ...]) -> Iterator[LiveServer]:
    command = [sys.executable, "-m", "ladderband", "serve", "--port", "0"]
    command += ["--data-dir", str(data_dir), "--no-log-requests", *options]
    errors = tempfile.TemporaryFile()  # noqa: SIM115 - closed at the end
    environment = {"NUMBA_CACHE_DIR": str(KERNELS / "kernels"), **os.environ}
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=errors, env=environment)
    assert process.stdout is not None
    # a watchdog instead of a timed read: a cold kernel cache may take a minute
    watchdog = threading.Timer(150.0, process.kill)
    watchdog.start()
    try:
        line = process.stdout.readline()
        found = ADDRESS.search(line)
        assert found, "the service did not start: " + _tail(errors)
        watchdog.cancel()
        yield LiveServer(found[1].decode(), process)
    finally:
        watchdog.cancel()
        if process.poll() is None:
            process.terminate()
            process.wait(30)
        process.stdout.close()
        errors.close()


def _tail(errors: IO[bytes]) -> str:
    errors.seek(0)
    return errors.read()[-2000:].decode(errors="replace")
