"""The guide's commands and snippets, run as they stand against a running service."""

from __future__ import annotations

import contextlib
import http.server
import json
import os
import re
import shutil
import subprocess
import threading
import time

import httpx
import pytest

from ladderband.web.guide.answers import answers
from ladderband.web.guide.render import ADDRESS, curl
from ladderband.web.guide.source import HOME, SNIPPETS, markdown, names, text

COMMANDS = [
    pytest.param(token.content, id=f"{slug}-{number}")
    for slug in (HOME, *names())
    for number, token in enumerate(markdown().parse(text(slug)))
    if token.type == "fence" and token.info == "sh"
]
REQUESTS = [
    pytest.param(found, id=f"{slug}-{name}")
    for slug in names()
    for name, found in answers(slug).items()
]

needs_curl = pytest.mark.skipif(shutil.which("curl") is None, reason="curl is not installed")


def run(command, server, folder, **environment):
    """A shell command, sent to this service instead of the default address."""
    return subprocess.run(
        ["bash", "-ec", command.replace(ADDRESS, server.url)],
        cwd=folder,
        env={**os.environ, **environment},
        capture_output=True,
        text=True,
        timeout=120,
    )


@needs_curl
@pytest.mark.parametrize("command", COMMANDS)
def test_shell_block_runs(command, live_server, tmp_path):
    done = run("set -o pipefail\n" + command, live_server, tmp_path)
    assert done.returncode == 0, done.stderr
    written = list(tmp_path.iterdir())
    assert done.stdout or written
    refused = '"errors"' in done.stdout
    assert refused == ('"huang_rhys": -1' in command), done.stdout
    for path in written:
        content = path.read_text()
        assert content, path
        assert "/problems/" not in content, content
        assert path.suffix != ".svg" or content.rstrip().endswith("</svg>")


@needs_curl
@pytest.mark.parametrize("found", REQUESTS)
def test_command_of_a_request_runs(found, live_server, tmp_path):
    done = run(curl(found.block.resource, found.body), live_server, tmp_path)
    answer = json.loads(done.stdout)
    if found.block.resource == "sweeps":
        answer = table_of(answer, live_server)
    assert answer == found.document


def table_of(job, server):
    """The columns of a sweep's table, once the job is done."""
    with httpx.Client(base_url=server.url, timeout=60) as client:
        end = time.monotonic() + 60
        while client.get(job["links"]["self"]).json()["finished"] is None:
            assert time.monotonic() < end
            time.sleep(0.1)
        table = client.get(job["links"]["result"]).json()
    columns = zip(*table["table"], strict=True)
    return {name: list(column) for name, column in zip(table["columns"], columns, strict=True)}


LANGUAGES = {
    "client.py": ("python3", "python3 client.py"),
    "client.mjs": ("node", "node client.mjs"),
    "client.m": ("octave-cli", "octave-cli --quiet --no-gui client.m"),
    "client.R": ("Rscript", "Rscript client.R"),
}


@pytest.fixture(params=LANGUAGES)
def snippet(request, tmp_path):
    """(command, file) of a snippet in a folder of its own; skipped without its language."""
    program, command = LANGUAGES[request.param]
    if shutil.which(program) is None:
        pytest.skip(f"{program} is not installed")
    for path in SNIPPETS.glob("*.*"):
        shutil.copy(path, tmp_path)
    return command, tmp_path / request.param


def test_snippet_prints_the_lines_and_saves_the_band(snippet, live_server, tmp_path):
    command, _ = snippet
    done = run(command, live_server, tmp_path, LADDERBAND_URL=live_server.url)
    assert done.returncode == 0, done.stderr
    mode = {"wavenumber_initial_cm1": 992, "wavenumber_final_cm1": 923, "huang_rhys": 1.25}
    body = {"origin_cm1": 26650, "modes": [mode], "tolerance": 0.01}
    answer = httpx.post(f"{live_server.url}/v1/lines", json=body).json()
    *lines, missing = done.stdout.splitlines()
    columns = (answer["lines"][name] for name in ("position_cm1", "intensity", "assignment"))
    assert lines == [f"{x:.1f} {y:.6f} {a}" for x, y, a in zip(*columns, strict=True)]
    assert float(missing.split()[-1]) == pytest.approx(
        answer["completeness"]["missing_at_most"], rel=1e-14
    )
    picture = (tmp_path / "band.svg").read_text()
    assert re.search(r"<svg.*</svg>\s*$", picture, re.S)


def test_snippet_sends_its_key(snippet, live_server, tmp_path):
    command, _ = snippet
    with recording(live_server.url) as (url, keys):
        done = run(command, live_server, tmp_path, LADDERBAND_URL=url, LADDERBAND_KEY="se-cret_1")
    assert done.returncode == 0, done.stderr
    assert keys == ["Bearer se-cret_1"] * 2


@contextlib.contextmanager
def recording(target):
    """A server that passes requests on and notes the key each came with."""
    keys = []

    class Handler(http.server.BaseHTTPRequestHandler):
        def do_POST(self):
            keys.append(self.headers["Authorization"])
            body = self.rfile.read(int(self.headers["Content-Length"]))
            kind = {"Content-Type": self.headers["Content-Type"]}
            answer = httpx.post(target + self.path, content=body, headers=kind)
            self.send_response(answer.status_code)
            self.send_header("Content-Length", str(len(answer.content)))
            self.end_headers()
            self.wfile.write(answer.content)

        def log_message(self, *arguments):
            pass

    with http.server.ThreadingHTTPServer(("127.0.0.1", 0), Handler) as server:
        thread = threading.Thread(target=server.serve_forever)
        thread.start()
        yield f"http://127.0.0.1:{server.server_port}", keys
        server.shutdown()
        thread.join()


def test_snippet_tells_why_it_was_refused(snippet, live_server, tmp_path):
    command, path = snippet
    path.write_text(path.read_text().replace("1.25", "-1.25"))
    done = run(command, live_server, tmp_path, LADDERBAND_URL=live_server.url)
    assert done.returncode != 0
    assert "-1.25 is outside the allowed range" in done.stderr + done.stdout
