"""The guide: every request is sent, every number comes from an answer, every link leads somewhere."""

from __future__ import annotations

import html
import itertools
import json
import re
from html.parser import HTMLParser
from urllib.parse import urljoin

import pytest

from ladderband.web.guide.answers import SIZES, answers, written
from ladderband.web.guide.render import ADDRESS
from ladderband.web.guide.source import (
    HOME,
    SNIPPETS,
    TEXTS,
    SourceError,
    block,
    blocks,
    contents,
    markdown,
    names,
    text,
)
from ladderband.web.problems import all_problems
from ladderband.web.resources import RESOURCES

PAGES = [HOME, *names()]
COMMAND = re.compile(r"curl -s \S+(/v1/\S+) -H 'Content-Type: application/json' -d '(.*)'", re.S)


def address(slug):
    return "/docs/" if slug == HOME else f"/docs/{slug}"


class Seen(HTMLParser):
    """Tags with their attributes, and the text of each ``pre``."""

    def __init__(self, page):
        super().__init__()
        self.tags = []
        self.code = []
        self.open = []
        self.feed(page)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        self.open.append(tag)
        if tag == "pre":
            self.code.append("")

    def handle_endtag(self, tag):
        while self.open and self.open.pop() != tag:
            pass

    def handle_data(self, data):
        if "pre" in self.open:
            self.code[-1] += data

    def all(self, tag, attribute):
        return [attrs[attribute] for name, attrs in self.tags if name == tag and attribute in attrs]


@pytest.fixture
def seen(client):
    return lambda path: Seen(client.get(path).text)


def test_every_text_is_linked_once_and_every_link_has_a_text():
    linked = [slug for _, links in contents() for slug, _ in links]
    assert len(set(linked)) == len(linked)
    assert {path.stem for path in TEXTS.glob("*.md")} == {HOME, *linked} - {"interface"}
    assert {resource.name for resource in RESOURCES} <= set(linked)


@pytest.mark.parametrize("path", ["/look.css", "/docs/page.css", "/openapi.json"])
def test_files_are_asked_about_and_not_sent_again(path, client):
    found = client.get(path)
    assert found.headers["Cache-Control"] == "public, max-age=0, must-revalidate"
    held = client.get(path, headers={"If-None-Match": found.headers["ETag"]})
    assert (held.status_code, held.data) == (304, b"")


def test_the_stylesheet_takes_its_colours_from_the_plots(client):
    style = client.get("/docs/page.css").text
    assert not re.search(r"#[0-9a-f]{3,8}\b|rgb|hsl", style)
    known = set(re.findall(r"--[a-z]+(?=:)", client.get("/look.css").text))
    assert set(re.findall(r"var\((--[a-z]+)\)", style)) <= known


@pytest.mark.parametrize("slug", PAGES)
def test_page_can_be_kept_and_needs_no_script_or_style_of_its_own(slug, client):
    page = client.get(address(slug))
    assert page.status_code == 200
    assert "unsafe" not in page.headers["Content-Security-Policy"]
    assert "default-src 'none'" in page.headers["Content-Security-Policy"]
    assert not re.search(r"<script|<style| style=| on[a-z]+=", page.text)
    held = client.get(address(slug), headers={"If-None-Match": page.headers["ETag"]})
    assert (held.status_code, held.data) == (304, b"")


