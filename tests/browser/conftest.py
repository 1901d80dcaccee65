"""The bench page in a real browser. Every test also fails on errors in the browser's console, on
anything the page's own policy had to stop, and on a request to another host."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from browser.chromium import CHROMIUM, launched
from browser.watched import Watched


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    """One browser for the tests of a module; only while it is open Playwright's loop runs."""
    if not Path(CHROMIUM).exists():
        pytest.skip("no chromium: apt-get install chromium")
    with launched() as found:
        yield found


@pytest.fixture(scope="module")
def watching(browser: Any, live_server: Any) -> Watched:
    """The profiles of the browser that the tests of a module share."""
    return Watched(browser, live_server.url)


@pytest.fixture
def watched(watching: Watched) -> Iterator[Watched]:
    """Tabs of the service, watched."""
    yield watching
    watching.check()


@pytest.fixture
def page(watched: Watched) -> Any:
    """The page with its example."""
    return watched.page()


@pytest.fixture
def drop() -> Callable[..., None]:
    """Drops files (name -> text) on an element, as a hand with a mouse would."""

    def dropped(page: Any, selector: str, files: dict[str, str]) -> None:
        carried = page.evaluate_handle(
            """(files) => {
                const carried = new DataTransfer();
                for (const [name, text] of Object.entries(files)) carried.items.add(new File([text], name));
                return carried;
            }""",
            files,
        )
        for event in ("dragover", "drop"):
            page.dispatch_event(selector, event, {"dataTransfer": carried})

    return dropped
