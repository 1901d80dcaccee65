"""Compute processes of this machine, one shard each, killed when a shard is given up."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import sys
import time
from dataclasses import dataclass
from multiprocessing.connection import Connection, wait

import orjson

from ladderband.jobs.claims import Ticket
from ladderband.jobs.executors import Outcome

RESTART_S = 1.0
"""Shortest time between two starts of a process in one place, so that a broken one cannot spin."""


@dataclass(frozen=True)
class ChildOptions:
    """How compute processes are started: what they know, their priority, their memory."""

    kinds: str
    nice: int = 19
    memory_bytes: int = 4 * 2**30


class Child:
    """One compute process and the pipe to it; starts again when it has died."""

    def __init__(self, options: ChildOptions) -> None:
        self._options = options
        self.begun = 0.0
        self.ready = False
        self.boot()

    def boot(self) -> None:
        ours, theirs = socket.socketpair()
        command = [sys.executable, "-m", "ladderband.jobs.child"]
        command += ["--pipe", str(theirs.fileno()), "--parent", str(os.getpid())]
        command += ["--kinds", self._options.kinds, "--nice", str(self._options.nice)]
        command += ["--memory-bytes", str(self._options.memory_bytes)]
        self.booted = time.monotonic()
        self.ready = False
        self.process = subprocess.Popen(command, pass_fds=[theirs.fileno()], env=_environment())
        theirs.close()
        self.pipe = Connection(ours.detach())

    def send(self, task: bytes) -> bool:
        """Begin with a task; False when the process has died meanwhile."""
        self.begun = time.monotonic()
        try:
            self.pipe.send_bytes(task)
        except OSError:
            return False
        return True

    def receive(self) -> Outcome | None:
        """The outcome that is waiting in the pipe; None for the greeting of a new process."""
        try:
            letter = self.pipe.recv_bytes()
            if not self.ready:
                self.ready = True
                return None
            body = self.pipe.recv_bytes()
        except (EOFError, OSError):
            return self._death()
        seconds = time.monotonic() - self.begun
        return Outcome("done" if letter == b"r" else "refused", body, seconds)

    def _death(self) -> Outcome:
        code = self.process.wait()
        self.restart()
        if code == -signal.SIGALRM:
            return Outcome("refused", orjson.dumps(_time_problem()))
        return Outcome("crashed", reason=_death_reason(code))

    def restart(self) -> None:
        """End this process and start another."""
        self.kill()
        time.sleep(max(0.0, min(RESTART_S, self.booted + RESTART_S - time.monotonic())))
        self.boot()

    def kill(self) -> None:
        self.process.kill()
        self.process.wait()
        self.pipe.close()


def _environment() -> dict[str, str]:
    """One thread for each compute process, as the shards are the parallelism; and memory of large
    arrays goes back to the system at once (glibc keeps it otherwise, after the first of a size)."""
    pinned = {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}
    pinned["MALLOC_MMAP_THRESHOLD_"] = "4000000"
    return {**os.environ, **pinned}


def _death_reason(code: int) -> str:
    if code >= 0:
        return f" (exit status {code})"
    return f" ({signal.Signals(-code).name})"


def _time_problem() -> dict[str, object]:
    return {
        "type": "/problems/deadline",
        "title": "Time limit reached",
        "status": 503,
        "detail": "The computation did not end within its time limit and was stopped.",
    }


class LocalExecutor:
    """Shards in compute processes of this machine."""

    name = "local"

    def __init__(self, slots: int, options: ChildOptions) -> None:
        self._children = [Child(options) for _ in range(slots)]
        self._busy: dict[Connection, tuple[Child, Ticket]] = {}

    @property
    def slots(self) -> int:
        return len(self._children)

    @property
    def free(self) -> int:
        return len(self._idle())

    def _idle(self) -> list[Child]:
        return [c for c in self._children if c.ready and c.pipe not in self._busy]

    def start(self, ticket: Ticket, task: bytes) -> None:
        """Begin with a shard; a child that died while idle is noticed by ``wait``."""
        child = self._idle()[0]
        child.send(task)
        self._busy[child.pipe] = (child, ticket)

    def wait(self, timeout_s: float) -> list[tuple[Ticket, Outcome]]:
        children = {child.pipe: child for child in self._children}
        ended = []
        for pipe in wait(list(children), timeout_s):
            assert isinstance(pipe, Connection)
            work = self._busy.get(pipe)
            outcome = children[pipe].receive()
            if work is not None and outcome is not None:
                del self._busy[pipe]
                ended.append((work[1], outcome))
        return ended

    def stop(self, ticket: Ticket) -> None:
        for pipe, (child, held) in list(self._busy.items()):
            if held.fence == ticket.fence:
                del self._busy[pipe]
                child.restart()

    def close(self) -> None:
        for child in self._children:
            child.kill()
