"""Bands as CSV, npy and a plot."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure

from ladderband.formats.csv import csv_body, csv_columns, csv_head
from ladderband.formats.look import Draw, Look, axes
from ladderband.formats.npy import npy_body
from ladderband.formats.plots import labelled, quanta_text
from ladderband.formats.sheet import Sheet
from ladderband.numerics.axis import in_unit
from ladderband.usecases.bands_question import Band, BandsAnswer, BandsQuestion

_AXIS_NAMES = {
    "cm-1": "wavenumber / cm⁻¹",
    "eV": "photon energy / eV",
    "nm": "vacuum wavelength / nm",
    "THz": "frequency / THz",
}
_SCALE_NAMES = {
    "relative": "relative intensity",
    "unit_area": "intensity, unit area",
    "molar_absorption_coefficient": "molar absorption coefficient / L mol⁻¹ cm⁻¹",
    "cross_section": "cross-section / cm²",
    "photon_rate": "photon rate / s⁻¹ per {axis}",
    "radiated_power": "radiated power / W per {axis}",
}
MAX_NAMED = 12


def band_names(answer: BandsAnswer) -> list[str]:
    """One column name a band: what distinguishes it."""
    if len(answer.bands) == 1:
        return ["intensity"]
    return [f"{band.process}_{band.temperature_k:g}K" for band in answer.bands]


def bands_csv(sheet: Sheet, question: BandsQuestion, answer: BandsAnswer) -> Iterator[bytes]:
    """The axis and one column a band."""
    notes = {"axis": answer.axis.unit, "intensity": answer.intensity_unit}
    for name, band in zip(band_names(answer), answer.bands, strict=True):
        notes[f"moments of {name}"] = (
            f"mean {band.moments.mean_cm1!r} cm^-1, standard deviation "
            f"{band.moments.standard_deviation_cm1!r} cm^-1, skewness {band.moments.skewness!r}"
        )
    columns: dict[str, Any] = {answer.axis.unit: answer.axis.values}
    for index, (name, band) in enumerate(zip(band_names(answer), answer.bands, strict=True)):
        columns[name if name not in columns else f"{name}_{index}"] = band.intensity
    widest = max(answer.bands, key=lambda band: float(np.max(band.accuracy.bound)))
    return csv_body(csv_head(sheet, notes, widest.accuracy), csv_columns(columns))


def bands_npy(sheet: Sheet, question: BandsQuestion, answer: BandsAnswer) -> Iterator[bytes]:
    """Array (points, 1 + bands): the axis, then the bands."""
    return npy_body(
        np.column_stack([answer.axis.values, *(band.intensity for band in answer.bands)])
    )


def band_plot(question: BandsQuestion, answer: BandsAnswer) -> Draw:
    """The bands over their axis; up to two are filled, more run from one colour to the other."""

    def draw(figure: Figure, look: Look) -> None:
        ax = axes(figure, look)
        x, count = answer.axis.values, len(answer.bands)
        shades = LinearSegmentedColormap.from_list("bands", [look.first, look.second])
        for index, band in enumerate(answer.bands):
            colour = shades(index / max(count - 1, 1))
            ax.plot(x, band.intensity, color=colour, linewidth=1.6, label=_label(band, answer))
            if count <= 2:
                ax.fill_between(x, band.intensity, color=colour, alpha=0.12, linewidth=0)
        if len(x) > 1:
            ax.set_xlim(float(x[0]), float(x[-1]))
        top = max(float(band.intensity.max()) for band in answer.bands)
        ax.set_ylim(0.0, 1.08 * top if top > 0.0 else 1.0)
        ax.set_xlabel(_axis_name(answer))
        ax.set_ylabel(_SCALE_NAMES[question.scale].replace("{axis}", _unit(answer.axis.unit)))
        if answer.bands[0].lines and question.line_shape.bath is None:
            _label_lines(ax, look, answer)
        if 1 < count <= MAX_NAMED:
            ax.legend(frameon=False, fontsize=8.5, labelcolor=look.ink)

    return draw


def _axis_name(answer: BandsAnswer) -> str:
    """What runs along the axis: of a photoelectron band an energy of the electrons, not of light."""
    if answer.axis.unit == "eV" and answer.bands[0].process == "photoelectron":
        return "ionisation energy / eV"
    return _AXIS_NAMES[answer.axis.unit]


def _label_lines(ax: Axes, look: Look, answer: BandsAnswer) -> None:
    """Assignments of the first species' strongest lines above the first band."""
    found, band, unit = answer.bands[0].lines[0], answer.bands[0], answer.axis.unit
    position = np.array([in_unit(x, unit) for x in found.position_cm1.tolist()])
    height = np.interp(position, answer.axis.values, band.intensity)
    if not len(position):
        return
    ax.set_ylim(0.0, 1.16 * float(max(b.intensity.max() for b in answer.bands)))

    def name(k: int) -> str:
        return quanta_text(found.v_initial[k], found.v_final[k])

    for k in labelled(ax, position, height, name):
        ax.annotate(
            name(k),
            (position[k], height[k]),
            xytext=(0, 4),
            textcoords="offset points",
            ha="center",
            va="bottom",
            fontsize=9,
            color=look.ink,
        )


def _unit(unit: str) -> str:
    return "cm⁻¹" if unit == "cm-1" else unit


def _label(band: Band, answer: BandsAnswer) -> str:
    temperature = f"{band.temperature_k:g} K"
    if len({other.process for other in answer.bands}) == 1:
        return temperature
    return f"{band.process}, {temperature}"
