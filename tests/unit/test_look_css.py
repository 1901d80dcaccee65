"""The colours of pages are those of plots, readable in both themes."""

import re

import pytest

from ladderband.formats.look import LOOKS
from ladderband.web.app import create_app
from ladderband.web.look_css import look_css

NAMES = ["paper", "ink", "quiet", "line", "first", "second"]


def luminance(colour: str) -> float:
    """Relative luminance of WCAG 2."""
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    linear = [x / 12.92 if x <= 0.04045 else ((x + 0.055) / 1.055) ** 2.4 for x in parts]
    return sum(w * x for w, x in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def contrast(one: str, other: str) -> float:
    low, high = sorted((luminance(one), luminance(other)))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize(("theme", "blocks"), [("light", 1), ("dark", 2)])
def test_every_colour_of_a_theme_is_a_property(theme: str, blocks: int) -> None:
    for name in NAMES:
        assert look_css().count(f"--{name}:{getattr(LOOKS[theme], name)}") >= blocks


@pytest.mark.parametrize("theme", list(LOOKS))
def test_text_colours_have_the_contrast_that_readers_need(theme: str) -> None:
    look = LOOKS[theme]
    for name in ("ink", "quiet", "first"):
        assert contrast(getattr(look, name), look.paper) >= 4.5


def test_service_sends_it() -> None:
    answer = create_app().test_client().get("/look.css")
    assert answer.mimetype == "text/css"
    assert re.search(r":root\[data-theme=dark\]\{[^}]*--paper:#", answer.text)
