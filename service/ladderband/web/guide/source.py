"""What stands in a page's file: Markdown, requests, placeholders."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import orjson
from markdown_it import MarkdownIt

TEXTS = Path(__file__).parent / "texts"
SNIPPETS = Path(__file__).parent / "snippets"
HOME = "index"


class SourceError(ValueError):
    """A page's file cannot be read; the message says where and why."""


@dataclass(frozen=True)
class Block:
    """A fenced block that is computed: a request of one resource, or a sweep."""

    name: str
    resource: str
    """Word of the resource's path; ``sweeps`` for a sweep."""
    body: dict[str, Any]
    picture: str = ""
    """What the picture shows; empty: none is drawn."""
    example: str = ""
    merge: str = ""


def names() -> list[str]:
    """Every page but the first, in the order the first page links them."""
    linked = [slug for _, links in contents() for slug, _ in links]
    return [slug for slug in linked if (TEXTS / f"{slug}.md").is_file()]


@cache
def contents() -> list[tuple[str, list[tuple[str, str]]]]:
    """The first page's headings, each with the (address, title) of the pages linked under it."""
    found: list[tuple[str, list[tuple[str, str]]]] = []
    tokens = markdown().parse(text(HOME))
    for at, token in enumerate(tokens):
        if token.type == "heading_open" and token.tag == "h2":
            found.append((tokens[at + 1].content, []))
        links = token.children or []
        for k, child in enumerate(links):
            if child.type == "link_open" and found:
                found[-1][1].append((str(child.attrs["href"]), links[k + 1].content))
    return found


def text(slug: str) -> str:
    """The file of one page."""
    return (TEXTS / f"{slug}.md").read_text("utf-8")


def markdown() -> MarkdownIt:
    """Markdown with tables and without raw HTML."""
    return MarkdownIt("commonmark", {"html": False}).enable("table")


def blocks(source: str) -> Iterator[Block]:
    """Every block of a page that is computed, in order."""
    for token in markdown().parse(source):
        if token.type == "fence" and (found := block(token.info, token.content)) is not None:
            yield found


def block(info: str, content: str) -> Block | None:
    """The block behind a fence; None when it is not one to compute.

    Raises
    ------
    SourceError
        The block is malformed.
    """
    match info.split():
        case ["request", resource, name]:
            return _read(name, resource, content)
        case ["sweep", name]:
            return _read(name, "sweeps", content)
        case ["request" | "sweep", *_]:
            raise SourceError(f"{info!r}: write request RESOURCE NAME, or sweep NAME.")
    return None


def _read(name: str, resource: str, content: str) -> Block:
    head, *rest = re.split(r"^(?=\{)", content, maxsplit=1, flags=re.MULTILINE)
    options = dict(_options(name, head))
    try:
        body = orjson.loads(rest[0]) if rest else {}
    except orjson.JSONDecodeError as error:
        raise SourceError(f"The body of {name} is not JSON: {error}") from error
    return Block(name, resource, body, **options)


def _options(name: str, head: str) -> Iterator[tuple[str, str]]:
    for line in head.strip().splitlines():
        key, colon, value = line.partition(":")
        if not colon or key not in ("picture", "example", "merge"):
            raise SourceError(f"{line!r} in {name}: write picture:, example: or merge:, then JSON.")
        yield key, value.strip()
