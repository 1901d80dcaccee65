"""The engine: claims shards, has them computed, records what comes back.

One logic for all executors.
Everything an engine knows can be lost at any moment: it holds tickets and outcomes, and the records
decide what they are worth. When the database is away the engine keeps computing what it has, keeps
outcomes until they are recorded, and tries again.
"""

from __future__ import annotations

import logging
import os
import platform
import tempfile
import time
from collections import OrderedDict, deque
from collections.abc import Iterable, Iterator, Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path
from struct import Struct

import orjson

from ladderband.jobs import claims
from ladderband.jobs.claims import Ticket
from ladderband.jobs.database import Database, StorageUnavailable
from ladderband.jobs.executors import Executor, Outcome
from ladderband.jobs.kinds import SWEEPS
from ladderband.jobs.submissions import expire, request_of
from ladderband.jobs.sweeps import Plan, parse_plan
from ladderband.jobs.tables import merged
from ladderband.jobs.work import single_task, sweep_task

log = logging.getLogger("ladderband.engine")

POLL_S = 0.03
"""How long new work may wait for an idle engine; an empty look costs 0.2 ms."""

BUSY_S = 0.25
"""The same while there is no free place; a shard that ends is noticed at once."""

UPKEEP_S = 0.5
"""Between two looks for cancelled work; leases are renewed in the same step."""

RETRY_S = 1.0
"""Between two attempts to reach a database that is away."""

PLANS_KEPT = 4
"""Sweeps whose points are kept at hand; each may hold a list of 10^6 values."""

PART_BYTES = 4 * 2**20
"""Largest piece of an output in one row of the database."""


@dataclass(frozen=True)
class EngineOptions:
    """Settings of an engine. Times in seconds."""

    lease_s: float = 30.0
    limit_s: float = 600.0  # for one point
    keep_s: float = 7 * 86_400.0  # for results
    lanes: Sequence[int] = (0, 1)


def own_name() -> str:
    """This process on this machine since this boot: never the name of another."""
    return f"{machine_name()}:{os.getpid()}:{_started(os.getpid())}"


def machine_name() -> str:
    """Host, boot and process namespace: process numbers are compared only inside of it."""
    boot = Path("/proc/sys/kernel/random/boot_id")
    space = Path("/proc/self/ns/pid")
    if not boot.exists():
        return platform.node()[:40]
    inode = space.readlink().name.strip("pid:[]")
    return f"{platform.node()[:40]}/{boot.read_text().strip()[:8]}/{inode}"


def _started(pid: int) -> str:
    """When a process began, in clock ticks since boot; "" when there is none."""
    try:
        stat = Path(f"/proc/{pid}/stat").read_text()
    except OSError:
        return ""
    return stat.rpartition(")")[2].split()[19]


def gone(owners: Sequence[str]) -> list[str]:
    """Those of the owners that were processes of this machine and no longer run."""
    here = machine_name() + ":"
    ours = [owner for owner in owners if owner.startswith(here)]
    return [o for o in ours if _started(int(o.split(":")[-2])) != o.split(":")[-1]]


class Spool:
    """Parts of a merged table in a temporary file, until they are recorded in one transaction."""

    _LENGTH = Struct("<Q")

    def __init__(self, parts: Iterable[bytes]) -> None:
        self._file = tempfile.TemporaryFile()  # noqa: SIM115, closed once recorded
        for part in parts:
            self._file.write(self._LENGTH.pack(len(part)))
            self._file.write(part)

    def parts(self) -> Iterator[bytes]:
        """The parts from the first, as often as wanted."""
        self._file.seek(0)
        while length := self._file.read(self._LENGTH.size):
            yield self._file.read(self._LENGTH.unpack(length)[0])

    def close(self) -> None:
        self._file.close()


def pieces(data: bytes) -> Iterator[bytes]:
    """An output in pieces that one row of the database may hold; at least one."""
    for start in range(0, max(len(data), 1), PART_BYTES):
        yield data[start : start + PART_BYTES]


def _merge_ending(future: Future[Spool]) -> Outcome | Spool:
    error = future.exception()
    if error is None:
        return future.result()
    if isinstance(error, StorageUnavailable):
        return Outcome("lost", reason=" (the database was away)")
    return Outcome("crashed", reason=f" ({error})")


