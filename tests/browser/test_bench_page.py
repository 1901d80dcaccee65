"""The bench page under the hand: what it shows, and what follows from a change."""

from __future__ import annotations

import httpx
import pytest

from browser.chromium import SETTLED

EXAMPLE_MODES = 4
REFUSED = "status of 422"


def curve(page):
    return page.get_attribute("#plot .curve", "d")


def redrawn(page, before):
    """Wait until the band is another one."""
    page.wait_for_function(
        "before => document.querySelector('#plot .curve').getAttribute('d') !== before", arg=before
    )


def cell(page, mode, name):
    return page.locator(f"tbody[data-mode='{mode}'] [data-cell={name}]")


def requests_of(page):
    """Bodies of the band requests sent from now on."""
    sent = []
    page.on("request", lambda r: r.url.endswith("/v1/bands") and sent.append(r.post_data_json))
    return sent


def test_the_first_load_shows_an_invented_example_with_hot_lines(page):
    assert page.locator("table.modes tbody").count() == EXAMPLE_MODES
    assert page.is_visible("#invented")
    assert page.get_attribute("#plot .cold", "d").count("M") > 10
    assert page.get_attribute("#plot .hot", "d").count("M") > 10
    assert page.locator("#plot .label").count() >= 5
    assert page.locator("#plot .tooth").count() == EXAMPLE_MODES
    text = page.inner_text("#accuracy")
    assert text.count("proven") == 2
    assert "missing from the list at most" in text
    assert page.locator("#lines tbody tr").count() == 25


def test_the_page_says_what_the_service_says(page, watched):
    """Position, intensity and bound of the strongest line in the table are the service's."""
    body = page.evaluate(
        """async () => {
            const main = document.querySelector('script[type=module]').src;
            const { linesBody } = await import(new URL('requests.js', main));
            const { example } = await import(new URL('state.js', main));
            return linesBody(example(), 0.02);
        }"""
    )
    answer = httpx.post(watched.url + "/v1/lines", json=body).json()
    first = page.locator("#lines tbody tr").first
    assert first.locator("th").inner_text() == "0⁰₀"
    position, intensity, _ = first.locator("td").all_inner_texts()
    assert float(position.replace("\u202f", "")) == answer["lines"]["position_cm1"][0]
    assert float(intensity) == pytest.approx(answer["lines"]["intensity"][0], rel=1e-3)


def test_a_changed_cell_changes_the_plot(page):
    before = curve(page)
    cell(page, 0, "shift").fill("1.3")
    redrawn(page, before)


def test_sliders_move_the_numbers_and_the_plot(page):
    for selector, field in (
        ("#temperature-slider", "#temperature"),
        ("[data-slides=width]", "#width"),
        ("tbody[data-mode='1'] [type=range]", "tbody[data-mode='1'] [data-cell=shift]"),
    ):
        before, value = curve(page), page.input_value(field)
        page.focus(selector)
        for _ in range(5):
            page.keyboard.press("ArrowRight")
        redrawn(page, before)
        assert float(page.input_value(field)) > float(value)


def test_the_direction_turns_the_band_round(page):
    sent = requests_of(page)
    before = curve(page)
    page.select_option("[data-member=process]", "emission")
    redrawn(page, before)
    page.wait_for_function("() => document.querySelector('#range-start').value < 18000")
    assert sent[-1]["process"] == "emission"


def test_modes_are_added_and_removed_with_the_keyboard_alone(page):
    page.focus("#add-mode")
    page.keyboard.press("Enter")
    assert page.locator("table.modes tbody").count() == EXAMPLE_MODES + 1
    before = curve(page)
    page.keyboard.type("new one")  # the first cell of the new row has the focus
    for text in ("600", "580", "0.9"):
        page.keyboard.press("Tab")
        page.keyboard.insert_text(text)
    assert cell(page, EXAMPLE_MODES, "label").input_value() == "new one"
    assert cell(page, EXAMPLE_MODES, "shift").input_value() == "0.9"
    redrawn(page, before)
    before = curve(page)
    page.keyboard.press("Tab")
    page.keyboard.press("Enter")  # remove
    assert page.locator("table.modes tbody").count() == EXAMPLE_MODES
    redrawn(page, before)
    assert page.evaluate("document.activeElement.className") == "remove"


def test_every_control_is_reached_by_tab_and_none_holds_the_focus(page):
    page.evaluate("document.querySelectorAll('details').forEach((each) => { each.open = true; })")
    wanted = page.evaluate(
        """() => [...document.querySelectorAll('a, button, input, select, textarea, summary, pre, #plot')]
            .filter((each) => !each.disabled && each.checkVisibility()).length"""
    )
    reached = page.evaluate("window.reached = new Set(); 0")
    for _ in range(wanted + 3):
        page.keyboard.press("Tab")
        page.evaluate("reached.add(document.activeElement)")
    reached = page.evaluate("[...reached].filter((each) => each !== document.body).length")
    assert reached >= wanted


