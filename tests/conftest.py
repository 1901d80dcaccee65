"""Shared fixtures: the application in this process, and the whole service on a free port."""

from __future__ import annotations

import os
import platform
from collections.abc import Iterator
from importlib.metadata import version

import pytest

from live_service import KERNELS, LiveServer, serving

# before anything imports numpy or numba; kernels compiled by one test run serve the next
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
os.environ.setdefault("NUMBA_CACHE_DIR", str(KERNELS / "kernels"))


def pytest_report_header() -> str:
    """The numeric backend: what a figure that moved should be compared with."""
    names = ("numpy", "scipy", "numba", "python-flint", "mpmath", "gmpy2")
    versions = ", ".join(f"{name} {version(name)}" for name in names)
    return f"numerics: Python {platform.python_version()}, {versions}"


@pytest.fixture(autouse=True)
def no_precision_leak() -> Iterator[None]:
    """Process-global precision stays as it is: nothing in the service may leave it changed."""
    import flint
    import mpmath

    before = flint.ctx.prec, flint.ctx.cap, mpmath.mp.prec
    yield
    assert (flint.ctx.prec, flint.ctx.cap, mpmath.mp.prec) == before


@pytest.fixture(scope="session")
def live_server() -> Iterator[LiveServer]:
    """The service on a free port, for the whole test session."""
    with serving() as server:
        yield server


@pytest.fixture(scope="session")
def app():
    """The application in this process."""
    from ladderband.numerics.warm import warm
    from ladderband.settings import Settings
    from ladderband.web.app import create_app

    warm()  # as every worker does: a first compilation takes longer than a request may
    return create_app(Settings(log_requests=False))


@pytest.fixture
def client(app):
    """A client of the application in this process."""
    return app.test_client()
