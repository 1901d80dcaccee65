"""Load every compiled kernel before the first request needs it."""

from __future__ import annotations

import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.band import interpolated
from ladderband.numerics.certificate import certified_tables
from ladderband.numerics.correlation import correlation_function, coupled_modes
from ladderband.numerics.hermite import forbidden_table, hermite_functions
from ladderband.numerics.line_selection import Selection, transition_lines
from ladderband.numerics.oscillators import one_pair
from ladderband.numerics.transition import Mode, Moment, Transition


def warm() -> None:
    """Call each kernel once; 0.1 s from the cache, some seconds where the cache is empty."""
    pair = one_pair(1000.0, 900.0, 1.0)
    certified_tables(pair, 1, 1, 1e-10, Deadline.none())  # ladder
    certified_tables(pair, 1, 1, 1e-13, Deadline.none())  # grid
    hermite_functions(np.linspace(-1.0, 1.0, 3), 2)
    forbidden_table(2200)  # 2000 quanta and their tails: 10 ms, once
    _warm_bands()
    interpolated(np.ones(2), np.ones(1))
    _warm_lines()


def _warm_bands() -> None:
    modes = (Mode(1000.0, 900.0, 1.0), Mode(500.0, 500.0, 1.0))
    moment = Moment(np.array([0.0, 0.0, 1.0]), np.ones((2, 3)))
    for mixing in (None, np.array([[0.6, 0.8], [-0.8, 0.6]])):
        transition = Transition(modes, temperature_k=300.0, mixing=mixing, moment=moment)
        correlation_function(coupled_modes(transition), 2.0**-13, 0, 2, Deadline.none())


def _warm_lines() -> None:
    """The quanta table, with and without a varying moment."""
    mixing = np.array([[0.8, 0.6], [-0.6, 0.8]])
    modes = (Mode(1000.0, 900.0, 0.5), Mode(600.0, 650.0, 0.2))
    moments = (None, Moment(np.array([1.0, 0.0, 0.0]), np.full((2, 3), 0.1)))
    for moment in moments:
        transition = Transition(modes, temperature_k=200.0, mixing=mixing, moment=moment)
        transition_lines(transition, 0.1, Selection(), 1000, Deadline.none())
