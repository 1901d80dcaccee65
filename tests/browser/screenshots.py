"""Pictures of the bench page for looking at: python tests/browser/screenshots.py OUTFOLDER [URL]."""

from __future__ import annotations

import contextlib
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parents[1]))

from browser.chromium import SETTLED, launched, opened
from live_service import serving

SIZES = {"desktop": (1440, 1000), "laptop": (1100, 800), "phone": (375, 812)}
MEASURED = "cm-1;absorbance\n" + "".join(
    f"{x};{1 / (1 + ((x - 22300) / 500) ** 2):.4f}\n" for x in range(20600, 28000, 60)
)
QCSCHEMA = Path(__file__).parents[1] / "reference/data/qcschema"


@contextlib.contextmanager
def service() -> Iterator[str]:
    if len(sys.argv) > 2:
        yield sys.argv[2]
        return
    with serving() as server:
        yield server.url


def settle(page: Any) -> None:
    page.wait_for_timeout(300)
    page.wait_for_function(SETTLED)


def busy_page(page: Any) -> None:
    """Everything that can be out at once: measured band, selected line, wrong cell, caution."""
    page.evaluate("document.querySelectorAll('details').forEach((d) => { d.open = true; })")
    file = {"name": "invented.csv", "mimeType": "text/csv", "buffer": MEASURED.encode()}
    page.set_input_files("#measured-file", file)
    page.focus("#plot")
    for _ in range(4):
        page.keyboard.press("ArrowRight")
    page.select_option("[data-member=scale]", "molar_absorption_coefficient")
    page.fill("[data-member=moment]", "4.2")
    settle(page)
    page.fill("tbody[data-mode='1'] [data-cell=final]", "77five")
    page.wait_for_selector("tbody[data-mode='1'] .wrong")


def molecule_page(page: Any) -> None:
    """A photoelectron band from two results."""
    page.select_option("[data-member=process]", "photoelectron")
    page.click("#states summary")
    page.set_input_files("#state-initial", QCSCHEMA / "water_neutral.json")
    page.set_input_files("#state-final", QCSCHEMA / "water_cation.json")
    page.wait_for_selector("#mixing:not([hidden])")
    page.fill("#width", "300")
    settle(page)


SCENES: dict[str, Any] = {"first": lambda page: None, "busy": busy_page, "molecule": molecule_page}


def main(folder: Path) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    with service() as address, launched() as browser:
        for scheme in ("light", "dark"):
            for size, (width, height) in SIZES.items():
                for name, prepare in SCENES.items():
                    context = browser.new_context(
                        viewport={"width": width, "height": height}, color_scheme=scheme
                    )
                    page = opened(context, address + "/")
                    settle(page)
                    prepare(page)
                    page.screenshot(path=folder / f"{name}-{size}-{scheme}.png", full_page=True)
                    context.close()


if __name__ == "__main__":
    main(Path(sys.argv[1]))
