"""A compute process: reads tasks from a pipe, answers outcomes, can be killed at any moment.

It is started as ``python -m ladderband.jobs.child`` and dies with its parent, even when the parent
is killed. Its memory is limited by the system; running out of it is a problem document, no crash.
"""

from __future__ import annotations

import argparse
import contextlib
import gc
import os
import resource
import signal
from multiprocessing.connection import Connection

import orjson

from ladderband.jobs.kinds import load_kinds
from ladderband.jobs.parents import die_with_parent
from ladderband.jobs.work import perform


def _arguments() -> argparse.Namespace:
    parser = argparse.ArgumentParser()
    parser.add_argument("--pipe", type=int, required=True)
    parser.add_argument("--parent", type=int, required=True)
    parser.add_argument("--kinds", required=True)
    parser.add_argument("--nice", type=int, required=True)
    parser.add_argument("--memory-bytes", type=int, required=True)
    return parser.parse_args()


def serve(pipe: Connection, kinds_reference: str) -> None:
    """Answer tasks until the pipe closes, or until memory ran out once."""
    kinds = load_kinds(kinds_reference)
    pipe.send_bytes(b"ready")
    while True:
        try:
            for part in perform(pipe.recv_bytes(), kinds):
                pipe.send_bytes(memoryview(part))  # of bytes, each piece sent would copy the rest
        except EOFError:
            return
        except MemoryError:
            gc.collect()
            pipe.send_bytes(b"p")
            pipe.send_bytes(orjson.dumps(_memory_problem()))
            return  # a fresh process starts with whole memory


def _memory_problem() -> dict[str, object]:
    limit = resource.getrlimit(resource.RLIMIT_DATA)[0]
    return {
        "type": "/problems/memory-limit",
        "title": "Out of memory",
        "status": 422,
        "detail": (
            f"The computation needed more than its limit of {limit / 2**20:.0f} MiB of memory. "
            "Ask for fewer quanta, modes or points."
        ),
        "limit_bytes": limit,
    }


def main() -> None:
    options = _arguments()
    die_with_parent(options.parent)
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the engine decides when to end
    os.nice(options.nice)
    resource.setrlimit(resource.RLIMIT_DATA, (options.memory_bytes, options.memory_bytes))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    with contextlib.suppress(BrokenPipeError):
        serve(Connection(options.pipe), options.kinds)


if __name__ == "__main__":
    main()
