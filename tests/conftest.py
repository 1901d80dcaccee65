"""Shared fixtures and the header that names the numeric backend."""

from __future__ import annotations

import os
import platform

# one thread a process: the tests measure correctness, and BLAS threads fight over two cores
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ.setdefault(_name, "1")

import flint
import mpmath
import numba
import numpy as np
import pytest
import scipy


def pytest_report_header() -> list[str]:
    return [
        f"numerics: Python {platform.python_version()}, numpy {np.__version__}, "
        f"scipy {scipy.__version__}, numba {numba.__version__}, python-flint {flint.__version__}, "
        f"mpmath {mpmath.__version__} ({mpmath.libmp.BACKEND})"
    ]


@pytest.fixture(autouse=True)
def no_precision_leak():
    """Process-global precision is as it was: nothing in the service may leave it changed."""
    before = flint.ctx.prec, flint.ctx.cap, mpmath.mp.prec
    yield
    assert (flint.ctx.prec, flint.ctx.cap, mpmath.mp.prec) == before
