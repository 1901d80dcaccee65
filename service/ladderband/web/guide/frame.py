"""What every page of ours has around its text: title, colours, the way to the other pages."""

from __future__ import annotations

import html

from ladderband.web.guide.source import HOME, contents

_FRAME = """<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>{title}</title>
<link rel="icon" href="{docs}../bench/any/mark.svg">
<link rel="stylesheet" href="{docs}../look.css">
<link rel="stylesheet" href="{docs}page.css">
</head>
<body>
<a class="skip" href="#text">To the text</a>
<header><a href="{docs}./">Ladderband</a> <span>guide</span>
<a class="way" href="{docs}../">Bench</a>
<a class="way pages" href="#pages">All pages</a></header>
<div class="columns">
<main id="text">
{body}
</main>
<nav id="pages" aria-label="Pages">
{pages}
</nav>
</div>
</body>
</html>
"""


def framed(title: str, body: str, slug: str, docs: str = "") -> str:
    """A complete HTML page; ``docs`` leads from its address to ``/docs/``."""
    heading = "Ladderband" if slug == HOME else f"{html.escape(title)} - Ladderband"
    return _FRAME.format(title=heading, docs=docs, body=body, pages=_pages(slug, docs))


def _pages(current: str, docs: str) -> str:
    """Links to all pages; the current one is marked."""
    parts = []
    for heading, links in contents():
        items = "".join(_item(slug, title, current, docs) for slug, title in links)
        parts.append(f"<p>{html.escape(heading)}</p><ul>{items}</ul>")
    return "\n".join(parts)


def _item(slug: str, title: str, current: str, docs: str) -> str:
    mark = ' aria-current="page"' if slug == current else ""
    return f'<li><a href="{docs}{slug}"{mark}>{html.escape(title)}</a></li>'
