"""One look for every plot: colours, type and axes, light and dark, and the way to bytes.

The two data colours differ in lightness as well as in hue, so they stay apart for colour-blind
readers and in print. Text is drawn as paths: a plot looks the same on a machine without our font.
matplotlib is not thread-safe: every figure is made and written under one lock.
"""

from __future__ import annotations

import io
import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties, findfont, get_font

from ladderband.formats.sheet import Sheet

mpl.rcParams["svg.fonttype"] = "path"
mpl.rcParams["svg.hashsalt"] = "ladderband"  # same figure, same bytes
mpl.rcParams["font.family"] = "DejaVu Sans"
mpl.rcParams["mathtext.fontset"] = "dejavusans"

PIXELS_PER_INCH = 96.0
_LOCK = threading.Lock()


@dataclass(frozen=True, slots=True)
class Look:
    """Colours of one theme."""

    paper: str
    ink: str
    quiet: str
    line: str
    first: str
    second: str

    def shades(self) -> LinearSegmentedColormap:
        """Paper to the first colour, for values from 0 up."""
        return LinearSegmentedColormap.from_list("shades", [self.paper, self.first, self.deep])

    @property
    def deep(self) -> str:
        """The end of the shades."""
        return "#0f2a57" if self.paper == "#ffffff" else "#dceaff"


LOOKS = {
    "light": Look("#ffffff", "#1d232b", "#5c6672", "#d5dae0", "#2a62b8", "#c25a0c"),
    "dark": Look("#15191f", "#e6e9ee", "#9aa5b1", "#343c46", "#79acf5", "#f0a35e"),
}

Draw = Callable[[Figure, Look], None]


def picture(sheet: Sheet, draw: Draw, kind: str) -> bytes:
    """The bytes of one plot: ``draw`` fills an empty figure of the sheet's size and theme."""
    look = LOOKS[sheet.theme]
    with _LOCK:
        figure = Figure(
            figsize=(sheet.width / PIXELS_PER_INCH, sheet.height / PIXELS_PER_INCH),
            dpi=PIXELS_PER_INCH,
            facecolor=look.paper,
            layout="constrained",
        )
        draw(figure, look)
        if sheet.title:
            heading = figure.suptitle(
                _plain(sheet.title), color=look.ink, fontsize=11, x=0.02, ha="left", weight="bold"
            )
            heading.set_parse_math(False)
        return _svg(figure, sheet) if kind == "svg" else _png(figure)


def svg(draw: Callable[[Any, Any], Draw]) -> Callable[[Sheet, Any, Any], bytes]:
    """A renderer of SVG from a function (question, answer) -> drawing."""
    return lambda sheet, question, answer: picture(sheet, draw(question, answer), "svg")


def png(draw: Callable[[Any, Any], Draw]) -> Callable[[Sheet, Any, Any], bytes]:
    """A renderer of PNG from a function (question, answer) -> drawing."""
    return lambda sheet, question, answer: picture(sheet, draw(question, answer), "png")


def _svg(figure: Figure, sheet: Sheet) -> bytes:
    target = io.StringIO()
    FigureCanvasSVG(figure)
    metadata = {"Date": None, "Creator": f"Ladderband {sheet.version}", "Identifier": sheet.digest}
    figure.savefig(target, format="svg", metadata=metadata)
    return target.getvalue().encode()


def _png(figure: Figure) -> bytes:
    target = io.BytesIO()
    FigureCanvasAgg(figure)
    figure.savefig(target, format="png", metadata={"Software": "Ladderband"})
    return target.getvalue()


def _plain(text: str) -> str:
    """Text in which what our font lacks is a box."""
    glyphs = get_font(findfont(FontProperties())).get_charmap()
    return "".join(char if ord(char) in glyphs else "\u25a1" for char in text)


def axes(figure: Figure, look: Look, *place: Any, **shared: Any) -> Axes:
    """Axes in our look: no box, thin rule at the foot, quiet figures."""
    ax: Axes = figure.add_subplot(*place, **shared)
    ax.set_facecolor(look.paper)
    for side in ("top", "right", "left"):
        ax.spines[side].set_visible(False)
    ax.spines["bottom"].set_color(look.line)
    ax.tick_params(colors=look.quiet, labelsize=8.5, length=3, color=look.line)
    ax.grid(axis="y", color=look.line, linewidth=0.6)
    ax.set_axisbelow(True)
    ax.xaxis.label.set_color(look.ink)
    ax.yaxis.label.set_color(look.ink)
    ax.xaxis.label.set_fontsize(9.5)
    ax.yaxis.label.set_fontsize(9.5)
    return ax
