"""What the core refuses to return.

NumericsError
├── DomainError          an input lies outside what the formulas hold for
├── PrecisionNotReached  no route met the requested bound within its cost
└── DeadlineExceeded     the caller's deadline passed inside a loop

The core raises what went wrong; only ``web/problems.py`` knows about HTTP.
"""

from __future__ import annotations


class NumericsError(Exception):
    """Base of all refusals of the core."""


class DomainError(NumericsError, ValueError):
    """An input is outside the domain of the formulas.

    ``pointer`` is the JSON pointer of the offending member of the request, when there is one.
    """

    def __init__(self, message: str, pointer: str = "") -> None:
        super().__init__(message)
        self.pointer = pointer


class PrecisionNotReached(NumericsError, ArithmeticError):
    """The requested bound or number of digits was not reached within the cost limit."""

    def __init__(self, message: str, requested: str, reached: str) -> None:
        super().__init__(message)
        self.requested = requested
        self.reached = reached


class DeadlineExceeded(NumericsError, TimeoutError):
    """The deadline passed in by the caller is over; nothing is returned."""
