"""The unit of float64 rounding, and what many roundings in a row come to.

Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., sec. 3.1.
"""

from __future__ import annotations

UNIT_ROUNDOFF = 2.0**-53


def gamma(operations: float) -> float:
    """m u / (1 - m u): the relative error of m roundings in a row."""
    return operations * UNIT_ROUNDOFF / (1.0 - operations * UNIT_ROUNDOFF)
