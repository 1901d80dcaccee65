"""The web processes: gunicorn, as the supervisor starts it."""

from __future__ import annotations

import gc
import os
import shutil
import sys
from typing import Any

from flask import Flask
from gunicorn.app.base import BaseApplication
from prometheus_client.multiprocess import mark_process_dead

from ladderband.jobs.parents import die_with_parent
from ladderband.settings import Settings, load_settings

LISTENER = "LADDERBAND_LISTENER"
"""Environment variable with the number of the listening socket, which outlives gunicorn."""

WORKER_TIMEOUT_S = 60
"""A worker that gives no sign of life for this long is replaced; not a limit of one request."""


class Server(BaseApplication):  # type: ignore[misc]
    """gunicorn with our settings; each worker makes its own application after the fork."""

    def __init__(self, settings: Settings) -> None:
        self.settings = settings
        super().__init__()

    def load_config(self) -> None:
        options = {
            "bind": f"fd://{os.environ[LISTENER]}",
            "workers": self.settings.workers,
            "threads": self.settings.threads,
            "worker_class": "ladderband.web.worker.Worker",
            "keepalive": self.settings.keep_alive_s,
            "graceful_timeout": self.settings.grace_s,
            "timeout": WORKER_TIMEOUT_S,
            "limit_request_line": 8190,
            "control_socket_disable": True,
            "proc_name": "ladderband",
            "loglevel": "warning",
            "worker_tmp_dir": "/dev/shm" if os.access("/dev/shm", os.W_OK) else None,
            "post_fork": lambda server, worker: die_with_parent(server.pid),
            "post_worker_init": self._ready,
            "worker_exit": _leave,
            "child_exit": lambda server, worker: _forget(worker.pid),
            "on_exit": _remove_counters,
        }
        for name, value in options.items():
            self.cfg.set(name, value)

    def load(self) -> Flask:
        """Import, build and warm up: runs in the worker, before it takes its first request."""
        from ladderband.formats import plots
        from ladderband.numerics.warm import warm
        from ladderband.web.app import create_app
        from ladderband.web.desk import Desk

        app = create_app(self.settings, Desk.of(self.settings))
        warm()
        plots.warm()
        gc.collect()
        gc.freeze()  # a full collection over all that the start made takes 0.2 s in mid-request
        return app

    def _ready(self, worker: Any) -> None:
        # Warm, and about to take requests; those already waiting in the socket are answered. The
        # first worker ever started announces, later ones (after a crash) keep quiet.
        if worker.age == 1:
            host, port = worker.sockets[0].getsockname()[:2]
            print(f"Ladderband answers at http://{bracketed(host)}:{port}", flush=True)


def _leave(server: Any, worker: Any) -> None:
    """End a worker without taking its modules apart, which takes longer than the rest of a stop.

    A worker that never came up keeps its exit status: the arbiter stops the service by it.
    """
    if worker.booted and worker.pid == os.getpid():  # the arbiter may call this for a lost worker
        worker.wsgi.config["LEDGER"].flush()
        os._exit(0)


def _forget(pid: int) -> None:
    mark_process_dead(pid)  # type: ignore[no-untyped-call]


def bracketed(host: str) -> str:
    """A host as it stands in an address."""
    return f"[{host}]" if ":" in host else host


def _remove_counters(server: Any) -> None:
    shutil.rmtree(os.environ["PROMETHEUS_MULTIPROC_DIR"], ignore_errors=True)


def run() -> None:
    """Serve with the settings and the listening socket of the environment; does not return."""
    sys.argv = sys.argv[:1]  # gunicorn must not read our options
    os.makedirs(os.environ["PROMETHEUS_MULTIPROC_DIR"], exist_ok=True)
    Server(load_settings()).run()


if __name__ == "__main__":
    run()
