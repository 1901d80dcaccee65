"""Pages whose console, policy and requests are watched while a test uses them."""

from __future__ import annotations

from typing import Any
from urllib.parse import urlsplit

from browser.chromium import opened

WATCH = """
window.violations = [];
addEventListener("securitypolicyviolation", (event) => violations.push(event.violatedDirective));
"""


class Watched:
    """Pages whose console, policy and requests are watched.

    Chromium itself writes an error for every answer that is no success; a test that provokes one
    says so in ``expected``.
    """

    def __init__(self, browser: Any, url: str, script: str = "") -> None:
        self.browser, self.url, self.script = browser, url, WATCH + script
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
        context.add_init_script(self.script)
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
