"""What the bench page asks, hands out, follows and drops."""

from __future__ import annotations

import json
import os
import random
import shutil
import subprocess
import sys

import pytest

from browser.chromium import SETTLED
from browser.watched import Watched
from live_service import serving

# --- text to take along ---


def taken(page, what, kind):
    page.select_option("#take-as", kind)
    page.select_option("#take-what", what)
    page.click("#take-copy")
    page.wait_for_function("() => document.querySelector('#take-said').textContent === 'Copied.'")
    return page.evaluate("navigator.clipboard.readText()")


def shown_answer(page, what, label):
    """The answer on the page after a mode got a label that is hard to quote."""
    answers = []
    page.on("response", lambda r: r.url.endswith(f"/v1/{what}") and answers.append(r))
    page.select_option("#take-what", what)
    page.fill("tbody[data-mode='0'] [data-cell=label]", label)
    page.wait_for_function(
        "() => document.querySelector('#take-text').textContent.includes('quoted')"
    )
    return answers[-1].json()


@pytest.mark.skipif(shutil.which("curl") is None, reason="no curl on this machine")
@pytest.mark.parametrize("what", ["bands", "lines"])
def test_the_copied_command_gives_the_same_numbers(page, what):
    shown = shown_answer(page, what, 'it\'s "quoted" $HOME \\n')
    command = taken(page, what, "curl")
    ran = subprocess.run(["sh", "-c", command], capture_output=True, check=True, timeout=60)
    assert json.loads(ran.stdout) == shown


@pytest.mark.parametrize("what", ["bands", "lines"])
def test_the_copied_program_gives_the_same_numbers(page, what):
    shown = shown_answer(page, what, "true 'quoted' \"null\" \\n")
    program = taken(page, what, "python") + "\nprint(json.dumps(answer))\n"
    ran = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, check=True, timeout=60
    )
    assert json.loads(ran.stdout.splitlines()[-1]) == shown


# --- answers that come late ---


def test_answers_that_come_too_late_are_dropped(page):
    """The first band is held back until a newer one is drawn, and then never shown."""
    held = []

    def hold(route):
        if not held:
            held.append(route)
        else:
            route.continue_()

    page.route("**/v1/bands", hold)
    page.fill("#width", "400")
    page.wait_for_timeout(500)
    assert held
    page.fill("#width", "60")
    page.wait_for_function(
        "() => document.querySelector('#take-text').textContent.includes('\"fwhm_cm1\": 60')"
    )
    drawn = page.get_attribute("#plot .curve", "d")
    held[0].continue_()
    page.wait_for_timeout(500)
    assert page.get_attribute("#plot .curve", "d") == drawn
    assert '"fwhm_cm1": 60' in page.inner_text("#take-text")


def test_a_service_that_is_gone_is_told_and_the_plot_stays(page, watched):
    watched.expected.append("ERR_FAILED")
    page.route("**/v1/*", lambda route: route.abort())
    before = page.get_attribute("#plot .curve", "d")
    page.fill("#width", "60")
    page.wait_for_selector("#problems .wrong")
    assert "cannot be reached" in page.inner_text("#problems")
    assert page.is_visible("#stale")
    assert page.get_attribute("#plot .curve", "d") == before
    page.unroute("**/v1/*")
    page.fill("#width", "61")
    page.wait_for_function("() => !document.querySelector('.wrong')")


def test_too_much_work_for_the_wanted_share_gives_the_best_list(page):
    """Ten warm soft modes: a complete list is refused, the page takes the best one and says so."""
    page.click("#paste summary")
    page.fill("#paste-text", "".join(f"{60 + 9 * k} {55 + 8 * k} 1.5\n" for k in range(12)))
    with page.expect_response(
        lambda r: r.url.endswith("/v1/lines") and r.status == 200, timeout=60_000
    ):
        page.click("#paste-use")
    page.wait_for_function("() => document.querySelector('#warnings').textContent !== ''")
    assert page.locator(".wrong").count() == 0


