"""The axis a band is asked for: wavenumber, energy, wavelength or frequency, always as points."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from ladderband.numerics.errors import DomainError
from ladderband.numerics.transition import Floats
from ladderband.numerics.units import EV_CM1, NM_CM1, THZ_CM1

AxisUnit = Literal["cm-1", "eV", "nm", "THz"]
_LINEAR: dict[str, float] = {"cm-1": 1.0, "eV": EV_CM1, "THz": THZ_CM1}


@dataclass(frozen=True)
class Axis:
    """Points in one unit, strictly ascending, shape (P,).

    ``wavenumbers`` are the same points in cm^-1 (descending for nm, vacuum wavelength);
    ``jacobian`` is |d wavenumber / d axis|: a density per cm^-1 times it is a density per unit of
    the axis.
    """

    unit: AxisUnit
    values: Floats

    def __post_init__(self) -> None:
        if len(self.values) == 0:
            raise DomainError("The axis is empty: give at least one point.", "/axis")
        if not np.isfinite(self.values).all():
            raise DomainError("The axis holds a number that is not finite.", "/axis")
        if len(self.values) > 1 and not (np.diff(self.values) > 0.0).all():
            bad = int(np.argmax(np.diff(self.values) <= 0.0)) + 1
            raise DomainError(
                f"The axis must ascend: point {bad} is {self.values[bad]:.10g}, not above the point "
                f"before it ({self.values[bad - 1]:.10g}).",
                "/axis",
            )
        if self.unit == "nm" and self.values[0] <= 0.0:
            raise DomainError(
                f"A wavelength axis must stay above 0 nm; it starts at {self.values[0]:.10g}.",
                "/axis",
            )

    @property
    def wavenumbers(self) -> Floats:
        """The points in cm^-1; relative error at most 3 units of 2^-53."""
        if self.unit == "nm":
            return NM_CM1 / self.values
        return self.values * _LINEAR[self.unit]

    @property
    def jacobian(self) -> Floats:
        if self.unit == "nm":
            return NM_CM1 / self.values**2
        return np.full(len(self.values), _LINEAR[self.unit])


def in_unit(wavenumber_cm1: float, unit: AxisUnit) -> float:
    """A wavenumber on an axis of this unit."""
    return NM_CM1 / wavenumber_cm1 if unit == "nm" else wavenumber_cm1 / _LINEAR[unit]
