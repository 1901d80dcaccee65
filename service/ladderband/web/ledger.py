"""Log lines and counters of the requests answered, written in batches beside the requests.

A write and the counters' updates cost a small request a quarter of its time, most of it waiting for
the interpreter lock after the write. So a request only appends a tuple; a thread of the worker writes
what has come together five times a second, one ``write`` of whole lines. A worker that is killed loses
at most that fifth of a second; one that stops writes everything.
"""

from __future__ import annotations

import atexit
import os
import threading
from collections import deque
from typing import NamedTuple

import orjson
from prometheus_client import Counter, Histogram

PERIOD_S = 0.2

_requests = Counter(
    "ladderband_requests_total", "Requests answered.", ["method", "route", "status"]
)
_seconds = Histogram(
    "ladderband_request_seconds",
    "Time from the request's head to the answer's head.",
    ["route"],
    buckets=(0.001, 0.003, 0.01, 0.03, 0.1, 0.3, 1.0, 3.0, 10.0),
)


class Entry(NamedTuple):
    """One request answered."""

    time: float
    request_id: str
    method: str
    route: str
    status: int
    elapsed_s: float
    problem: str | None
    digest: str | None


class Ledger:
    """Collects entries and writes them; one a process."""

    def __init__(self, log_requests: bool) -> None:
        self._log = log_requests
        self._waiting: deque[Entry] = deque()
        self._writing = threading.Lock()
        self._thread: threading.Thread | None = None
        atexit.register(self.flush)

    def add(self, entry: Entry) -> None:
        """Take one entry; the first one starts the thread."""
        self._waiting.append(entry)  # atomic
        if self._thread is None:
            self._start()

    def flush(self) -> None:
        """Write all entries taken so far."""
        with self._writing:
            entries = [self._waiting.popleft() for _ in range(len(self._waiting))]
            self._count(entries)
            if entries and self._log:
                os.write(2, b"".join(map(_line, entries)))

    def _start(self) -> None:
        with self._writing:
            if self._thread is None:
                self._thread = threading.Thread(target=self._run, name="ledger", daemon=True)
                self._thread.start()

    def _run(self) -> None:
        pause = threading.Event()
        while not pause.wait(PERIOD_S):
            self.flush()

    def _count(self, entries: list[Entry]) -> None:
        """One update of each counter for all entries; a histogram takes its times one by one."""
        groups: dict[tuple[str, str, int], list[float]] = {}
        for entry in entries:
            key = (entry.method, entry.route, entry.status)
            groups.setdefault(key, []).append(entry.elapsed_s)
        for (method, route, status), times in groups.items():
            _requests.labels(method, route, str(status)).inc(len(times))
            histogram = _seconds.labels(route)
            for elapsed_s in times:
                histogram.observe(elapsed_s)


def _line(entry: Entry) -> bytes:
    line = {
        "time": entry.time,
        "level": "info",
        "event": "request",
        "request_id": entry.request_id,
        "method": entry.method,
        "route": entry.route,
        "status": entry.status,
        "ms": round(1e3 * entry.elapsed_s, 3),
        "problem": entry.problem,
        "digest": entry.digest,
    }
    return orjson.dumps(line, option=orjson.OPT_APPEND_NEWLINE)