def test_arrow_keys_step_through_the_lines(page):
    page.focus("#plot")
    page.keyboard.press("ArrowRight")
    first = page.inner_text("#readout")
    assert first.startswith("0⁰₀")
    assert "22\u202f000.0 cm⁻¹" in first
    assert "within" in first
    assert "proven" in first
    assert "Band at" in first
    page.keyboard.press("ArrowRight")
    second = page.inner_text("#readout")
    assert second != first
    assert page.inner_text("#spoken").split()[0] == second.split()[0]
    assert page.locator("#plot .selection .pointer").count() == 1
    page.keyboard.press("Escape")
    assert page.inner_text("#readout").startswith("Point at")


def test_the_line_under_the_pointer_is_read_out(page):
    page.focus("#plot")
    place = page.evaluate(
        """() => {
            const box = document.querySelector('#plot').getBoundingClientRect();
            const labels = [...document.querySelectorAll('#plot .label')];
            const label = labels.find((each) => each.textContent === '0⁰₀');
            const [x, y] = ['x', 'y'].map((name) => Number(label.getAttribute(name)));
            return [box.left + x, box.top + y + 40];
        }"""
    )
    page.mouse.move(*place)
    assert page.inner_text("#readout").startswith("0⁰₀")


def test_dragging_zooms_and_fit_comes_back(page):
    sent = requests_of(page)
    box = page.locator("#plot").bounding_box()
    y = box["y"] + 100
    page.mouse.move(box["x"] + 200, y)
    page.mouse.down()
    page.mouse.move(box["x"] + 320, y, steps=4)
    page.mouse.up()
    page.wait_for_function("() => document.querySelector('#range-start').value > 20600")
    assert 500 < sent[-1]["axis"]["stop"] - sent[-1]["axis"]["start"] < 2500
    before = curve(page)
    page.click("#zoom-fit")
    redrawn(page, before)
    page.focus("#plot")
    before = curve(page)
    page.keyboard.press("+")
    redrawn(page, before)


def test_a_wrong_cell_says_so_beside_it_and_the_last_plot_stays(page, watched):
    watched.expected.append(REFUSED)
    page.select_option("#waves-mode", "1")  # so that lines, band and wavefunctions complain
    before = curve(page)
    cell(page, 1, "shift").fill("-1")
    page.wait_for_selector("tbody[data-mode='1'] .wrong")
    page.wait_for_function(SETTLED)
    note = page.locator(".wrong")
    assert note.count() == 1  # although three requests complained
    assert "-1 is outside the allowed range" in note.inner_text()
    assert "0 ≤ x ≤ 2000" in note.inner_text()
    field = cell(page, 1, "shift")
    assert field.get_attribute("aria-invalid") == "true"
    assert page.locator(f"[id='{field.get_attribute('aria-describedby')}']").count() == 1
    assert curve(page) == before
    assert page.is_visible("#stale")
    field.fill("0.4")
    page.wait_for_function(SETTLED)
    assert curve(page) != before
    assert page.locator(".wrong").count() == 0
    assert not page.is_visible("#stale")


def test_what_is_no_number_is_refused_by_the_service_in_its_words(page, watched):
    watched.expected.append(REFUSED)
    for field, text in (("#width", ""), ("#temperature", "abc"), ("#width", "1,5")):
        page.fill(field, text)
        page.wait_for_selector(f"{field}[aria-invalid]")
        assert "Allowed" in page.inner_text(
            f"label:has({field}) + .wrong, .slide:has({field}) + .wrong"
        )
        page.fill(field, "100")
        page.wait_for_function("() => !document.querySelector('[aria-invalid]')")


def test_absolute_scales_ask_for_a_moment_and_for_caution(page, watched):
    watched.expected.append(REFUSED)
    page.click("#more summary")
    assert not page.is_visible("#caution")
    before = curve(page)
    page.select_option("[data-member=scale]", "molar_absorption_coefficient")
    assert page.is_visible("#caution")
    page.fill("[data-member=moment]", "4.2")
    redrawn(page, before)
    page.wait_for_function(
        "() => document.querySelector('#accuracy').textContent.includes('L mol')"
    )


def test_another_unit_keeps_the_band_in_view(page):
    page.click("#more summary")
    for unit in ("nm", "eV", "THz"):
        before = curve(page)
        page.select_option("[data-member=unit]", unit)
        redrawn(page, before)
        assert page.get_attribute("#plot .cold", "d").count("M") > 10
    assert page.inner_text(".axis-unit") == "THz"


def test_wavefunctions_follow_the_chosen_mode(page):
    page.wait_for_selector("#waves .wave")
    levels = page.locator("#waves .wave").count()
    assert levels == 5 + 7
    before = page.inner_html("#waves")
    page.click("tbody[data-mode='2'] .ladders")
    page.wait_for_function(
        "before => document.querySelector('#waves').innerHTML !== before", arg=before
    )
    assert "in-plane bend" in page.get_attribute("#waves svg", "aria-label")
    assert "proven" in page.inner_text("#waves-said")


