"""Shards on a Dask cluster: ``--engine tcp://scheduler:8786``.

Each Dask worker keeps compute processes of its own, one for each of its threads, and runs a shard
in one of them: a crash, a time limit or a memory limit ends that process and never the Dask worker.
A shard that was given up ends at its own end; shards are short. Results of the cluster count only
once they are on record, so a lost worker or scheduler costs nothing but the shards in flight.
"""

from __future__ import annotations

import logging
import queue
import time
from collections import defaultdict
from collections.abc import Callable
from concurrent.futures import CancelledError
from typing import Any

from distributed import Client, Future

from ladderband.jobs.claims import Ticket
from ladderband.jobs.executors import Outcome
from ladderband.jobs.executors.local import Child, ChildOptions

log = logging.getLogger("ladderband.engine")

CONNECT_S = 5.0
RECONNECT_S = 1.0

AHEAD = 1
"""Shards sent beyond the cluster's threads, so that no thread waits for the next one."""

_idle: defaultdict[ChildOptions, queue.SimpleQueue[Child]] = defaultdict(queue.SimpleQueue)
"""Compute processes of this Dask worker that wait for work."""


def run_in_worker(task: bytes, options: ChildOptions) -> Outcome:
    """Runs on the cluster: hand the task to an idle compute process and wait for it."""
    try:
        child = _idle[options].get_nowait()
    except queue.Empty:
        child = Child(options)
    while not child.ready:
        outcome = child.receive()
        if outcome is not None:  # died before it was ready
            return Outcome("lost", reason=" (a compute process did not start)")
    child.send(task)
    outcome = child.receive()
    _idle[options].put(child)
    assert outcome is not None
    return outcome


class DaskExecutor:
    """Shards as tasks of a Dask cluster; connects again when the scheduler was away."""

    name = "dask"

    def __init__(self, address: str, options: ChildOptions) -> None:
        self._address = address
        self._options = options
        self._client: Client | None = None
        self._next_connect = 0.0
        self._threads = 0
        self._counted = 0.0
        self._futures: dict[tuple[int, int], tuple[Ticket, Future]] = {}
        self._ended: queue.SimpleQueue[tuple[int, int]] = queue.SimpleQueue()

    @property
    def slots(self) -> int:
        return self._threads

    @property
    def free(self) -> int:
        client = self._connected()
        if client is None:
            return 0
        if time.monotonic() - self._counted > 1.0:
            self._counted = time.monotonic()
            workers = client.scheduler_info(n_workers=-1)["workers"].values()
            self._threads = sum(worker["nthreads"] for worker in workers)
        wanted = self._threads + AHEAD if self._threads else 0
        return max(0, wanted - len(self._futures))

    def _connected(self) -> Client | None:
        """The client; None while the scheduler does not answer."""
        if self._client is not None and self._client.status == "running":
            return self._client
        if time.monotonic() < self._next_connect:
            return None
        self._next_connect = time.monotonic() + RECONNECT_S
        self._forget_client()
        try:
            self._client = Client(self._address, timeout=CONNECT_S, set_as_default=False)
        except (OSError, TimeoutError) as error:
            log.warning("The Dask scheduler at %s does not answer: %s", self._address, error)
        return self._client

    def _forget_client(self) -> None:
        """Shards in flight at a lost scheduler are lost."""
        if self._client is None:
            return
        self._client.close(timeout=1)
        self._client = None
        self._threads = 0
        for fence in self._futures:
            self._ended.put(fence)

    def start(self, ticket: Ticket, task: bytes) -> None:
        assert self._client is not None
        future = self._client.submit(
            run_in_worker,
            task,
            self._options,
            key=f"shard-{ticket.shard_id}-{ticket.attempt}",
            pure=False,
            retries=0,
        )
        self._futures[ticket.fence] = (ticket, future)
        future.add_done_callback(self._noting(ticket.fence))

    def _noting(self, fence: tuple[int, int]) -> Callable[[Future], None]:
        return lambda _: self._ended.put(fence)

    def wait(self, timeout_s: float) -> list[tuple[Ticket, Outcome]]:
        ended = []
        self._connected()
        try:
            fence = self._ended.get(timeout=timeout_s)
            while True:
                if fence in self._futures:
                    ticket, future = self._futures.pop(fence)
                    ended.append((ticket, _outcome(future)))
                fence = self._ended.get_nowait()
        except queue.Empty:
            return ended

    def stop(self, ticket: Ticket) -> None:
        held = self._futures.pop(ticket.fence, None)
        if held is not None:
            held[1].cancel()

    def close(self) -> None:
        if self._client is not None:
            self._client.close(timeout=2)


def _outcome(future: Future) -> Outcome:
    """What the cluster says became of a shard; a lost worker is not the shard's crash."""
    if future.status != "finished":
        return Outcome("lost", reason=f" by the cluster ({future.status})")
    try:
        found: Any = future.result(timeout=CONNECT_S)
    except (CancelledError, OSError, TimeoutError) as error:
        return Outcome("lost", reason=f" by the cluster ({error})")
    assert isinstance(found, Outcome)
    return found
