"""Shared fixtures: the application in this process, and the whole service on a free port."""

from __future__ import annotations

import os
from collections.abc import Iterator

import pytest

from live_service import KERNELS, LiveServer, serving

# before anything imports numpy or numba; kernels compiled by one test run serve the next
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
os.environ.setdefault("NUMBA_CACHE_DIR", str(KERNELS / "kernels"))


@pytest.fixture(scope="session")
def live_server() -> Iterator[LiveServer]:
    """The service on a free port, for the whole test session."""
    with serving() as server:
        yield server


@pytest.fixture(scope="session")
def app():
    """The application in this process."""
    from ladderband.settings import Settings
    from ladderband.web.app import create_app

    return create_app(Settings(log_requests=False))


@pytest.fixture
def client(app):
    """A client of the application in this process."""
    return app.test_client()
