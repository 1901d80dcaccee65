"""What requests about the same transition share: kept for a while, bounded, safe under threads.

A fitting loop or a dashboard asks for the same transition with other widths, axes, scales or
origins. Its energy range, moments and correlation function do not depend on those, and they are
nearly all of the work.
"""

from __future__ import annotations

import hashlib
import threading
from collections import OrderedDict

import numpy as np

from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.correlation import (
    CorrelationFunction,
    CoupledModes,
    correlation_function,
    coupled_modes,
)
from ladderband.numerics.energy_tails import EnergyRange, energy_range
from ladderband.numerics.moments import LineMoments, line_moments
from ladderband.numerics.transition import Transition

BYTES_A_TIME = 24  # one complex value and its bound
LIMIT_BYTES = 48 * 2**20
LIMIT_TRANSITIONS = 64


class KeptTransition:
    """One transition at one temperature, with everything computed about it so far.

    Two threads may compute the same thing twice; neither sees half of it.
    """

    def __init__(self, transition: Transition) -> None:
        self.modes: CoupledModes = coupled_modes(transition)
        self.moments: LineMoments = line_moments(transition)
        self._ranges: dict[float, EnergyRange] = {}
        self._correlations: dict[float, CorrelationFunction] = {}

    def energy_range(self, outside: float) -> EnergyRange:
        """The proven range that holds all but ``outside`` of the intensity."""
        found = self._ranges.get(outside)
        if found is None:
            scale = max(self.moments.standard_deviation, 1e-3)
            found = self._ranges[outside] = energy_range(self.modes, outside, scale)
        return found

    def have(self, step: float) -> int:
        """Number of times already known with this step."""
        found = self._correlations.get(step)
        return 0 if found is None else len(found.value)

    def correlation(self, step: float, count: int, deadline: Deadline) -> CorrelationFunction:
        """chi at the first ``count`` times; only those not yet known are evaluated.

        Uncoupled modes cost little: a quarter more is kept for narrower lines to come.
        """
        found = self._correlations.get(step)
        known = 0 if found is None else len(found.value)
        if known < count:
            stop = count if self.modes.mixed else count + count // 4
            more = correlation_function(self.modes, step, known, stop, deadline)
            found = more if found is None else found.extended(more)
            self._correlations[step] = found
        assert found is not None
        return CorrelationFunction(step, found.value[:count], found.bound[:count])

    @property
    def size(self) -> int:
        """Bytes held, without the modes."""
        kept = list(self._correlations.values())
        return BYTES_A_TIME * sum(len(found.value) for found in kept)


class KeptTransitions:
    """The transitions asked about last, least recently used ones dropped first."""

    def __init__(self, limit_bytes: int = LIMIT_BYTES) -> None:
        self.limit_bytes = limit_bytes
        self._lock = threading.Lock()
        self._kept: OrderedDict[bytes, KeptTransition] = OrderedDict()

    def get(self, transition: Transition) -> KeptTransition:
        """The kept transition, made when it is new; origin, direction and labels do not matter."""
        key = _key(transition)
        with self._lock:
            found = self._kept.get(key)
            if found is not None:
                self._kept.move_to_end(key)
                return found
        made = KeptTransition(transition)
        with self._lock:
            return self._kept.setdefault(key, made)

    def trim(self) -> None:
        """Drop what is over the limits; called after each answer."""
        with self._lock:
            total = sum(kept.size for kept in self._kept.values())
            while self._kept and (total > self.limit_bytes or len(self._kept) > LIMIT_TRANSITIONS):
                _, dropped = self._kept.popitem(last=False)
                total -= dropped.size

    def __len__(self) -> int:
        return len(self._kept)


def _key(transition: Transition) -> bytes:
    parts = [
        transition.wavenumbers_initial,
        transition.wavenumbers_final,
        transition.displacements,
        np.array([transition.temperature_k, len(transition.modes)]),
    ]
    if transition.mixing is not None:
        parts.append(transition.mixing)
    if transition.moment is not None:
        parts += [
            np.array([-1.0]),
            transition.moment.constant_debye,
            transition.moment.slopes_debye,
        ]
    digest = hashlib.blake2b(digest_size=20)
    for part in parts:
        digest.update(np.ascontiguousarray(part).tobytes())
    return digest.digest()
