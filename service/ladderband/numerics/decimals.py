"""Decimal digits out of balls: every digit decided, or no digits at all.

Call everything here inside :func:`ladderband.numerics.balls.working_precision`.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import flint

BITS_PER_DIGIT = 3.3219280948873626


class Decimal(NamedTuple):
    """mantissa * 10^exponent, the mantissa with exactly the digits asked for (or 0)."""

    mantissa: flint.fmpz
    exponent: int

    def __str__(self) -> str:
        """All digits of the mantissa: plain when short, else like ``-1.2345e-7``."""
        if self.mantissa == 0:
            return "0"
        sign = "-" if self.mantissa < 0 else ""
        figures: str = abs(self.mantissa).str()
        power = self.exponent + len(figures) - 1
        if -5 <= power < 0:
            return f"{sign}0.{'0' * (-power - 1)}{figures}"
        if 0 <= power < len(figures) - 1:
            return f"{sign}{figures[: power + 1]}.{figures[power + 1 :]}"
        if power == len(figures) - 1:
            return sign + figures
        fraction = f".{figures[1:]}" if len(figures) > 1 else ""
        return f"{sign}{figures[0]}{fraction}e{power:+d}"

    def __float__(self) -> float:
        return float(f"{self.mantissa}e{self.exponent}")


ZERO = Decimal(flint.fmpz(0), 0)


class DecimalRounder:
    """Rounds balls to a fixed number of significant digits.

    A value is rounded only when every number in its ball rounds to the same digits, so the last
    digit is right: |string - true| <= half a unit of the last digit. Powers of ten are kept, a
    conversion costs about 1 microsecond at 50 digits.
    """

    def __init__(self, digits: int) -> None:
        self._digits = digits
        self._low = flint.fmpz(10) ** (digits - 1)
        self._high = 10 * self._low
        self._half = flint.arb(0.5)
        self._tens: dict[int, flint.arb] = {}

    def __call__(self, value: flint.arb) -> Decimal | None:
        """The rounded value, or None when the ball does not decide it."""
        if value.is_zero():
            return ZERO
        exponent = _decimal_exponent(value)
        for _ in range(3):  # the exponent may be one off, twice at a power of ten
            integer = self._scaled(value, self._digits - 1 - exponent)
            if integer is None:
                return None
            size = abs(integer)
            if size >= self._high:
                exponent += 1
            elif size < self._low:
                exponent -= 1
            else:
                return Decimal(integer, exponent - self._digits + 1)
        return self._at_power_of_ten(value, exponent)

    def _scaled(self, value: flint.arb, power: int) -> flint.fmpz | None:
        ten = self._tens.get(power)
        if ten is None:
            ten = self._tens[power] = flint.arb(10) ** power
        return (value * ten + self._half).floor().unique_fmpz()

    def _at_power_of_ten(self, value: flint.arb, exponent: int) -> Decimal | None:
        """9.99..6 rounds up to the next power of ten, one digit more than its own scale gives."""
        for power in (exponent - 1, exponent, exponent + 1):
            integer = self._scaled(value, self._digits - 1 - power)
            if integer is not None and abs(integer) == self._high:
                sign = -1 if integer < 0 else 1
                return Decimal(sign * self._low, power - self._digits + 2)
        return None


def _decimal_exponent(value: flint.arb) -> int:
    """floor(log10 |midpoint|), possibly one off."""
    approximate = abs(float(value))
    if 1e-300 < approximate < 1e300:
        return math.floor(math.log10(approximate))
    mantissa, exponent = value.mid().man_exp()
    bits = int(abs(mantissa)).bit_length() + int(exponent)
    return math.floor((bits - 1) / BITS_PER_DIGIT)
