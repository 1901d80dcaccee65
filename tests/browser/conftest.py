"""The bench page in a real browser. Every test also fails on errors in the browser's console, on
anything the page's own policy had to stop, and on a request to another host."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import pytest

from browser.chromium import CHROMIUM, launched, opened

WATCH = """
window.violations = [];
addEventListener("securitypolicyviolation", (event) => violations.push(event.violatedDirective));
"""


@pytest.fixture(scope="module")
def browser() -> Iterator[Any]:
    """One browser for the tests of a module; only while it is open Playwright's loop runs."""
    if not Path(CHROMIUM).exists():
        pytest.skip("no chromium: apt-get install chromium")
    with launched() as found:
        yield found


class Watched:
    """Pages whose console, policy and requests are watched.

    Chromium itself writes an error for every answer that is no success; a test that provokes one
    says so in ``expected``.
    """

    def __init__(self, browser: Any, url: str) -> None:
        self.browser, self.url = browser, url
        self.contexts: dict[str, Any] = {}
        self.pages: list[Any] = []
        self.complaints: list[str] = []
        self.expected: list[str] = []

    def page(self, address: str = "/", **options: Any) -> Any:
        """A new tab; tabs with the same options share a browser's profile, and so its cache."""
        name = repr(options)
        if name not in self.contexts:
            self.contexts[name] = self._context(
                {"viewport": {"width": 1280, "height": 900}, **options}
            )
        page = opened(self.contexts[name], self.url + address)
        self.pages.append(page)
        return page

    def _context(self, options: dict[str, Any]) -> Any:
        context = self.browser.new_context(**options)
        context.grant_permissions(["clipboard-read", "clipboard-write"])
        context.add_init_script(WATCH)
        context.set_default_timeout(20_000)
        context.on("console", self._console)
        context.on("weberror", lambda error: self.complaints.append(str(error.error)))
        context.on("request", lambda request: self._request(request.url))
        return context

    def _console(self, message: Any) -> None:
        if message.type in ("error", "warning"):
            self.complaints.append(f"{message.type}: {message.text}")

    def _request(self, url: str) -> None:
        if urlsplit(url).scheme not in ("blob", "data") and not url.startswith(self.url):
            self.complaints.append(f"asked another host: {url}")

    def check(self) -> None:
        """Nothing but what was expected went wrong; the tabs are closed."""
        for page in self.pages:
            stopped = page.evaluate("window.violations")
            self.complaints += [f"stopped by the policy: {name}" for name in stopped]
            page.close()
        left = [c for c in self.complaints if not any(word in c for word in self.expected)]
        self.pages, self.complaints, self.expected = [], [], []
        assert left == []


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
