"""Where shards are computed: one interface, one module an implementation."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, Protocol

from ladderband.jobs.claims import Ticket


@dataclass(frozen=True, slots=True)
class Outcome:
    """How a shard ended.

    ``done``: ``data`` is its output. ``refused``: ``data`` is a problem document; trying again
    would not help. ``crashed``: its compute process died (``reason`` says of what). ``lost``: it is
    not known what became of it.
    """

    ending: Literal["done", "refused", "crashed", "lost"]
    data: bytes = b""
    seconds: float = 0.0
    reason: str = ""


class Executor(Protocol):
    """Computes shards; used by one thread."""

    @property
    def name(self) -> str:
        """``local`` or ``dask``."""

    @property
    def slots(self) -> int:
        """Shards it works on at once."""

    @property
    def free(self) -> int:
        """Shards it can start now."""

    def start(self, ticket: Ticket, task: bytes) -> None:
        """Begin with a shard."""

    def wait(self, timeout_s: float) -> list[tuple[Ticket, Outcome]]:
        """The shards that ended; waits up to ``timeout_s`` for the first."""

    def stop(self, ticket: Ticket) -> None:
        """Give a shard up, as soon as the executor can; no outcome of it is reported."""

    def close(self) -> None:
        """End all work."""
