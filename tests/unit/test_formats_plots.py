"""Plots: right size, self-contained, the same bytes each time, safe with odd input."""

from __future__ import annotations

import io
import itertools
import xml.etree.ElementTree as ElementTree

import numpy as np
import pytest
from matplotlib import image
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from ladderband.formats.bands import band_plot
from ladderband.formats.look import LOOKS, png, svg
from ladderband.formats.plots import overlap_plot, stick_plot, wavefunction_plot
from ladderband.formats.sheet import Sheet
from ladderband.numerics.accuracy import Accuracy, Completeness, Deadline
from ladderband.numerics.line_list import LineList
from ladderband.numerics.oscillators import one_pair
from ladderband.numerics.transition import Mode
from ladderband.usecases.bands import bands
from ladderband.usecases.limits import Limits
from ladderband.usecases.overlaps import OverlapsQuestion, overlaps
from ladderband.usecases.wavefunctions import WavefunctionsQuestion, wavefunctions
from ladderband.web.bands import BANDS


def line_list(count):
    rng = np.random.default_rng(2)
    return LineList(
        position_cm1=np.sort(rng.uniform(1e4, 2e4, count)),
        intensity=rng.exponential(size=count) ** 4,
        v_initial=np.zeros((count, 2), np.int32),
        v_final=rng.integers(0, 9, (count, 2), dtype=np.int32),
        completeness=Completeness(1.0, 1.0, 0.0),
        accuracy=Accuracy(1e-12, "proven", "ladder"),
    )


def overlap_answer(v_max, digits=None):
    question = OverlapsQuestion(one_pair(1000.0, 900.0, 1.5), v_max, v_max, digits)
    return question, overlaps(question, Limits(), Deadline.none())


def wave_answer(v_max):
    question = WavefunctionsQuestion(Mode(1000.0, 900.0, 1.5), v_max, v_max)
    return question, wavefunctions(question, Limits(), Deadline.none())


def band_answer(name):
    question = BANDS.request.read(dict(BANDS.examples[name])).question
    return question, bands(question, Limits(), Deadline.none())


CASES = {
    "sticks": (stick_plot, (None, line_list(30))),
    "one stick": (stick_plot, (None, line_list(1))),
    "no stick": (stick_plot, (None, line_list(0))),
    "very many sticks": (stick_plot, (None, line_list(20_000))),
    "small table": (overlap_plot, overlap_answer(3)),
    "large table": (overlap_plot, overlap_answer(700)),
    "one cell": (overlap_plot, overlap_answer(0)),
    "table of strings": (overlap_plot, overlap_answer(2, digits=30)),
    "wavefunctions": (wavefunction_plot, wave_answer(4)),
    "very many levels": (wavefunction_plot, wave_answer(200)),
    "long label": (band_plot, band_answer("dye-at-room-temperature")),
    "labelled band": (band_plot, band_answer("cold-emission")),
    "one level": (wavefunction_plot, wave_answer(0)),
}


@pytest.mark.parametrize("theme", LOOKS)
@pytest.mark.parametrize("name", CASES)
def test_draws_in_every_theme(name, theme):
    plot, (question, answer) = CASES[name]
    sheet = Sheet("test", "0123", title="50 $ and Ω", width=640, height=300, theme=theme)
    picture = svg(plot)(sheet, question, answer)
    root = ElementTree.fromstring(picture)
    assert float(root.attrib["width"].removesuffix("pt")) / 0.75 == pytest.approx(640)
    assert float(root.attrib["height"].removesuffix("pt")) / 0.75 == pytest.approx(300)
    assert picture == svg(plot)(sheet, question, answer)
    pixels = image.imread(io.BytesIO(png(plot)(sheet, question, answer)))
    assert pixels.shape[:2] == (300, 640)
    assert pixels.std() > 0.01


def test_is_self_contained():
    plot, (question, answer) = CASES["sticks"]
    picture = svg(plot)(Sheet("test", "0123"), question, answer).decode()
    root = ElementTree.fromstring(picture)
    assert not [e for e in root.iter() if e.tag.endswith("}text")]  # text is drawn as paths
    links = [v for e in root.iter() for k, v in e.attrib.items() if k.endswith("href")]
    assert all(link.startswith("#") for link in links)
    assert len(picture) < 100_000


@pytest.mark.parametrize(
    "title", ["$x", "$$", "a\\b_c^d", "日本 \U0001f600 \ufffe", "<b>&amp;</b>", "x" * 200]
)
def test_odd_titles(title):
    plot, (question, answer) = CASES["sticks"]
    ElementTree.fromstring(svg(plot)(Sheet("test", "0123", title=title), question, answer))


@pytest.mark.parametrize("size", [(160, 120), (4000, 4000)])
def test_smallest_and_largest_size(size):
    plot, (question, answer) = CASES["wavefunctions"]
    sheet = Sheet("test", "0123", width=size[0], height=size[1], title="t")
    ElementTree.fromstring(svg(plot)(sheet, question, answer))


@pytest.mark.parametrize("width", [300, 760, 2000])
@pytest.mark.parametrize("name", ["sticks", "large table", "wavefunctions", "long label"])
def test_words_and_figures_stay_inside_the_picture(name, width):
    plot, (question, answer) = CASES[name]
    sheet = Sheet("test", "0123", width=width, height=max(200, width // 2))
    pixels = image.imread(io.BytesIO(png(plot)(sheet, question, answer)))
    edges = (pixels[0], pixels[-1], pixels[:, 0], pixels[:, -1])
    assert all((edge == pixels[0, 0]).all() for edge in edges)


def test_labels_do_not_overlap():
    figure = Figure(figsize=(4, 3), dpi=96)
    stick_plot(None, line_list(300))(figure, LOOKS["light"])
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    boxes = [text.get_window_extent(canvas.get_renderer()) for text in figure.axes[0].texts]
    assert len(boxes) > 2
    assert not [(a, b) for a, b in itertools.combinations(boxes, 2) if a.overlaps(b)]


def test_long_titles_are_wrapped_and_shortened():
    plot, (question, answer) = CASES["sticks"]
    short, long = (
        image.imread(
            io.BytesIO(png(plot)(Sheet("t", "0", title=text, width=300), question, answer))
        )
        for text in ("word", "word " * 40)
    )
    assert (long[:, 295:] == long[0, 0]).all()
    assert not (short == long).all()


@pytest.mark.parametrize(
    ("example", "name"), [("photoelectron", "ionisation energy"), ("cold-emission", "wavenumber")]
)
def test_the_axis_of_a_band_says_what_runs_along_it(example, name):
    figure = Figure()
    band_plot(*band_answer(example))(figure, LOOKS["light"])
    assert figure.axes[0].get_xlabel().startswith(name)
