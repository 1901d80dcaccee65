r"""Matrix elements of q, its powers and d/dq, from a table of overlap integrals.

With q = (a + a^dagger)/sqrt2 of one of the two states the ladder acts on that state's own quanta,

.. math::
   \langle v|q|n\rangle = \bigl[\sqrt n\,S(v,n-1) + \sqrt{n+1}\,S(v,n+1)\bigr]/\sqrt2,\qquad
   \langle v|d/dq|n\rangle = \bigl[\sqrt n\,S(v,n-1) - \sqrt{n+1}\,S(v,n+1)\bigr]/\sqrt2

(textbook algebra of the oscillator; DLMF 18.9.1 and 18.9.25). Acting on the initial state, the same
along the rows, with the opposite sign for the derivative. The momentum operator is -i hbar d/dq. The
same lines serve float64 arrays and object arrays of balls.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from ladderband.numerics.rounding import UNIT_ROUNDOFF
from ladderband.numerics.transition import Floats

OperatorKind = Literal["coordinate_power", "derivative"]
StateName = Literal["initial", "final"]


@dataclass(frozen=True, slots=True)
class Operator:
    """q^power (power 1..4), or d/dq, of the dimensionless coordinate of one of the two states.

    ``state`` tells whose coordinate: q = Q sqrt(g/hbar) (initial) or q' = Q' sqrt(f/hbar) (final).
    """

    kind: OperatorKind = "coordinate_power"
    power: int = 1
    state: StateName = "final"

    @property
    def extra(self) -> tuple[int, int]:
        """Rows and columns the table of overlaps needs beyond the ones asked for."""
        steps = self.power if self.kind == "coordinate_power" else 1
        return (steps, 0) if self.state == "initial" else (0, steps)


def _apply(table: NDArray[Any], root: NDArray[Any], half: Any, sign: int) -> NDArray[Any]:
    """One application along the last axis, which loses its last entry; ``half`` = 1/sqrt2."""
    count = table.shape[-1] - 1
    result = (sign * root[1 : count + 1]) * table[..., 1:]
    result[..., 1:] = result[..., 1:] + root[1:count] * table[..., : count - 1]
    scaled: NDArray[Any] = half * result
    return scaled


def apply_operator(
    table: NDArray[Any], operator: Operator, root: NDArray[Any], half: Any
) -> NDArray[Any]:
    """Matrix elements from overlaps, (..., V + 1, N + 1) from a table larger by ``operator.extra``.

    ``root[k]`` = sqrt(k) in the table's own number type, ``half`` = 1/sqrt2.
    """
    work = table.swapaxes(-1, -2) if operator.state == "initial" else table
    if operator.kind == "derivative":
        work = _apply(work, root, half, -1)
        if operator.state == "initial":
            work = -work
    else:
        for _ in range(operator.power):
            work = _apply(work, root, half, 1)
    return work.swapaxes(-1, -2) if operator.state == "initial" else work


def float_matrix_elements(
    tables: Floats, bounds: Floats, operator: Operator
) -> tuple[Floats, Floats]:
    """Matrix elements of a batch of float64 tables, with proven bounds (B,).

    One application multiplies an error by at most (sqrt n + sqrt(n+1))/sqrt2 <= sqrt(2n+2), n the
    largest index read, and adds 5 roundings of a number of that size times the largest element.
    """
    steps = sum(operator.extra)
    axis = -2 if operator.state == "initial" else -1
    size = tables.shape[axis]
    root = np.sqrt(np.arange(size + 1, dtype=np.float64))
    half = np.sqrt(0.5)
    single = Operator(operator.kind, 1, operator.state)
    work, worst = tables, np.asarray(bounds, dtype=np.float64)
    for _ in range(steps):
        norm = np.sqrt(2.0 * size + 2.0)
        largest = np.abs(work).max(axis=(-1, -2)) + worst
        worst = 1.001 * norm * (worst + 5.0 * UNIT_ROUNDOFF * largest)
        work = apply_operator(work, single, root, half)
    return np.ascontiguousarray(work), worst
