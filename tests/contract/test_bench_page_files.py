"""The bench page's files as a browser gets them: types, caching, policy, and nothing left out."""

from __future__ import annotations

import re
import tomllib
from html.parser import HTMLParser
from pathlib import Path

import pytest

import ladderband
from ladderband.formats.look import LOOKS
from ladderband.web.bench import FILES

NAMES = sorted(path.name for path in FILES.iterdir())
TYPES = {"js": "javascript", "css": "text/css", "svg": "image/svg+xml", "html": "text/html"}
MAX_LINES = 300


@pytest.mark.parametrize("address", ["/", *(f"/bench/{name}" for name in NAMES)])
def test_every_file_has_its_type_its_tag_and_the_policy(client, address):
    with client.get(address) as got:
        assert got.status_code == 200
        assert got.data
    ending = "html" if address == "/" else address.rpartition(".")[2]
    assert TYPES[ending] in got.content_type
    assert got.headers["X-Content-Type-Options"] == "nosniff"
    assert "unsafe" not in got.headers["Content-Security-Policy"]
    assert got.headers["Content-Security-Policy"].startswith("default-src 'self';")
    with client.get(address, headers={"If-None-Match": got.headers["ETag"]}) as again:
        assert again.status_code == 304
        assert again.data == b""
    with client.head(address) as head:
        assert head.status_code == 200
        assert head.data == b""
        assert head.headers["ETag"] == got.headers["ETag"]


@pytest.mark.parametrize("name", ["nothing.js", "../pages.py", "..%2fpages.py", "", ".."])
def test_nothing_else_is_served(client, name):
    with client.get(f"/bench/{name}") as got:
        assert got.status_code == 404


class Tags(HTMLParser):
    def __init__(self):
        super().__init__()
        self.found = []

    def handle_starttag(self, tag, attributes):
        self.found.append((tag, dict(attributes)))


def tags():
    parser = Tags()
    parser.feed((FILES / "index.html").read_text("utf-8"))
    return parser.found


def test_the_page_needs_nothing_from_elsewhere_and_holds_no_inline_code():
    for tag, attributes in tags():
        for name in ("src", "href"):
            assert "//" not in (attributes.get(name) or "")
        assert not {"style", "onclick", "onload"} & set(attributes)
        if tag == "script":
            assert attributes["src"].startswith("bench/")
        assert tag != "style"


def test_addresses_are_relative_so_that_the_page_works_below_a_path():
    for _, attributes in tags():
        for name in ("src", "href"):
            assert not (attributes.get(name) or "").startswith("/")
    for path in FILES.glob("*.js"):
        assert not re.search(r"""["'`]/v1/""", path.read_text("utf-8")), path.name


def test_the_scripts_import_each_other_without_a_circle_or_an_orphan():
    imports = {
        path.name: set(re.findall(r'from "\./([\w.]+)"', path.read_text("utf-8")))
        for path in FILES.glob("*.js")
    }
    done: set[str] = set()

    def visit(name, above):
        assert name not in above, f"a circle: {' -> '.join([*above, name])}"
        if name not in done:
            for other in imports[name]:
                visit(other, [*above, name])
            done.add(name)

    visit("main.js", [])
    assert done == set(imports)


def test_the_colours_have_one_home(client):
    for path in FILES.iterdir():
        assert not re.search(r"#[0-9a-fA-F]{6}\b|rgb\(", path.read_text("utf-8")), path.name
    assert LOOKS["dark"].second in client.get("/bench/mark.svg").text


@pytest.mark.parametrize("name", [name for name in NAMES if not name.endswith(".html")])
def test_files_stay_small(name):
    assert len((FILES / name).read_text("utf-8").splitlines()) <= MAX_LINES


def test_the_files_go_into_the_wheel():
    project = tomllib.loads((Path(__file__).parents[2] / "pyproject.toml").read_text("utf-8"))
    patterns = project["tool"]["setuptools"]["package-data"]["ladderband"]
    package = Path(ladderband.__file__).parent
    packed = {path for pattern in patterns for path in package.glob(pattern)}
    assert set(FILES.iterdir()) <= packed
