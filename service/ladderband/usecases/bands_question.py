"""What a band is asked by, and what comes back."""

from __future__ import annotations

from dataclasses import dataclass

from ladderband.numerics.absolute_scale import Scale, Strength
from ladderband.numerics.accuracy import Accuracy
from ladderband.numerics.axis import Axis
from ladderband.numerics.line_list import LineList
from ladderband.numerics.line_shape import (
    Bath,
    Broadening,
    InstrumentFunction,
    broadening,
)
from ladderband.numerics.transition import Floats, Process, Transition


@dataclass(frozen=True)
class LineShape:
    """Widths are full widths at half maximum in cm^-1; kind gaussian, lorentzian or voigt.

    ``bath`` and ``instrument`` act on top of it. A kind other than voigt uses only its own width.
    """

    kind: str = "gaussian"
    fwhm_cm1: float = 0.0
    fwhm_lorentzian_cm1: float = 0.0
    bath: Bath | None = None
    instrument: InstrumentFunction | None = None

    def at(self, temperature_k: float, direction: float) -> Broadening:
        """The broadening at a temperature; raises DomainError without any width."""
        gaussian = 0.0 if self.kind == "lorentzian" else self.fwhm_cm1
        lorentzian = {"gaussian": 0.0, "lorentzian": self.fwhm_cm1}.get(
            self.kind, self.fwhm_lorentzian_cm1
        )
        return broadening(
            gaussian, lorentzian, self.bath, self.instrument, temperature_k, direction
        )


@dataclass(frozen=True)
class Species:
    """One conformer or species and its share (> 0; shares are scaled to sum 1).

    On absolute scales the share is a mole fraction; on the others the share of the band's area.
    """

    transition: Transition
    weight: float = 1.0


@dataclass(frozen=True)
class BandsQuestion:
    """Bands of a mixture of species at one or several temperatures, on one axis.

    ``temperatures_k`` empty: the species' own. ``both_directions`` adds the reverse process.
    ``tolerance`` is the bound aimed at, relative to the maximum. ``label_lines``: so many of the
    strongest lines on the axis, of each species, ride along for labels.
    """

    species: tuple[Species, ...]
    axis: Axis
    line_shape: LineShape
    scale: Scale = "relative"
    temperatures_k: tuple[float, ...] = ()
    both_directions: bool = False
    tolerance: float = 1e-6
    label_lines: int = 0


@dataclass(frozen=True)
class BandMoments:
    """Mean, standard deviation (cm^-1) and skewness on the wavenumber axis."""

    mean_cm1: float
    standard_deviation_cm1: float
    skewness: float


@dataclass(frozen=True)
class Positions:
    """Landmarks of one species' band in cm^-1; the vertical one leaves out zero-point motion."""

    origin_cm1: float
    vertical_cm1: float
    first_moment_cm1: float


@dataclass(frozen=True)
class Band:
    """One band: intensity (P,) in the order of the axis, and what belongs to it.

    ``moments`` are those of the lines (closed form, bath's shift included); ``moments_on_axis``
    those of the broadened band over the axis given (None where there is no intensity).
    ``range_cm1`` holds all but 1e-6 of the lines. ``lines``: one list a species when labels were
    asked for, without the shift of a bath; its completeness says how far it looked.
    """

    process: Process
    temperature_k: float
    intensity: Floats
    accuracy: Accuracy
    moments: BandMoments
    moments_on_axis: BandMoments | None
    positions: tuple[Positions, ...]
    strength: Strength
    range_cm1: tuple[float, float]
    lines: tuple[LineList, ...] = ()


@dataclass(frozen=True)
class BandsAnswer:
    """The bands, direction by direction and within it temperature by temperature.

    ``stokes_shift_cm1`` (one a temperature): mean of absorption minus mean of emission, when both
    were asked.
    """

    axis: Axis
    intensity_unit: str
    bands: tuple[Band, ...]
    stokes_shift_cm1: tuple[float, ...] = ()
    warnings: tuple[str, ...] = ()
