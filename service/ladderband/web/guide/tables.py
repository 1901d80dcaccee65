"""Tables a page takes from the program itself: a fenced block with the table's name alone."""

from __future__ import annotations

import dataclasses
import html
from collections.abc import Callable, Iterable, Sequence

from ladderband.settings import Settings, variable
from ladderband.web.problems import all_problems
from ladderband.web.resources import RESOURCES


def table(head: Sequence[str], rows: Iterable[Sequence[str]], caption: str = "") -> str:
    """A table as HTML; its cells are HTML already. It can be scrolled with the keyboard."""
    top = "".join(f'<th scope="col">{name}</th>' for name in head)
    body = "".join("<tr>" + "".join(f"<td>{c}</td>" for c in row) + "</tr>" for row in rows)
    said = f"<caption>{caption}</caption>" if caption else ""
    return (
        f'<div class="wide" tabindex="0"><table>{said}<thead><tr>{top}</tr></thead>'
        f"<tbody>{body}</tbody></table></div>"
    )


def _problems() -> str:
    rows = (
        (
            str(problem.status),
            f'<a href="../problems/{problem.slug}">{problem.slug}</a>',
            html.escape(problem.meaning),
        )
        for problem in all_problems()
    )
    return table(("status", "type", "meaning"), rows)


def _resources() -> str:
    rows = (
        (
            f"<code>{resource.path}</code>",
            "GET, POST" if resource.short_form is not None else "POST",
            ", ".join(resource.offered),
        )
        for resource in RESOURCES
    )
    return table(("resource", "methods", "formats"), rows)


def _settings() -> str:
    rows = (
        (
            f"<code>--{field.name.replace('_', '-')}</code>",
            f"<code>{variable(field.name)}</code>",
            html.escape(f"{field.default} {field.metadata['unit']}".strip()),
            html.escape(field.metadata["meaning"]),
        )
        for field in dataclasses.fields(Settings)
    )
    return table(("option", "variable", "default", "meaning"), rows)


TABLES: dict[str, Callable[[], str]] = {
    "problems": _problems,
    "resources": _resources,
    "settings": _settings,
}