@pytest.mark.parametrize("path", [address(slug) for slug in PAGES] + ["/problems/validation"])
def test_page_can_be_read_by_everybody(path, seen):
    page = seen(path)
    assert ("html", {"lang": "en"}) in page.tags
    levels = [int(tag[1]) for tag, _ in page.tags if re.fullmatch("h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after <= before + 1 for before, after in itertools.pairwise(levels))
    assert all(len(words) > 40 for words in page.all("img", "alt"))
    assert len(page.all("img", "alt")) == len(page.all("img", "src"))
    scrolled = [attrs for tag, attrs in page.tags if tag == "pre" or attrs.get("class") == "wide"]
    assert all(attrs.get("tabindex") == "0" for attrs in scrolled)


@pytest.mark.parametrize("path", [address(slug) for slug in PAGES] + ["/problems/validation"])
def test_every_link_leads_somewhere_here(path, seen, client):
    page = seen(path)
    found = page.all("a", "href") + page.all("link", "href") + page.all("img", "src")
    found += page.all("source", "srcset")
    assert not [link for link in found if ":" in link]
    ids = set(page.all("main", "id") + page.all("nav", "id") + page.all("h2", "id"))
    for link in set(found):
        if link.startswith("#"):
            assert link[1:] in ids
            continue
        answer = client.get(urljoin(path, link), follow_redirects=True, buffered=True)
        assert answer.status_code == 200, link


SENT = [slug for slug in PAGES if list(blocks(text(slug)))]


@pytest.mark.parametrize("slug", SENT)
def test_every_request_shown_is_answered_as_the_page_says(slug, seen, client):
    shown = [match for code in seen(address(slug)).code if (match := COMMAND.fullmatch(code))]
    kept = list(answers(slug).values())
    assert len(shown) == len(kept)
    for command, found in zip(shown, kept, strict=True):
        body = json.loads(command[2])
        assert body == found.body
        if found.block.resource != "sweeps":  # sent to a whole service in test_guide_commands
            answer = client.post(command[1], json=body)
            assert answer.status_code == 200, answer.text
            assert answer.json == found.document


@pytest.mark.parametrize("slug", SENT)
def test_no_result_is_typed_into_a_text(slug):
    """A number with a decimal point is an input of a request on the page, or a placeholder."""
    source = re.sub(r"^```.*?^```", "", text(slug), flags=re.S | re.M)
    prose = re.sub(r"\{\{.*?\}\}|`[^`]*`", "", source)
    inputs = set(re.findall(r"\d+\.\d+", json.dumps([a.body for a in answers(slug).values()])))
    assert set(re.findall(r"\d+\.\d+", prose)) <= inputs
    assert not re.findall(r"\de[-+]?\d", prose)


def fences(slug, kind):
    return [
        token.content
        for token in markdown().parse(text(slug))
        if token.type == "fence" and token.info == kind
    ]


def test_the_refusal_on_the_page_is_the_one_the_service_sends(client):
    (command,), (shown,) = fences("errors", "sh"), fences("errors", "json")
    body = json.loads(re.search("'({.*})'", command)[1])
    answer = client.post("/v1/progressions", json=body).json
    assert {name: answer[name] for name in json.loads(shown)} == json.loads(shown)


def test_addresses_in_the_page_for_dashboards_are_answered(client):
    (example,) = fences("pictures", "html")
    found = re.findall(f'"{ADDRESS}([^"]*)"', example)
    assert len(found) == 2
    assert all(client.get(link).mimetype == "image/svg+xml" for link in found)


def test_pages_show_the_numbers_of_the_answers(client):
    answer = answers("overlaps")["pair"].document
    page = client.get("/docs/overlaps").text
    assert f"<td>{answer['overlap_integrals'][0][0]:.6f}</td>" in page
    assert "×10⁻¹³, proven" in page
    assert "{{" not in page


@pytest.mark.parametrize("slug", names())
def test_every_placeholder_is_filled(slug, client):
    assert "{{" not in re.sub(r"<pre.*?</pre>", "", client.get(address(slug)).text, flags=re.S)


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("theme", ["light", "dark"])
def test_pictures_have_the_size_and_the_colours_asked_for(theme, size, client):
    found = client.get(f"/docs/pictures/lines/mixed-{theme}-{size}.svg")
    assert found.mimetype == "image/svg+xml"
    assert f'width="{0.75 * SIZES[size][0]:g}pt"' in found.text
    assert ("#15191f" in found.text) == (theme == "dark")
    held = client.get(found.request.path, headers={"If-None-Match": found.headers["ETag"]})
    assert held.status_code == 304


@pytest.mark.parametrize(
    "path", ["lines/mixed-blue-wide", "lines/mixed-dark-x", "lines/x-dark-wide", "x/mixed-dark-wide",
             "overlaps/digits-dark-wide"],
)  # fmt: skip
def test_there_is_no_other_picture(path, client):
    assert client.get(f"/docs/pictures/{path}.svg").status_code == 404


def test_problem_pages_have_the_same_look_and_say_what_to_do(client):
    for problem in all_problems():
        page = client.get(f"/problems/{problem.slug}").text
        assert html.escape(problem.meaning) in page
        assert 'href="../docs/page.css"' in page


def test_interface_page_alone_may_style_itself(client):
    page = client.get("/docs/interface", buffered=True)
    assert "style-src 'self' 'unsafe-inline'" in page.headers["Content-Security-Policy"]
    assert "script-src 'self';" in page.headers["Content-Security-Policy"]


def test_every_snippet_is_on_the_page_as_it_is_run(client):
    page = Seen(client.get("/docs/clients").text)
    for path in SNIPPETS.iterdir():
        if path.is_file():
            assert path.read_text().rstrip() in page.code


def test_the_settings_of_this_service_are_shown(app):
    from ladderband.settings import Settings
    from ladderband.web.app import create_app

    other = create_app(Settings(log_requests=False, keep_results_days=3.5))
    assert "3.5 days" in other.test_client().get("/docs/limits").text
    assert "3.5 days" not in app.test_client().get("/docs/limits").text


@pytest.mark.parametrize(
    ("info", "content", "said"),
    [
        ("request lines", "{}", "request RESOURCE NAME"),
        ("request lines x", "{1}", "not JSON"),
        ("request lines x", "words\n{}", "picture:"),
        ("sweep", "{}", "sweep NAME"),
    ],
)
def test_a_malformed_block_is_refused_with_a_sentence(info, content, said):
    with pytest.raises(SourceError, match=said):
        block(info, content)


def test_a_pointer_to_nothing_is_refused():
    with pytest.raises(SourceError, match="no member 'y'"):
        written({"x": {}}, "x/y", "")


def test_numbers_are_written_as_in_print():
    roots = {"a": {"list": [3.0, 4.5e-13], "unit": "L mol^-1 cm^-1", "line": "1^2_0"}}
    assert written(roots, "a/line", "") == "1^2_0"
    assert written(roots, "a/list/0*1e7", ".0e") == "3×10⁷"
    assert written(roots, "a/list/1", ".1e") == "4.5×10⁻¹³"
    assert written(roots, "a/list/max", ".1f") == "3.0"
    assert written(roots, "a/list/0*-1", ".1f") == "−3.0"
    assert written(roots, "a/list/0*1e3", ",.0f") == "3,000"
    assert written(roots, "a/unit", "") == "L mol⁻¹ cm⁻¹"


def test_addresses_on_the_pages_are_the_default_one():
    from ladderband.settings import Settings

    assert f"http://{Settings().host}:{Settings().port}" == ADDRESS
