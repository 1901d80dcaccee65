"""The plots of one-dimensional answers and of line lists."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from ladderband.formats.look import Draw, Look, axes, picture
from ladderband.formats.sheet import Sheet
from ladderband.numerics.accuracy import Accuracy, Completeness
from ladderband.numerics.line_list import LineList
from ladderband.usecases.overlaps import OverlapsAnswer, OverlapsQuestion
from ladderband.usecases.wavefunctions import WavefunctionsAnswer, WavefunctionsQuestion

MAX_LABELS = 24
CHARACTER_PX, LABEL_HEIGHT_PX = 6.5, 13.0  # of a label
MAX_STICKS = 4000
MAX_CELLS = 400_000
CELL_PX = (36.0, 16.0)  # least size of a cell in which its number is written
MAX_LEVELS = 40  # of each state; more cannot be told apart on a plot, and each costs time
MAX_CURVE_POINTS = 800


# --- sticks ---


def stick_plot(question: Any, answer: LineList) -> Draw:
    """Lines as sticks, the strongest labelled with their quanta."""

    def draw(figure: Figure, look: Look) -> None:
        ax = axes(figure, look)
        order = np.argsort(-answer.intensity, kind="stable")[:MAX_STICKS]
        position, height = answer.position_cm1[order], answer.intensity[order]
        _sticks(ax, position, height, look.first)
        _frame_sticks(ax, position, height)
        ax.set_xlabel("wavenumber / cm⁻¹")
        ax.set_ylabel("relative intensity")

        def name(k: int) -> str:
            return quanta_text(answer.v_initial[order[k]], answer.v_final[order[k]])

        for k in labelled(ax, position, height, name):
            ax.annotate(
                name(k),
                (position[k], height[k]),
                xytext=(0, 3),
                textcoords="offset points",
                ha="center",
                va="bottom",
                fontsize=9,
                color=look.ink,
            )

    return draw


def _sticks(ax: Axes, position: Any, height: Any, colour: str) -> None:
    """All sticks as one path: a fifth of the time of an object for each."""
    gaps = np.full(len(position), np.nan)
    x = np.column_stack([position, position, gaps]).ravel()
    y = np.column_stack([np.zeros(len(position)), height, gaps]).ravel()
    ax.plot(x, y, color=colour, linewidth=_stick_width(len(position)), solid_capstyle="butt")


def _stick_width(count: int) -> float:
    return 2.2 if count <= 60 else 1.2 if count <= 400 else 0.7


def _frame_sticks(ax: Axes, position: Any, height: Any) -> None:
    if not len(position):
        ax.set_ylim(0.0, 1.0)
        ax.set_xticks([])
        grey = ax.xaxis.label.get_color()
        ax.text(0.5, 0.5, "no lines", transform=ax.transAxes, ha="center", color=grey)
        return
    low, high = float(position.min()), float(position.max())
    margin = 0.04 * (high - low) or max(1.0, 0.01 * abs(low))
    ax.set_xlim(low - margin, high + margin)
    ax.set_ylim(0.0, 1.14 * float(height.max()))


def labelled(ax: Axes, position: Any, height: Any, name: Callable[[int], str]) -> list[int]:
    """Strongest first, those whose label has room beside the labels already placed."""
    (x0, x1), (y0, y1) = ax.get_xlim(), ax.get_ylim()
    px = (position - x0) / (x1 - x0) * ax.bbox.width
    py = (height - y0) / (y1 - y0) * ax.bbox.height
    placed: dict[int, float] = {}  # half the width of each label
    for k in range(min(len(position), 400)):
        if height[k] < 0.02 * height[0] or len(placed) == MAX_LABELS:
            break
        half = 0.5 * (1 + len(name(k))) * CHARACTER_PX
        apart = all(
            abs(px[k] - px[j]) > half + other or abs(py[k] - py[j]) > LABEL_HEIGHT_PX
            for j, other in placed.items()
        )
        # a label must not sit on a taller stick beside it either
        taller = np.abs(px[:k] - px[k]) < half
        if apart and not taller.any():
            placed[k] = half
    return list(placed)


_RAISED = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")
_LOWERED = str.maketrans("0123456789", "₀₁₂₃₄₅₆₇₈₉")


def quanta_text(v_initial: Any, v_final: Any) -> str:
    """The assignment of a line: mode number, final quanta raised, initial quanta lowered.

    Plain text, because laying out one formula takes 10 ms.
    """
    parts = [
        f"{k}{str(n).translate(_RAISED)}{str(v).translate(_LOWERED)}"
        for k, (v, n) in enumerate(zip(v_initial.tolist(), v_final.tolist(), strict=True), start=1)
        if v or n
    ]
    return " ".join(parts[:4]) if parts else "0⁰₀"


# --- overlap tables ---


def overlap_plot(question: OverlapsQuestion, answer: OverlapsAnswer) -> Draw:
    """Franck-Condon factors of the first pair as a table of shades."""

    def draw(figure: Figure, look: Look) -> None:
        table = np.asarray(answer.franck_condon_factors[0], np.float64)
        ax = axes(figure, look)
        ax.grid(visible=False)
        shown = _thinned(table)
        extent = (-0.5, table.shape[1] - 0.5, table.shape[0] - 0.5, -0.5)
        image = ax.imshow(
            shown, cmap=look.shades(), vmin=0.0, extent=extent, aspect="auto", interpolation="none"
        )
        ax.set_xlabel("final quanta")
        ax.set_ylabel("initial quanta")
        ax.xaxis.set_major_locator(MaxNLocator(integer=True, min_n_ticks=1))
        ax.yaxis.set_major_locator(MaxNLocator(integer=True, min_n_ticks=1))
        bar = figure.colorbar(image, ax=ax, pad=0.02, fraction=0.05)
        bar.outline.set_visible(False)
        bar.ax.tick_params(colors=look.quiet, labelsize=8.5, length=0)
        bar.set_label("Franck-Condon factor", color=look.ink, fontsize=9.5)
        rows, columns = table.shape
        if ax.bbox.width >= columns * CELL_PX[0] and ax.bbox.height >= rows * CELL_PX[1]:
            _write_cells(ax, table, look)

    return draw


def _thinned(table: Any) -> Any:
    """At most MAX_CELLS cells: the largest of each block, so that no strong element is lost."""
    step = int(np.ceil(np.sqrt(table.size / MAX_CELLS)))
    if step <= 1:
        return table
    rows = np.maximum.reduceat(table, np.arange(0, table.shape[0], step), axis=0)
    return np.maximum.reduceat(rows, np.arange(0, table.shape[1], step), axis=1)


def _write_cells(ax: Axes, table: Any, look: Look) -> None:
    top = table.max()
    for (row, column), value in np.ndenumerate(table):
        colour = look.paper if value > 0.42 * top else look.ink
        text = "0" if value == 0.0 else f"{value:.3f}" if value >= 5e-4 else f"{value:.0e}"
        ax.text(column, row, text, ha="center", va="center", fontsize=7.5, color=colour)


# --- wavefunctions ---


def wavefunction_plot(question: WavefunctionsQuestion, answer: WavefunctionsAnswer) -> Draw:
    """Two panels on one coordinate: final state above, initial state below."""

    def draw(figure: Figure, look: Look) -> None:
        upper = axes(figure, look, 2, 1, 1)
        lower = axes(figure, look, 2, 1, 2, sharex=upper)
        _panel(
            upper, look, look.second, "final", answer.coordinate,
            answer.potential_final_cm1, answer.level_final_cm1, answer.wavefunction_final,
        )  # fmt: skip
        _panel(
            lower, look, look.first, "initial", answer.coordinate,
            answer.potential_initial_cm1, answer.level_initial_cm1, answer.wavefunction_initial,
        )  # fmt: skip
        upper.tick_params(labelbottom=False)
        lower.set_xlabel("coordinate q′ of the final state")

    return draw


def _panel(
    ax: Axes,
    look: Look,
    colour: str,
    name: str,
    q: Any,
    potential: Any,
    levels: Any,
    functions: Any,
) -> None:
    ax.grid(visible=False)
    spacing = levels[1] - levels[0] if len(levels) > 1 else 2.0 * levels[0]
    thin = -(-len(q) // MAX_CURVE_POINTS)
    q, potential, functions = q[::thin], potential[::thin], functions[:, ::thin]
    top = levels[-1] + 1.2 * spacing
    ax.plot(q, np.where(potential <= top, potential, np.nan), color=colour, linewidth=1.8)
    scale = 0.62 * spacing / max(float(np.abs(functions).max()), 1e-300)
    step = -(-len(levels) // MAX_LEVELS)
    for level, function in zip(levels[::step], functions[::step], strict=True):
        ax.plot(q, level + scale * function, color=colour, linewidth=1.0)
        ax.fill_between(q, level, level + scale * function, color=colour, alpha=0.16, linewidth=0)
    ax.set_ylim(0.0, top)
    ax.set_xlim(float(q[0]), float(q[-1]))
    ax.set_ylabel("energy / cm⁻¹")
    ax.text(
        0.995, 0.97, f"{name} state", transform=ax.transAxes, ha="right", va="top",
        fontsize=9.5, color=colour,
    )  # fmt: skip


def warm() -> None:
    """Draw a plot with everything on it, so that the first one asked for is not slow (fonts)."""
    quanta = np.arange(10, dtype=np.int32)[:, None]
    lines = LineList(
        position_cm1=100.0 * np.arange(10.0),
        intensity=np.linspace(1.0, 0.1, 10),
        v_initial=quanta,
        v_final=quanta,
        completeness=Completeness(1.0, 1.0, 0.0),
        accuracy=Accuracy(0.0, "proven", "none"),
    )
    for kind in ("svg", "png"):
        picture(Sheet("warm", "", title="0123456789"), stick_plot(None, lines), kind)
