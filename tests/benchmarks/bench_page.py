"""How soon the bench page shows something: first plot, and from a change to the redrawn plot.

    python tests/benchmarks/bench_page.py [URL]

Without an address a service is started. Needs chromium. Times are taken by the page itself: from
navigation to the first plot with band and lines, and from the input event to the frame in which
band and lines of the new input are drawn. Least and median of the rounds; on a busy machine only
the least means anything.
"""

from __future__ import annotations

import contextlib
import statistics
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[1]))

from browser.chromium import SETTLED, launched, opened
from live_service import serving

ROUNDS = 12
SIX_MODES = """1480 1410 0.65
1320 1335 0.3
820 775 0.5
640 600 0.25
430 395 0.35
250 230 0.4
"""


@contextlib.contextmanager
def service() -> Iterator[str]:
    if len(sys.argv) > 1:
        yield sys.argv[1]
        return
    with serving() as server:
        yield server.url


def first_plot(browser: Any, address: str, cached: bool) -> list[float]:
    """From navigation to the first plot, ms; with an empty or a filled browser cache."""
    times = []
    context = browser.new_context()
    for _ in range(ROUNDS):
        if not cached:
            context.close()
            context = browser.new_context()
        page = opened(context, address)
        times.append(page.evaluate("performance.getEntriesByName('first-plot')[0].startTime"))
        page.close()
    context.close()
    return times


def redraws(page: Any, change: Any) -> list[float]:
    """From input to redrawn plot, ms."""
    page.evaluate("performance.clearMeasures()")
    for number in range(ROUNDS):
        change(number)
        page.wait_for_function(
            "n => performance.getEntriesByName('change-to-redraw').length > n", arg=number
        )
        page.wait_for_function(SETTLED)
    found = page.evaluate("performance.getEntriesByName('change-to-redraw').map((e) => e.duration)")
    return list(found)


def six_modes(browser: Any, address: str) -> Any:
    page = opened(browser.new_context(), address)
    page.click("#paste summary")
    page.fill("#paste-text", SIX_MODES)
    page.click("#paste-use")
    page.wait_for_function("() => document.querySelectorAll('table.modes tbody').length === 6")
    page.wait_for_function(SETTLED)
    return page


def report(name: str, times: list[float], goal: float) -> None:
    least, middle = min(times), statistics.median(times)
    print(f"{name:<44} least {least:6.0f} ms  median {middle:6.0f} ms  goal {goal:.0f} ms")


def main() -> None:
    with service() as address, launched() as browser:
        report("first plot, empty browser cache", first_plot(browser, address + "/", False), 1500)
        report(
            "first plot, files in the browser's cache",
            first_plot(browser, address + "/", True),
            1500,
        )
        page = six_modes(browser, address + "/")
        shift = "tbody[data-mode='2'] [data-cell=shift]"
        cases = {
            "six modes: a shift": (shift, lambda n: f"{0.51 + 0.01 * n:.2f}"),
            "six modes: the width": ("#width", lambda n: str(121 + n)),
            "six modes: the temperature": ("#temperature", lambda n: str(250 + n)),
        }
        for name, (field, text) in cases.items():
            report(name, redraws(page, lambda n, f=field, t=text: page.fill(f, t(n))), 150)


if __name__ == "__main__":
    main()
