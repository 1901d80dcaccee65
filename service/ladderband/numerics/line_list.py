"""A list of assigned lines, as columns."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ladderband.numerics.accuracy import Accuracy, Completeness
from ladderband.numerics.transition import Floats

Quanta = NDArray[np.int32]
_ORIGIN = "0^0_0"


@dataclass(frozen=True)
class LineList:
    """Lines of one transition.

    position_cm1, intensity : (L,) float64; intensity is Boltzmann weight times Franck-Condon factor
        (times |mu|^2 / <mu^2> when the moment varies), so a complete list sums to 1.
    v_initial, v_final : (L, N) int32 quanta.
    """

    position_cm1: Floats
    intensity: Floats
    v_initial: Quanta
    v_final: Quanta
    completeness: Completeness
    accuracy: Accuracy
    warnings: tuple[str, ...] = ()

    def __len__(self) -> int:
        return len(self.position_cm1)

    def by_position(self) -> LineList:
        """The same lines, rising position first, stronger before weaker at one position."""
        order = np.lexsort((-self.intensity, self.position_cm1))
        return replace(
            self,
            position_cm1=self.position_cm1[order],
            intensity=self.intensity[order],
            v_initial=self.v_initial[order],
            v_final=self.v_final[order],
        )


def assignments(v_initial: Quanta, v_final: Quanta) -> list[str]:
    """The trade's notation of each line: mode number, final quanta up, initial quanta down.

    ``1^2_0 3^0_1`` is two quanta of mode 1 in the final state out of none, and none of mode 3 out
    of one (common practice in vibronic spectroscopy; modes count from 1). A line without any quanta
    is ``0^0_0``, the 0-0 line.
    """
    if v_initial.shape[1] == 1:  # a progression: most of the time would go into finding the mode
        pairs = zip(v_final[:, 0].tolist(), v_initial[:, 0].tolist(), strict=True)
        return [f"1^{n}_{v}" if n or v else _ORIGIN for n, v in pairs]
    row, mode = np.nonzero(v_initial | v_final)
    quanta = (mode + 1).tolist(), v_final[row, mode].tolist(), v_initial[row, mode].tolist()
    parts = [f"{k}^{n}_{v}" for k, n, v in zip(*quanta, strict=True)]
    ends = np.cumsum(np.bincount(row, minlength=len(v_final))).tolist()
    starts = [0, *ends]
    return [" ".join(parts[start:end]) or _ORIGIN for start, end in zip(starts, ends, strict=False)]
