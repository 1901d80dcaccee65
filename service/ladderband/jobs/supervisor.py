"""One process that keeps the others: starts them, restarts what dies, ends all of them together.

Every process it starts is in a process group of its own, so that what is left of it can be ended as
a whole, and asks the system to be killed when the supervisor ends (Linux). Process groups and not
sessions: the kernel may give each session an equal share of the processor, and then a low priority
inside of one would be worth nothing.
"""

from __future__ import annotations

import logging
import os
import signal
import subprocess
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import partial

from ladderband.jobs.parents import die_with_parent

log = logging.getLogger("ladderband.supervisor")

POLL_S = 0.1
STEADY_S = 3.0
"""A process that lived this long is restarted at once; a younger one after a growing pause."""

LONGEST_PAUSE_S = 5.0


@dataclass
class Ward:
    """One process under supervision: what to run, and what became of it so far."""

    name: str
    command: Sequence[str]
    environment: Mapping[str, str] = field(default_factory=dict)
    keep_fds: Sequence[int] = ()
    process: subprocess.Popen[bytes] | None = None
    started: float = 0.0
    next_start: float = 0.0
    pause_s: float = 0.0

    def start(self) -> None:
        self.started = time.monotonic()
        self.process = subprocess.Popen(
            self.command,
            env={**os.environ, **self.environment},
            pass_fds=self.keep_fds,
            process_group=0,
            # safe here: the supervisor has one thread
            preexec_fn=partial(die_with_parent, os.getpid()),
        )

    def look(self) -> None:
        """Start the process when it is not running and its pause is over."""
        if self.process is not None and self.process.poll() is not None:
            self._died(self.process.returncode)
        if self.process is None and time.monotonic() >= self.next_start:
            self.start()

    def _died(self, code: int) -> None:
        self.signal_group(signal.SIGKILL)
        self.process = None
        lived = time.monotonic() - self.started
        if lived >= STEADY_S:
            self.pause_s = 0.0
        self.next_start = time.monotonic() + self.pause_s
        log.warning(
            "%s ended (status %s); starting it again in %g s", self.name, code, self.pause_s
        )
        self.pause_s = min(max(2 * self.pause_s, 0.5), LONGEST_PAUSE_S)

    def signal_group(self, number: int) -> None:
        """Send a signal to the process and all it started in its group."""
        if self.process is None:
            return
        try:
            os.killpg(self.process.pid, number)
        except (ProcessLookupError, PermissionError):
            return


class Supervisor:
    """Keeps its wards running until it gets SIGTERM or SIGINT."""

    def __init__(self, wards: Sequence[Ward], grace_s: float) -> None:
        self.wards = wards
        self._grace_s = grace_s
        self._stopping = False

    def run(self, meanwhile: Callable[[], None] = lambda: None) -> None:
        """Start all and look after them; ``meanwhile`` is called between two looks."""
        for number in (signal.SIGTERM, signal.SIGINT):
            signal.signal(number, self._stop)
        try:
            while not self._stopping:
                for ward in self.wards:
                    ward.look()
                meanwhile()
                time.sleep(POLL_S)
        finally:
            self._end_all()

    def _stop(self, number: int, frame: object) -> None:
        self._stopping = True

    def _end_all(self) -> None:
        """SIGTERM to each main process, which knows how to end its own; then whatever is left."""
        running = [ward.process for ward in self.wards if ward.process is not None]
        for process in running:
            process.terminate()
        end = time.monotonic() + self._grace_s
        while any(process.poll() is None for process in running) and time.monotonic() < end:
            time.sleep(POLL_S)
        for ward in self.wards:
            ward.signal_group(signal.SIGKILL)
        for process in running:
            process.wait()
