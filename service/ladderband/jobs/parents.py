"""Processes that end with the one that started them, even when that one is killed."""

from __future__ import annotations

import ctypes
import os
import signal
import sys

_PR_SET_PDEATHSIG = 1
# loaded here, because the function may run between fork and exec
_LIBC = ctypes.CDLL(None) if sys.platform == "linux" else None


def die_with_parent(parent: int) -> None:
    """Ask the system to kill this process when process ``parent``, which started it, ends.

    Linux only; elsewhere a compute process ends as soon as it looks at its pipe, and a web process
    as soon as gunicorn's worker notices.
    """
    if _LIBC is None:
        return
    _LIBC.prctl(_PR_SET_PDEATHSIG, signal.SIGKILL)
    if os.getppid() != parent:  # it ended before the call
        os._exit(1)
