"""A browser for tests, benchmarks and screenshots: the system's chromium, never one downloaded."""

from __future__ import annotations

import contextlib
import shutil
from collections.abc import Iterator

from playwright.sync_api import Browser, BrowserContext, Page, sync_playwright

ARGUMENTS = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]
CHROMIUM = shutil.which("chromium") or "/usr/bin/chromium"
SETTLED = "() => document.querySelector('#plot[aria-busy=false] .curve')"
"""True once band and lines of the newest input are drawn."""


@contextlib.contextmanager
def launched() -> Iterator[Browser]:
    """A browser with a profile of its own."""
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=CHROMIUM, args=ARGUMENTS)
        yield browser
        browser.close()


def opened(context: BrowserContext, address: str) -> Page:
    """The page, once its first plot is there."""
    page = context.new_page()
    page.goto(address)
    page.wait_for_function(SETTLED)
    return page
