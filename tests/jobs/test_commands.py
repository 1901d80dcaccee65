"""The commands for jobs against a real service: sweep, keys, and the refusal to be open."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import httpx
import pytest

from live_service import LiveServer, serving

SWEEP = {
    "resource": "overlaps",
    "request": {
        "wavenumber_initial_cm1": 1000.0,
        "wavenumber_final_cm1": 900.0,
        "displacement": 1.5,
        "v_initial_max": 0,
        "v_final_max": 5,
    },
    "collect": ["/sums/0"],
}


def ladderband(*arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "ladderband", *arguments]
    return subprocess.run(
        command,
        capture_output=True,
        text=True,
        timeout=120,
        env={**os.environ, **environment},
        check=False,
    )


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("records")


@pytest.fixture(scope="module")
def live(folder: Path) -> Iterator[LiveServer]:
    with serving("--database-url", f"sqlite:///{folder / 'jobs.db'}") as server:
        yield server


def test_a_sweep_is_sent_and_its_table_written(live: LiveServer, tmp_path: Path) -> None:
    request = tmp_path / "sweep.json"
    request.write_text(json.dumps(SWEEP))
    table = tmp_path / "points.csv"
    table.write_text("/displacement,/v_final_max\n0.5,5\n1.0,6\n1.5,7\n")
    out = tmp_path / "out.csv"
    done = ladderband(
        "sweep", str(request), "--table", str(table), "--out", str(out), "--url", live.url
    )
    assert done.returncode == 0, done.stderr
    lines = out.read_text().splitlines()
    assert lines[0] == "point,displacement,v_final_max,sums/0,error"
    direct = httpx.post(
        f"{live.url}/v1/overlaps",
        json={**SWEEP["request"], "displacement": 1.5, "v_final_max": 7},
    )
    assert float(lines[3].split(",")[3]) == direct.json()["sums"][0]
    assert not list(tmp_path.glob("*.part"))


def test_a_refused_sweep_says_what_is_wrong_and_where(live: LiveServer, tmp_path: Path) -> None:
    request = tmp_path / "sweep.json"
    request.write_text(json.dumps({**SWEEP, "vary": [{"pointer": "/nowhere/x", "values": [1]}]}))
    done = ladderband("sweep", str(request), "--url", live.url)
    assert done.returncode == 2
    assert "#/vary/0/pointer" in done.stderr
    assert "leads nowhere" in done.stderr


def test_keys_are_made_listed_and_revoked_while_the_service_runs(
    live: LiveServer, folder: Path
) -> None:
    records = ["--database-url", f"sqlite:///{folder / 'jobs.db'}"]
    made = ladderband("keys", "add", "Ada", *records)
    secret, sentence = made.stdout.splitlines()
    ident = sentence.split()[3].rstrip(".")
    listed = ladderband("keys", "list", *records).stdout
    assert ident in listed
    assert "Ada" in listed
    assert secret not in listed
    head = {"Authorization": f"Bearer {secret}"}
    with httpx.Client(base_url=live.url) as http:
        _until_status(http, {}, 401)
        assert http.get("/v1/jobs", headers=head).status_code == 200
        assert ladderband("keys", "revoke", ident, *records).returncode == 0
        _until_status(http, {}, 200)  # no key left: open again on loopback
    again = ladderband("keys", "revoke", ident, *records)
    assert again.returncode == 2
    assert "no valid key" in again.stderr


def _until_status(http: httpx.Client, head: dict[str, str], status: int) -> None:
    from jobs.engine_helpers import until

    until(lambda: http.get("/v1/jobs", headers=head).status_code == status)


def test_a_service_without_keys_stays_on_loopback(tmp_path: Path) -> None:
    options = ["--host", "0.0.0.0", "--port", "0", "--data-dir", str(tmp_path)]
    refused = ladderband("serve", *options)
    assert refused.returncode == 2
    assert "ladderband keys add" in refused.stderr
    assert ladderband("keys", "add", "Ada", "--data-dir", str(tmp_path)).returncode == 0
    with serving("--host", "0.0.0.0", data_dir=tmp_path) as server:
        port = server.url.rpartition(":")[2]
        assert httpx.get(f"http://127.0.0.1:{port}/v1/jobs").status_code == 401


def test_a_database_that_is_away_is_told_in_a_sentence(tmp_path: Path) -> None:
    away = "postgresql://nobody@127.0.0.1:1/none"
    refused = ladderband("serve", "--database-url", away, "--data-dir", str(tmp_path))
    assert refused.returncode == 2
    assert "cannot be reached" in refused.stderr
    assert "Traceback" not in refused.stderr
