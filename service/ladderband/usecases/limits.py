"""What one request may cost, and the refusal when it would cost more.

A use case estimates its work from the validated question before any of it starts. Seconds are those
of one core of the machine the model was fitted on (see DEVELOPERS.md, "Cost model").
"""

from __future__ import annotations

from dataclasses import dataclass


class UseCaseError(Exception):
    """Base of all refusals of the use cases."""


class CostLimitExceeded(UseCaseError):
    """The estimate is above the limit; nothing was computed."""

    def __init__(self, estimate_s: float, limit_s: float, advice: str) -> None:
        super().__init__(
            f"This request is estimated at {estimate_s:.2g} s of work; "
            f"the limit for one request is {limit_s:.2g} s. {advice}"
        )
        self.estimate_s = estimate_s
        self.limit_s = limit_s


class AnswerTooLarge(UseCaseError):
    """The tables asked for hold more numbers than one answer may; nothing was computed."""

    def __init__(self, numbers: int, limit: int) -> None:
        super().__init__(
            f"The tables of this request hold {numbers} numbers; the limit for one request is "
            f"{limit}. Ask for fewer quanta, or for fewer pairs in one request."
        )
        self.numbers = numbers
        self.limit = limit


@dataclass(frozen=True, slots=True)
class Limits:
    """Limits of one request; the defaults are the documented ones, settings override them."""

    work_s: float = 1.0
    """Estimated seconds of work: where a 2000 x 2000 table still passes."""
    batch_size: int = 10_000
    """Oscillator pairs in one request."""
    table_elements: int = 4_100_000
    """Numbers in one table answer, all pairs together."""

    def admit_table(self, numbers: int) -> None:
        """Raise AnswerTooLarge when one table of the answer holds more numbers than allowed."""
        if numbers > self.table_elements:
            raise AnswerTooLarge(numbers, self.table_elements)

    def admit(self, estimate_s: float, advice: str) -> None:
        """Raise CostLimitExceeded when the estimate is above the limit."""
        if estimate_s > self.work_s:
            raise CostLimitExceeded(estimate_s, self.work_s, advice)
