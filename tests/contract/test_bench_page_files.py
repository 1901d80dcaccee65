"""The bench page's files as a browser gets them: types, caching, policy, and nothing left out."""

from __future__ import annotations

import re
import shutil
import tomllib
from html.parser import HTMLParser
from pathlib import Path

import pytest

import ladderband
from ladderband.formats.look import LOOKS
from ladderband.web.bench import FILES, contents, page

NAMES = sorted(path.name for path in FILES.iterdir())
TYPES = {"js": "javascript", "css": "text/css", "svg": "image/svg+xml", "html": "text/html"}
MAX_LINES = 300


def fetched(client, address, status=200, method="get", **options):
    with getattr(client, method)(address, **options) as got:
        assert got.status_code == status
        return got, got.data


@pytest.mark.parametrize("name", [name for name in NAMES if name != "index.html"])
def test_every_file_has_its_type_and_the_policy_and_is_kept_for_good(client, name):
    address = f"/bench/{contents()}/{name}"
    got, data = fetched(client, address)
    assert data
    assert TYPES[name.rpartition(".")[2]] in got.content_type
    assert_guarded(got)
    assert "immutable" in got.headers["Cache-Control"]
    head, data = fetched(client, address, method="head")
    assert data == b""
    assert head.headers["Content-Type"] == got.headers["Content-Type"]
    old, _ = fetched(client, f"/bench/0123456789abcdef/{name}")
    assert "immutable" not in old.headers.get("Cache-Control", "")


def test_the_page_is_asked_for_again_and_names_the_files_of_its_version(
    client, tmp_path, monkeypatch
):
    got, data = fetched(client, "/")
    assert "text/html" in got.content_type
    assert_guarded(got)
    assert got.headers["Cache-Control"] == "no-cache"
    _, nothing = fetched(client, "/", 304, headers={"If-None-Match": got.headers["ETag"]})
    assert nothing == b""
    _, nothing = fetched(client, "/", method="head")
    assert nothing == b""
    for name in ("main.js", "bench.css", "mark.svg"):
        assert f'"bench/{contents()}/{name}"' in data.decode()
    # another script, another address
    shutil.copytree(FILES, tmp_path / "bench")
    (tmp_path / "bench" / "main.js").write_text("// changed")
    monkeypatch.setattr("ladderband.web.bench.FILES", tmp_path / "bench")
    later, _ = fetched(client, "/", headers={"If-None-Match": got.headers["ETag"]})
    assert later.headers["ETag"] != got.headers["ETag"]


def assert_guarded(got):
    assert got.headers["X-Content-Type-Options"] == "nosniff"
    assert "unsafe" not in got.headers["Content-Security-Policy"]
    assert got.headers["Content-Security-Policy"].startswith("default-src 'self';")


@pytest.mark.parametrize("name", ["nothing.js", "../pages.py", "..%2fpages.py", "", ".."])
def test_nothing_else_is_served(client, name):
    fetched(client, f"/bench/{contents()}/{name}", 404)


class Tags(HTMLParser):
    def __init__(self):
        super().__init__()
        self.found = []

    def handle_starttag(self, tag, attributes):
        self.found.append((tag, dict(attributes)))


def tags():
    parser = Tags()
    parser.feed(page())
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
    assert LOOKS["dark"].second in client.get("/bench/x/mark.svg").text


@pytest.mark.parametrize("name", [name for name in NAMES if not name.endswith(".html")])
def test_files_stay_small(name):
    assert len((FILES / name).read_text("utf-8").splitlines()) <= MAX_LINES


def test_the_files_go_into_the_wheel():
    project = tomllib.loads((Path(__file__).parents[2] / "pyproject.toml").read_text("utf-8"))
    patterns = project["tool"]["setuptools"]["package-data"]["ladderband"]
    package = Path(ladderband.__file__).parent
    packed = {path for pattern in patterns for path in package.glob(pattern)}
    assert set(FILES.iterdir()) <= packed
