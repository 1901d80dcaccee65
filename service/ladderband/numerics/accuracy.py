"""How far a number can be trusted: the statement every result carries."""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import Literal

from ladderband.numerics.errors import DeadlineExceeded
from ladderband.numerics.transition import Floats

Evidence = Literal["proven", "estimated"]


@dataclass(frozen=True, slots=True)
class Accuracy:
    """|true - value| <= bound for every number of the result.

    ``evidence`` is ``proven`` only when the bound has a proof (docstring or DEVELOPERS.md) that
    covers discretisation, truncation and rounding; anything else is ``estimated``. ``route`` names
    the algorithm that answered. An array bound has one entry a table of the batch, or one a number.
    """

    bound: float | Floats
    evidence: Evidence
    route: str


@dataclass(frozen=True, slots=True)
class Completeness:
    """captured + missing = total; ``missing_at_most`` is proven, rounding included."""

    captured: float
    total: float
    missing_at_most: float


@dataclass(frozen=True, slots=True)
class Deadline:
    """A point in time that loops look at; ``Deadline.none()`` never ends."""

    at: float

    @classmethod
    def after(cls, seconds: float) -> Deadline:
        return cls(time.monotonic() + seconds)

    @classmethod
    def none(cls) -> Deadline:
        return cls(float("inf"))

    def check(self) -> None:
        """Raise DeadlineExceeded when the time is over."""
        if time.monotonic() > self.at:
            raise DeadlineExceeded("The calculation was stopped at its time limit.")
