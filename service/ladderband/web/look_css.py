"""The colours of the plots as CSS custom properties, so that pages and plots have one look."""

from __future__ import annotations

from dataclasses import fields
from functools import cache

from ladderband.formats.look import LOOKS, Look


@cache
def look_css() -> str:
    """The text of ``/look.css``.

    Light unless the reader's system prefers dark; ``data-theme`` on the root element overrules it.
    """
    light, dark = _properties(LOOKS["light"]), _properties(LOOKS["dark"])
    return (
        f":root{{color-scheme:light;{light}}}\n"
        "@media (prefers-color-scheme:dark){:root:not([data-theme=light])"
        f"{{color-scheme:dark;{dark}}}}}\n"
        f":root[data-theme=dark]{{color-scheme:dark;{dark}}}\n"
    )


def _properties(look: Look) -> str:
    return ";".join(f"--{field.name}:{getattr(look, field.name)}" for field in fields(look))
