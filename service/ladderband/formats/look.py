"""One look for every plot: colours, type and axes, light and dark, and the way to bytes.

The two data colours differ in lightness as well as in hue, so they stay apart for colour-blind
readers and in print. Text is drawn as paths: a plot looks the same on a machine without our font.
matplotlib is not thread-safe: every figure is made and written under one lock.

Margins are set here, from the measured width of the figures beside an axis. matplotlib's layout
engines draw every figure twice; without them a plot takes half the time.
"""

from __future__ import annotations

import io
import textwrap
import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg, RendererAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties, findfont, get_font
from matplotlib.ticker import MaxNLocator

from ladderband.formats.sheet import Sheet

mpl.rcParams["svg.fonttype"] = "path"
mpl.rcParams["svg.hashsalt"] = "ladderband"  # same figure, same bytes
mpl.rcParams["font.family"] = "DejaVu Sans"
mpl.rcParams["mathtext.fontset"] = "dejavusans"

PIXELS_PER_INCH = 96.0
_LOCK = threading.Lock()
_RULER = RendererAgg(1, 1, PIXELS_PER_INCH)  # type: ignore[no-untyped-call]
"""Measures text; one for all figures, because matplotlib remembers widths by renderer."""

# pixels
_FOOT, _HEAD, _SIDE, _GAP, _PAD = 46.0, 20.0, 24.0, 14.0, 8.0
_TITLE_LINE, _TITLE_CHARACTER = 19.0, 9.5
_TITLE_LINES = 3
_TICK, _LABEL_CHARACTER = 68.0, 7.6
_USUAL_LEFT = 56.0


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
        )
        head = _head(figure, look, sheet)
        _arrange(figure, head)  # what is drawn may ask for the size of its axes
        draw(figure, look)
        _arrange(figure, head)
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


def _head(figure: Figure, look: Look, sheet: Sheet) -> float:
    """Write the title, on as many lines as it takes; the pixels left free at the top."""
    if not sheet.title:
        return _HEAD
    columns = max(8, int((sheet.width - 2 * _PAD) / _TITLE_CHARACTER))
    lines = textwrap.wrap(
        _plain(sheet.title), columns, max_lines=_TITLE_LINES, placeholder=" \u2026"
    )
    left, top = _PAD / sheet.width, 1 - _PAD / sheet.height
    heading = figure.text(
        left, top, "\n".join(lines), color=look.ink, fontsize=11, weight="bold", va="top"
    )
    heading.set_parse_math(False)
    return _HEAD + len(lines) * _TITLE_LINE


def _arrange(figure: Figure, head: float) -> None:
    """Give the axes all the room that their words and figures leave."""
    width, height = figure.get_size_inches() * PIXELS_PER_INCH
    top, bottom = max(0.5, 1 - head / height), min(0.4, _FOOT / height)
    figure.subplots_adjust(top=top, bottom=bottom, hspace=2 * _GAP / ((top - bottom) * height))
    left, right = (0.0, 0.0) if figure.axes else (_USUAL_LEFT, 0.0)
    for ax in figure.axes:
        _fold(ax)
        with_words = ax.yaxis.get_tightbbox(_RULER)
        if with_words is not None:
            left = max(left, ax.bbox.x0 - with_words.x0)
            right = max(right, with_words.x1 - ax.bbox.x1)
    figure.subplots_adjust(
        left=min(0.45, (left + _PAD) / width), right=max(0.55, 1 - max(right + _PAD, _SIDE) / width)
    )


def _fold(ax: Axes) -> None:
    """Break a label that is longer than its axis; the stroke stays with the unit."""
    label = ax.yaxis.label
    if label.get_window_extent(_RULER).height > ax.bbox.height:
        columns = max(8, int(ax.bbox.height / _LABEL_CHARACTER))
        words = label.get_text().replace(" / ", " /\N{NO-BREAK SPACE}")
        label.set_text("\n".join(textwrap.wrap(words, columns)))


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
    width = figure.get_size_inches()[0] * PIXELS_PER_INCH
    bins = min(9, max(2, int(width / _TICK)))  # figures must not touch on a narrow plot
    ax.xaxis.set_major_locator(MaxNLocator(bins, steps=[1, 2, 2.5, 5, 10]))
    ax.xaxis.label.set_color(look.ink)
    ax.yaxis.label.set_color(look.ink)
    ax.xaxis.label.set_fontsize(9.5)
    ax.yaxis.label.set_fontsize(9.5)
    return ax