@dataclass
class Engine:
    """Works shards off until it is told to stop."""

    database: Database
    executor: Executor
    options: EngineOptions = field(default_factory=EngineOptions)

    def __post_init__(self) -> None:
        self.name = own_name()
        self._held: dict[tuple[int, int], Ticket] = {}
        self._unrecorded: deque[tuple[Ticket, Outcome | Spool]] = deque()
        self._plans: OrderedDict[str, Plan] = OrderedDict()
        self._merges: dict[Ticket, Future[Spool]] = {}
        self._merger = ThreadPoolExecutor(1, "merge")
        self._next_upkeep = 0.0
        self._next_reap = 0.0
        self._stopping = False

    def stop(self) -> None:
        """Ask ``run`` to return; safe in a signal handler."""
        self._stopping = True

    def run(self) -> None:
        """Work until stopped; unfinished shards are given back for others to begin at once."""
        try:
            while not self._stopping:
                self._turn()
        finally:
            self.executor.close()
            self._merger.shutdown(wait=True, cancel_futures=True)
            self._give_all_back()

    def _turn(self) -> None:
        try:
            self._upkeep()
            self._record()
            self._fill()
        except StorageUnavailable as error:
            log.warning("%s Trying again in %g s.", error, RETRY_S)
            self._collect(RETRY_S)
            return
        self._collect(POLL_S if self.executor.free else BUSY_S)

    def _collect(self, timeout_s: float) -> None:
        """Take in what has ended."""
        self._unrecorded.extend(self.executor.wait(timeout_s))
        for ticket in [ticket for ticket, future in self._merges.items() if future.done()]:
            self._unrecorded.append((ticket, _merge_ending(self._merges.pop(ticket))))

    def _record(self) -> None:
        """Write outcomes down, oldest first; one that could not be written stays."""
        while self._unrecorded:
            ticket, outcome = self._unrecorded[0]
            self._settle(ticket, outcome)
            self._unrecorded.popleft()
            self._held.pop(ticket.fence, None)

    def _settle(self, ticket: Ticket, outcome: Outcome | Spool) -> None:
        if isinstance(outcome, Spool):
            claims.finish(self.database, ticket, outcome.parts(), 0.0)
            outcome.close()
        elif outcome.ending == "done":
            claims.finish(self.database, ticket, pieces(outcome.data), outcome.seconds)
        elif outcome.ending == "refused":
            claims.fail(self.database, ticket, orjson.loads(outcome.data))
        else:
            crashed = outcome.ending == "crashed"
            log.warning("job %s: a shard was %s%s", ticket.job_id, outcome.ending, outcome.reason)
            claims.give_back(self.database, ticket, crashed=crashed, reason=outcome.reason)

    def _fill(self) -> None:
        """Claim as many shards as can be started."""
        while self.executor.free and not self._stopping:
            ticket = claims.claim(
                self.database, self.name, self.options.lease_s, self.options.lanes
            )
            if ticket is None:
                return
            self._held[ticket.fence] = ticket
            self._start(ticket)

    def _start(self, ticket: Ticket) -> None:
        try:
            if ticket.role == "merge":
                self._merges[ticket] = self._merger.submit(self._merge, ticket)
                return
            task = self._task(ticket)
        except StorageUnavailable:
            self._unrecorded.append((ticket, Outcome("lost", reason=" (the database was away)")))
            raise
        if task is None:  # the job has ended meanwhile
            self._held.pop(ticket.fence)
        else:
            self.executor.start(ticket, task)

    def _task(self, ticket: Ticket) -> bytes | None:
        if ticket.kind == SWEEPS:
            plan = self._plan(ticket.job_id)
            return None if plan is None else sweep_task(ticket, plan, self.options.limit_s)
        request = request_of(self.database, ticket.job_id)
        return None if request is None else single_task(ticket, request, self.options.limit_s)

    def _plan(self, job_id: str) -> Plan | None:
        """The sweep's plan; the ones used last are kept."""
        if job_id not in self._plans:
            request = request_of(self.database, job_id)
            if request is None:
                return None
            self._plans[job_id] = parse_plan(orjson.loads(request))
        self._plans.move_to_end(job_id)
        while len(self._plans) > PLANS_KEPT:
            self._plans.popitem(last=False)
        return self._plans[job_id]

    def _merge(self, ticket: Ticket) -> Spool:
        return Spool(merged(claims.parts_of(self.database, ticket.job_id)))

    def _upkeep(self) -> None:
        """Renew leases and drop what was taken away; from time to time look after lost shards."""
        if time.monotonic() < self._next_upkeep:
            return
        self._next_upkeep = time.monotonic() + UPKEEP_S
        valid = claims.renew(self.database, list(self._held.values()), self.options.lease_s)
        for fence in set(self._held) - valid:
            self._drop(self._held.pop(fence))
        if time.monotonic() >= self._next_reap:
            self._next_reap = time.monotonic() + self.options.lease_s / 6
            self._look_after_others()

    def _drop(self, ticket: Ticket) -> None:
        self.executor.stop(ticket)
        self._merges.pop(ticket, None)
        self._unrecorded = deque(item for item in self._unrecorded if item[0] != ticket)

    def _look_after_others(self) -> None:
        claims.beat(self.database, self.name, self.executor.name, self.executor.slots)
        claims.reap(self.database, gone(claims.owners(self.database)))
        expire(self.database, self.options.keep_s)

    def _give_all_back(self) -> None:
        try:
            self._record()
            for ticket in self._held.values():
                claims.give_back(self.database, ticket, crashed=False)
            claims.leave(self.database, self.name)
        except StorageUnavailable as error:
            log.warning("%s The leases of this engine will end by themselves.", error)
