"""A page of the guide as HTML."""

from __future__ import annotations

import html
import json
import re
from collections.abc import Mapping, Sequence
from functools import cache
from typing import Any

from markdown_it import MarkdownIt
from markdown_it.renderer import RendererHTML
from markdown_it.token import Token

from ladderband.settings import Settings
from ladderband.web.guide.answers import SIZES, Answered, answers, filled
from ladderband.web.guide.frame import framed
from ladderband.web.guide.source import SNIPPETS, block, markdown
from ladderband.web.guide.tables import TABLES, table

ADDRESS = "http://127.0.0.1:8080"
"""What ``ladderband serve`` prints when nothing is set."""

WIDTH = 88
SHOWN_ROWS = 8


@cache
def page(slug: str, settings: Settings) -> str:
    """The complete page, computed once a process."""
    source = filled(slug, settings)
    env = {"slug": slug, "answers": answers(slug)}
    reader = _reader()
    tokens = reader.parse(source, env)
    title = next(tokens[k + 1].content for k, token in enumerate(tokens) if token.tag == "h1")
    return framed(title, reader.renderer.render(tokens, reader.options, env), slug)


@cache
def _reader() -> MarkdownIt:
    reader = markdown()
    reader.add_render_rule("fence", _fence)
    reader.add_render_rule("heading_open", _heading)
    reader.add_render_rule("table_open", lambda *_: '<div class="wide" tabindex="0"><table>')
    reader.add_render_rule("table_close", lambda *_: "</table></div>")
    return reader


def _heading(
    self: RendererHTML, tokens: Sequence[Token], at: int, options: Any, env: Mapping[str, Any]
) -> str:
    words = re.findall(r"[a-z0-9]+", tokens[at + 1].content.lower())
    return f'<{tokens[at].tag} id="{"-".join(words)}">'


def _fence(
    self: RendererHTML, tokens: Sequence[Token], at: int, options: Any, env: Mapping[str, Any]
) -> str:
    info, content = tokens[at].info, tokens[at].content
    found = block(info, content)
    if found is not None:
        # the words of the picture are those of the filled text
        return _answered(env["slug"], env["answers"][found.name], found.picture)
    match info.split():
        case ["include", name, _]:
            return code((SNIPPETS / name).read_text("utf-8"))
        case [name] if name in TABLES:
            return TABLES[name]()
    return code(content)


def _answered(slug: str, found: Answered, words: str) -> str:
    shown = code(curl(found.block.resource, found.body))
    if found.block.resource == "sweeps":
        return shown + _rows(found.document)
    if not words:
        return shown
    return shown + _figure(f"pictures/{slug}/{found.block.name}", html.escape(words))


def _figure(address: str, words: str) -> str:
    """A picture for wide and narrow, light and dark screens; the browser takes one."""
    dark = "(prefers-color-scheme: dark)"
    narrow = "(max-width: 34rem)"
    return (
        "<figure><picture>"
        f"{_source(address, 'dark', 'narrow', f'{dark} and {narrow}')}"
        f"{_source(address, 'dark', 'wide', dark)}{_source(address, 'light', 'narrow', narrow)}"
        f'<img src="{address}-light-wide.svg" alt="{words}" {_size("wide")} loading="lazy">'
        f"</picture><figcaption>{words} <span>The same request with <code>?format=svg</code>.</span>"
        "</figcaption></figure>"
    )


def _source(address: str, theme: str, size: str, media: str) -> str:
    return f'<source srcset="{address}-{theme}-{size}.svg" media="{media}" {_size(size)}>'


def _size(size: str) -> str:
    return 'width="{}" height="{}"'.format(*SIZES[size])


def code(text: str) -> str:
    """A block of code; it can be scrolled with the keyboard."""
    return f'<pre tabindex="0"><code>{html.escape(text.rstrip())}</code></pre>'


def curl(resource: str, body: Mapping[str, Any]) -> str:
    """The command that sends a request."""
    return (
        f"curl -s {ADDRESS}/v1/{resource} -H 'Content-Type: application/json' -d '{pretty(body)}'"
    )


def pretty(value: Any, indent: int = 0, name: str = "") -> str:
    """JSON with as much on a line as fits; ``name`` stands before the value on its line."""
    flat = name + json.dumps(value, ensure_ascii=False)
    if not isinstance(value, dict | list) or indent + len(flat) <= WIDTH:
        return flat
    inner = "\n" + " " * (indent + 2)
    if isinstance(value, dict):
        parts = [pretty(of, indent + 2, f"{json.dumps(key)}: ") for key, of in value.items()]
    else:
        parts = [pretty(entry, indent + 2) for entry in value]
    lines = _packed(parts, WIDTH - indent - 3)
    opening, closing = "{}" if isinstance(value, dict) else "[]"
    return f"{name}{opening}{inner}{f',{inner}'.join(lines)}\n{' ' * indent}{closing}"


def _packed(parts: Sequence[str], width: int) -> list[str]:
    """Parts of one line joined to lines of at most ``width``; longer parts stay alone."""
    lines = [parts[0]]
    for part in parts[1:]:
        joined = f"{lines[-1]}, {part}"
        if "\n" in joined or len(joined) > width:
            lines.append(part)
        else:
            lines[-1] = joined
    return lines


def _rows(columns: Mapping[str, Sequence[Any]]) -> str:
    """The first rows of a sweep's table."""
    count = len(columns["point"])
    shown = min(SHOWN_ROWS, count)
    rows = ([_cell(column[k]) for column in columns.values()] for k in range(shown))
    caption = f"The first {shown} of {count} rows of the table"
    return table([html.escape(name) for name in columns], rows, caption)


def _cell(value: Any) -> str:
    return html.escape(f"{value:.6g}" if isinstance(value, float) else json.dumps(value))