def test_lines_that_take_long_are_waited_for_in_the_open(page):
    """The band is new at once; the lines before it go, also the one under the pointer."""
    page.wait_for_function(SETTLED)
    box = page.locator("#plot").bounding_box()
    label = page.locator("#plot .label").first.bounding_box()
    page.mouse.move(label["x"] + label["width"] / 2, box["y"] + 200)
    assert page.locator("#readout .of-line").count() == 1
    held = []
    page.route("**/v1/lines", lambda route: held.append(route))
    page.fill("#temperature", "450")
    page.get_by_role("button", name="Stop: Lines").wait_for()
    page.wait_for_function("() => document.querySelector('#plot .cold').getAttribute('d') === ''")
    assert page.locator("#readout .of-line").count() == 0
    assert "lines" not in page.inner_text("#accuracy")
    assert not page.is_visible("#stale")
    held[-1].continue_()
    page.wait_for_function(SETTLED)
    assert "lines within" in page.inner_text("#accuracy")
    assert page.inner_text("#progress") == ""
    page.unroute("**/v1/lines")


# --- a service of its own: with a key, and with job records nobody else writes to ---


@pytest.fixture(scope="module")
def own_service(tmp_path_factory):
    """Address and key."""
    data_dir = tmp_path_factory.mktemp("bench")
    made = subprocess.run(
        [sys.executable, "-m", "ladderband", "keys", "add", "bench", "--data-dir", str(data_dir)],
        capture_output=True,
        text=True,
        check=True,
    )
    key = next(word for word in made.stdout.split() if len(word) > 20)
    with serving(data_dir=data_dir) as server:
        yield server.url, key


@pytest.fixture
def keyed_page(browser, own_service):
    url, key = own_service
    script = f"if (location.host) sessionStorage.setItem('ladderband-key', '{key}');"
    watched = Watched(browser, url, script)
    yield watched.page()
    watched.check()


def as_a_job(page):
    """From now on every band is asked for as a job; returns a width nobody asked for before."""

    def prefer(route):
        route.continue_(headers={**route.request.headers, "prefer": "respond-async"})

    page.route("**/v1/bands", prefer)
    return f"{100 + 50 * random.random():.6f}"


def test_long_work_is_followed_as_a_job(keyed_page):
    page = keyed_page
    width = as_a_job(page)
    with page.expect_response("**/v1/bands") as got:
        page.fill("#width", width)
    assert got.value.status == 202
    page.wait_for_function(SETTLED, timeout=120_000)  # batch work is starved by a busy machine
    assert page.inner_text("#progress") == ""
    assert width.rstrip("0") in page.inner_text("#take-text")


def test_a_job_shows_progress_and_can_be_stopped(keyed_page):
    """The end of the job is kept from the page, until the user stops it."""
    page = keyed_page

    def still_running(route):
        if route.request.method == "GET":
            answer = route.fetch()
            route.fulfill(response=answer, json={**answer.json(), "state": "running"})
        else:
            route.fulfill(json={})

    page.route("**/v1/jobs/*", still_running)
    page.fill("#width", as_a_job(page))
    button = page.get_by_role("button", name="Stop: Band")
    button.wait_for()
    assert "Band: " in page.inner_text("#progress")
    with page.expect_request(lambda r: r.method == "DELETE" and "/v1/jobs/" in r.url):
        button.click()
    assert page.inner_text("#progress") == ""
    assert "You stopped the calculation" in page.inner_text("#problems")
    page.unroute("**/v1/jobs/*")


def test_the_page_asks_for_a_key_when_the_service_does(browser, own_service):
    url, key = own_service
    context = browser.new_context()
    context.grant_permissions(["clipboard-read", "clipboard-write"])
    page = context.new_page()
    page.goto(url + "/")
    page.wait_for_selector("#key-form:not([hidden])")
    page.fill("#api-key", "wrong")
    page.keyboard.press("Enter")
    page.wait_for_selector("#key-form:not([hidden])")
    page.fill("#api-key", key)
    page.keyboard.press("Enter")
    page.wait_for_selector("#plot .curve", state="attached")
    assert not page.is_visible("#key-form")
    page.wait_for_function("() => document.querySelectorAll('.wrong').length === 0")
    stores = "JSON.stringify([Object.values(localStorage), document.cookie, location.href])"
    assert key not in page.evaluate(stores)
    command = taken(page, "bands", "curl")
    assert key not in command
    environment = {**os.environ, "LADDERBAND_KEY": key}
    ran = subprocess.run(["sh", "-c", command], capture_output=True, env=environment, check=True)
    assert json.loads(ran.stdout)["accuracy"]["evidence"] == "proven"
    context.close()
