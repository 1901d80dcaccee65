"""Every allowed range of an input, in one place: what is checked is what is published."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from ladderband.numerics.transition import Floats


@dataclass(frozen=True, slots=True)
class Range:
    """low <= x <= high, or low < x <= high when ``low_open``."""

    low: float
    high: float
    low_open: bool = False

    def holds(self, value: Any) -> bool:
        """Whether a number lies inside; false for NaN."""
        return bool(
            (self.low < value if self.low_open else self.low <= value) and value <= self.high
        )

    def first_outside(self, values: Floats) -> int | None:
        """Flat index of the first entry outside (or NaN), None when all are inside."""
        low = values > self.low if self.low_open else values >= self.low
        inside = low & (values <= self.high)
        return None if inside.all() else int(np.argmin(inside))

    def text(self) -> str:
        """In words for a problem document: ``0 < x <= 100000``."""
        sign = "<" if self.low_open else "<="
        return f"{self.low:.10g} {sign} x <= {self.high:.10g}"

    def json_schema(self) -> dict[str, float]:
        """As JSON Schema keywords."""
        low = "exclusiveMinimum" if self.low_open else "minimum"
        return {low: self.low, "maximum": self.high}


MAX_QUANTA = 2000
MAX_DIGITS = 1000
MAX_MODES = 400

WAVENUMBER = Range(1e-3, 1e5)  # cm^-1; below, kT / h c nu leaves double range
WAVENUMBER_RATIO = Range(1 / 50, 50.0)  # final / initial
HUANG_RHYS = Range(0.0, 2000.0)
DISPLACEMENT = Range(-63.25, 63.25)  # S = 2000 is a displacement of 63.2456
SHIFT = Range(-1e3, 1e3)  # angstrom sqrt(u); the displacement it stands for is checked as well
QUANTA = Range(0, MAX_QUANTA)
PLOT_QUANTA = Range(0, 200)
DIGITS = Range(1, MAX_DIGITS)
TOLERANCE = Range(1e-15, 0.5)
THRESHOLD = Range(0.0, 1.0)
TEMPERATURE = Range(0.0, 1e5)
POSITION = Range(-1e7, 1e7)  # origins and axis positions in cm^-1
MOMENT = Range(-1e4, 1e4)  # debye
LINES = Range(1, 1_000_000)
POINTS = Range(2, 100_001)
COORDINATE = Range(-1e4, 1e4)
MIXING = Range(-2.0, 2.0)

# molecules
LENGTH = Range(-1e4, 1e4)  # angstrom or bohr
MASS = Range(0.5, 500.0)  # u
MASS_NUMBER = Range(0, 300)
DOCUMENT_MASS_NUMBER = Range(-1, 300)  # QCSchema: -1 stands for an isotope not stated
HESSIAN = Range(-1e6, 1e6)  # hartree/bohr^2; wrong units are asked about once wavenumbers are known
GRADIENT = Range(-1e3, 1e3)  # hartree/bohr
ENERGY = Range(-1e6, 1e6)  # hartree
VECTOR = Range(-1e4, 1e4)
SIGNED_WAVENUMBER = Range(-1e5, 1e5)
REPLACED_WAVENUMBER = Range(10.0, 6000.0)
