"""Load every compiled kernel of the one-dimensional engine before the first request needs it."""

from __future__ import annotations

import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.hermite import forbidden_table, hermite_functions
from ladderband.numerics.oscillators import one_pair


def warm() -> None:
    """Call each kernel once; 0.1 s from the cache, some seconds where the cache is empty."""
    pair = one_pair(1000.0, 900.0, 1.0)
    certified_tables(pair, 1, 1, 1e-10, Deadline.none())  # ladder
    certified_tables(pair, 1, 1, 1e-13, Deadline.none())  # grid
    hermite_functions(np.linspace(-1.0, 1.0, 3), 2)
    forbidden_table(2200)  # 2000 quanta and their tails: 10 ms, once
