r"""Pairs of one-dimensional oscillators, as columns, exactly as the client gave them.

Of the two wavenumbers only the ratio t = f/g enters an overlap. With the displacement Delta in
units of the final oscillator's length the generator of :mod:`ladderband.numerics.generator` is

.. math::
   W_{yy} = -W_{zz} = \frac{1-t}{1+t},\quad W_{yz} = \frac{2\sqrt t}{1+t},\quad
   w_y = -\frac{\sqrt{2t}\,\Delta}{1+t},\quad w_z = \frac{\sqrt2\,\Delta}{1+t},\quad
   c^2 = \frac{2\sqrt t}{1+t}\,e^{-\Delta^2/(1+t)} .
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

import numpy as np

from ladderband.numerics.transition import Floats
from ladderband.numerics.units import SHIFT_DISPLACEMENT2_PER_PI2

DisplacementKind = Literal["displacement", "huang_rhys", "shift_angstrom_sqrt_u"]
Column = Floats | tuple[Fraction, ...]
"""One value an oscillator pair: float64 (each double taken exactly) or exact fractions."""


def exact(column: Column, index: int) -> Fraction:
    """The exact value of one entry."""
    value = column[index]
    return value if isinstance(value, Fraction) else Fraction(float(value))


def rounded(column: Column) -> Floats:
    """The column as float64, each entry correctly rounded."""
    if isinstance(column, np.ndarray):
        return column
    return np.array([value.numerator / value.denominator for value in column])


@dataclass(frozen=True)
class OscillatorColumns:
    """A batch of B oscillator pairs; every column has B entries.

    ``shift_kind`` says what ``shift`` holds; a Huang-Rhys factor stands for the positive
    displacement sqrt(2 S). ``batch`` is False when the client sent one pair as scalars.
    """

    wavenumber_initial_cm1: Column
    wavenumber_final_cm1: Column
    shift: Column
    shift_kind: DisplacementKind = "displacement"
    batch: bool = True

    def __len__(self) -> int:
        return len(self.shift)

    def displacements(self) -> Floats:
        """Delta in float64, relative error at most 6 units of 2^-53.

        Of a shift: pi^2 within 1.7, its constant 1, two products, the wavenumber 1, halved by the root
        and rounded: 3.9; the shift itself and the last product 2. Of a Huang-Rhys factor: 2. A
        displacement sent as a number has none, sent as a string 1.
        """
        shift = rounded(self.shift)
        if self.shift_kind == "displacement":
            return shift
        if self.shift_kind == "huang_rhys":
            return np.sqrt(2.0 * shift)
        factor = math.pi**2 * float(SHIFT_DISPLACEMENT2_PER_PI2)
        displacement: Floats = shift * np.sqrt(factor * rounded(self.wavenumber_final_cm1))
        return displacement


def one_pair(
    wavenumber_initial_cm1: float | Fraction,
    wavenumber_final_cm1: float | Fraction,
    shift: float | Fraction,
    shift_kind: DisplacementKind = "displacement",
) -> OscillatorColumns:
    """A batch of one, from scalars."""

    def column(value: float | Fraction) -> Column:
        return (value,) if isinstance(value, Fraction) else np.array([float(value)])

    return OscillatorColumns(
        column(wavenumber_initial_cm1),
        column(wavenumber_final_cm1),
        column(shift),
        shift_kind,
        batch=False,
    )
