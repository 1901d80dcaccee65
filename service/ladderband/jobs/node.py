"""Starting an engine in this process: what the command ``ladderband engine`` does."""

from __future__ import annotations

import os
import signal
from collections.abc import Sequence
from dataclasses import dataclass

from ladderband.jobs.database import Database
from ladderband.jobs.dispatcher import Engine, EngineOptions
from ladderband.jobs.executors import Executor
from ladderband.jobs.executors.local import ChildOptions, LocalExecutor
from ladderband.jobs.records import BATCH, INTERACTIVE

ENGINE_NICE = 10
"""Below the web processes, above the compute processes of batch work (19)."""


@dataclass(frozen=True)
class NodeOptions:
    """An engine of one machine: where the records are, where shards run, what it works on."""

    database_url: str
    kinds: str
    processes: int
    scheduler: str = "local"  # or the address of a Dask scheduler
    interactive_only: bool = False
    memory_bytes: int = 4 * 2**30
    limit_s: float = 600.0
    keep_s: float = 7 * 86_400.0
    lease_s: float = 30.0


def run_engine(options: NodeOptions) -> None:
    """Work until SIGTERM or SIGINT."""
    if os.nice(0) < ENGINE_NICE:
        os.nice(ENGINE_NICE - os.nice(0))
    database = Database(options.database_url)
    lanes: Sequence[int] = (INTERACTIVE,) if options.interactive_only else (INTERACTIVE, BATCH)
    engine = Engine(
        database,
        _executor(options),
        EngineOptions(options.lease_s, options.limit_s, options.keep_s, lanes),
    )
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, lambda *_: engine.stop())
    engine.run()
    database.close()


def _executor(options: NodeOptions) -> Executor:
    # interactive work keeps the engine's own priority
    child = ChildOptions(options.kinds, 0 if options.interactive_only else 9, options.memory_bytes)
    if options.scheduler == "local":
        return LocalExecutor(options.processes, child)
    try:
        from ladderband.jobs.executors.dask import DaskExecutor
    except ModuleNotFoundError as error:
        raise SystemExit(
            "The Dask engine needs the extra 'dask': pip install 'ladderband[dask]'."
        ) from error
    return DaskExecutor(options.scheduler, child)
