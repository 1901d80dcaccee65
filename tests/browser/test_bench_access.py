"""The bench page for everybody: axe-core's rules, small screens, dark, no haste."""

from __future__ import annotations

import json

import pytest
from axe_playwright_python.sync_playwright import Axe

PHONE = {"width": 375, "height": 812}
OPEN_ALL = "() => document.querySelectorAll('details').forEach((d) => { d.open = true; })"


def violations(page):
    found = Axe().run(page)
    return [
        (entry["id"], [node["html"][:120] for node in entry["nodes"]])
        for entry in found.response["violations"]
    ]


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("viewport", [{"width": 1280, "height": 900}, PHONE], ids=["desk", "phone"])
def test_no_rule_of_axe_is_broken(watched, drop, scheme, viewport):
    watched.expected.append("status of 422")
    page = watched.page(color_scheme=scheme, viewport=viewport)
    page.evaluate(OPEN_ALL)
    # with everything out that the page can show: a measured band, a selected line, errors, caution
    drop(page, "#plot", {"a.csv": "21000,1\n22000,3\n23000,2\n"})
    page.focus("#plot")
    page.keyboard.press("ArrowRight")
    page.select_option("[data-member=scale]", "cross_section")
    page.fill("tbody[data-mode='0'] [data-cell=shift]", "-1")
    page.wait_for_selector("tbody[data-mode='0'] .wrong")
    assert violations(page) == []


def test_nothing_sticks_out_of_the_window(watched):
    page = watched.page(viewport={"width": 1440, "height": 812})
    page.evaluate(OPEN_ALL)
    for width in (1440, 1024, 768, 375, 320):
        page.set_viewport_size({"width": width, "height": 812})
        assert page.evaluate("document.documentElement.scrollWidth") <= width


def test_on_a_phone_the_plot_stays_in_sight_beside_the_sliders(watched):
    page = watched.page(viewport=PHONE)
    page.locator("tbody[data-mode='3'] [type=range]").scroll_into_view_if_needed()
    page.evaluate("scrollBy(0, 300)")
    box = page.locator("#plot").bounding_box()
    assert box["y"] == pytest.approx(0, abs=2)
    assert box["height"] < 300


def test_the_colours_are_those_of_the_plots_and_can_be_switched(watched):
    from ladderband.formats.look import LOOKS

    page = watched.page(color_scheme="light")
    colour = "getComputedStyle(document.documentElement).getPropertyValue('--{}')"
    for theme in ("light", "dark", "light"):
        page.select_option("#theme", theme)
        for name in ("paper", "ink", "first", "second"):
            assert page.evaluate(colour.format(name)) == getattr(LOOKS[theme], name)
    page.select_option("#theme", "dark")
    page.reload()
    assert page.evaluate(colour.format("paper")) == LOOKS["dark"].paper
    page.select_option("#theme", "")


def test_lines_of_the_two_kinds_differ_in_more_than_hue(page):
    style = "getComputedStyle(document.querySelector('#plot .{}')).strokeDasharray"
    assert page.evaluate(style.format("cold")) == "none"
    assert page.evaluate(style.format("hot")) != "none"
    assert "a2.5" in page.get_attribute("#plot .rings", "d")


def test_nothing_moves_for_those_who_asked_for_rest(watched):
    page = watched.page(reduced_motion="reduce")
    moving = """() => [...document.querySelectorAll('*')].filter((e) => {
        const style = getComputedStyle(e);
        return parseFloat(style.transitionDuration) > 0 || style.animationName !== 'none';
    }).length"""
    assert page.evaluate(moving) == 0


def test_the_first_plot_is_there_soon(page):
    """Lenient, for busy machines; tests/benchmarks/bench_page.py measures against 1.5 s."""
    assert page.evaluate("performance.getEntriesByName('first-plot')[0].startTime") < 10_000


def test_axe_itself_would_notice(page):
    """The check can fail: an image without a text is found."""
    page.evaluate("document.querySelector('main').append(document.createElement('img'))")
    assert "image-alt" in json.dumps(violations(page))
