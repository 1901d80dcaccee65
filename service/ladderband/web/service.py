"""``ladderband serve``: the supervisor of the web processes and the engines."""

from __future__ import annotations

import os
import socket
import sys
import time

from ladderband.jobs.database import Database
from ladderband.jobs.node import NodeOptions
from ladderband.jobs.supervisor import Supervisor, Ward
from ladderband.settings import Settings
from ladderband.web.server import LISTENER

KINDS_VARIABLE = "LADDERBAND_KINDS"
"""Environment variable that names other kinds of work (``module:function``); for tests."""

REFERENCE = "ladderband.web.kinds:kinds"

BIND_S = 10.0
"""How long an address may still be held by the web processes of a supervisor that was killed."""

ENGINE_GRACE_S = 5.0


def run(settings: Settings) -> None:
    """Serve until SIGTERM or SIGINT.

    Raises
    ------
    OSError
        The address cannot be listened on.
    StorageUnavailable
        The job records cannot be reached.
    """
    database = Database(settings.records_url)
    database.migrate()
    database.close()
    listener = listening(settings)
    Supervisor(wards(settings, listener.fileno()), settings.grace_s + ENGINE_GRACE_S).run()


def listening(settings: Settings) -> socket.socket:
    """The socket all web processes take requests from; requests queue while they are restarted."""
    family = socket.AF_INET6 if ":" in settings.host else socket.AF_INET
    found = socket.socket(family)
    found.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    end = time.monotonic() + BIND_S
    while True:
        try:
            found.bind((settings.host, settings.port))
            found.listen(2048)
            return found
        except OSError:
            if time.monotonic() > end:
                raise
            time.sleep(0.2)


def wards(settings: Settings, listener: int) -> list[Ward]:
    """The processes of one service: web, an engine for all work, one for interactive work only."""
    environment = settings.environment()
    web = {**environment, LISTENER: str(listener)}
    engine = [sys.executable, "-m", "ladderband", "engine"]
    return [
        Ward("web", [sys.executable, "-m", "ladderband.web.server"], web, (listener,)),
        Ward("engine", engine, environment),
        Ward("interactive engine", [*engine, "--interactive"], environment),
    ]


def node_options(settings: Settings, *, interactive: bool) -> NodeOptions:
    """An engine's options; interactive work is always done on this machine, one piece at a time."""
    return NodeOptions(
        database_url=settings.records_url,
        kinds=os.environ.get(KINDS_VARIABLE, REFERENCE),
        processes=1 if interactive else settings.engine_processes or os.cpu_count() or 1,
        scheduler="local" if interactive else settings.engine,
        interactive_only=interactive,
        memory_bytes=settings.job_memory_bytes,
        limit_s=settings.job_work_s,
        keep_s=86_400.0 * settings.keep_results_days,
    )