def test_the_other_kind_of_shift_is_the_same_transition(page):
    before = curve(page)
    page.select_option("[data-member=shift]", "displacement")
    assert float(cell(page, 0, "shift").input_value()) == pytest.approx((2 * 0.65) ** 0.5, rel=1e-4)
    page.wait_for_timeout(300)
    assert curve(page) == before


def test_a_click_in_the_table_selects_the_line_in_the_plot(page):
    page.click("#lines [data-line] >> nth=3")
    assert page.get_attribute("#lines [data-line] >> nth=3", "aria-pressed") == "true"
    name = page.inner_text("#lines [data-line] >> nth=3")
    assert page.inner_text("#readout").startswith(name)


def test_long_numbers_are_whole_only_while_they_are_edited(page):
    field = cell(page, 1, "final")
    field.fill("774.123456789")
    page.focus("#width")
    assert field.input_value() == "774.123"
    page.wait_for_function(SETTLED)
    assert "774.123456789" in page.inner_text("#take-text")
    field.focus()
    assert field.input_value() == "774.123456789"
    cell(page, 1, "shift").fill("1.23456789e-12")
    page.focus("#width")
    assert cell(page, 1, "shift").input_value() == "1.2e-12"


def test_lines_that_are_refused_are_not_those_of_the_band_before(page, watched):
    """The band is new, the lines are not to be had: none are shown rather than old ones."""
    watched.expected.append(REFUSED)
    refusal = {"type": "/problems/domain", "status": 422, "detail": "No lines today."}
    page.route("**/v1/lines", lambda route: route.fulfill(status=422, json=refusal))
    before = curve(page)
    page.fill("#temperature", "500")
    page.wait_for_function(
        "() => document.querySelector('#problems').textContent.includes('No lines')"
    )
    page.wait_for_function(SETTLED)
    assert curve(page) != before
    assert page.get_attribute("#plot .cold", "d") == ""
    assert page.locator("#lines tbody tr").count() == 0
    assert not page.is_visible("#stale")


# --- the state in the address ---


def test_a_link_opens_the_same_state(page, watched):
    before = curve(page)
    cell(page, 2, "final").fill("333")
    cell(page, 2, "label").fill("Δ weiß")
    page.fill("#width", "77")
    page.keyboard.press("Tab")
    redrawn(page, before)
    page.select_option("#take-as", "link")
    page.click("#take-copy")
    link = page.evaluate("navigator.clipboard.readText()")
    other = watched.page(link.removeprefix(watched.url))
    assert cell(other, 2, "final").input_value() == "333"
    assert cell(other, 2, "label").input_value() == "Δ weiß"
    assert other.input_value("#width") == "77"
    same = "want => document.querySelector('#accuracy').textContent === want"
    other.wait_for_function(same, arg=page.text_content("#accuracy"))
    assert curve(other) == curve(page)


def test_reload_and_back_bring_states_back(page):
    for text in ("first", "second"):
        cell(page, 0, "label").fill(text)
        steps = page.evaluate("history.length")
        page.keyboard.press("Tab")
        page.wait_for_function("steps => history.length > steps", arg=steps)
    page.go_back()
    assert cell(page, 0, "label").input_value() == "first"
    page.reload()
    assert cell(page, 0, "label").input_value() == "first"
    page.go_forward()
    assert cell(page, 0, "label").input_value() == "second"


def test_what_was_typed_survives_a_reload_without_leaving_the_field(page):
    steps = page.evaluate("history.length")
    cell(page, 0, "label").fill("half")
    page.wait_for_function("steps => history.length > steps", arg=steps)
    page.reload()
    assert cell(page, 0, "label").input_value() == "half"


def test_the_wheel_zooms_where_the_pointer_is_and_is_one_step_back(page):
    page.wait_for_function(SETTLED)
    steps = page.evaluate("history.length")
    box = page.locator("#plot").bounding_box()
    page.mouse.move(box["x"] + 300, box["y"] + 100)
    page.mouse.wheel(0, -300)
    page.wait_for_timeout(200)
    assert page.evaluate("history.length") == steps  # without the focus the wheel is the page's
    page.focus("#plot")
    before = curve(page)
    for _ in range(4):
        page.mouse.wheel(0, -100)
    redrawn(page, before)
    page.wait_for_function("steps => history.length === steps + 1", arg=steps)
    page.wait_for_function(SETTLED)
    assert float(page.input_value("#range-stop")) - float(page.input_value("#range-start")) < 4000


@pytest.mark.parametrize("fragment", ["%00%ff", "eyJtb2RlcyI6W119"])
def test_a_broken_link_opens_a_page_all_the_same(watched, fragment):
    page = watched.page(f"/#{fragment}")
    assert page.locator("table.modes tbody").count() == EXAMPLE_MODES
