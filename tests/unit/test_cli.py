"""The command line: options, refusals, description files."""

from __future__ import annotations

import dataclasses

import pytest

from ladderband.cli import _is_loopback, _parser, main
from ladderband.demo import table
from ladderband.settings import Settings


def test_every_setting_is_an_option_of_serve():
    options = vars(_parser().parse_args(["serve"]))
    assert {item.name for item in dataclasses.fields(Settings)} <= set(options)


def test_options_override(monkeypatch):
    options = _parser().parse_args(["serve", "--port", "0", "--allow-open", "--no-log-requests"])
    assert (options.port, options.allow_open, options.log_requests) == ("0", True, False)


@pytest.mark.parametrize("host", ["127.0.0.1", "127.9.9.9", "::1", "localhost"])
def test_loopback(host):
    assert _is_loopback(host)


@pytest.mark.parametrize("host", ["0.0.0.0", "::", "10.0.0.1", "example.org", ""])
def test_not_loopback(host):
    assert not _is_loopback(host)


def test_open_host_is_refused(capsys):
    assert main(["serve", "--host", "0.0.0.0"]) == 2
    assert "--allow-open" in capsys.readouterr().err


def test_bad_setting_is_refused(capsys):
    assert main(["serve", "--port", "many"]) == 2
    assert "LADDERBAND_PORT" in capsys.readouterr().err


def test_settings_are_listed(capsys):
    assert main(["settings"]) == 0
    assert "LADDERBAND_MAX_BODY_BYTES" in capsys.readouterr().out


def test_description_is_written_checked_and_cleaned(tmp_path, capsys):
    assert main(["describe", "--out", str(tmp_path)]) == 0
    assert main(["describe", "--out", str(tmp_path), "--check"]) == 0
    (tmp_path / "examples" / "bands" / "old.json").write_text("{}")
    assert main(["describe", "--out", str(tmp_path), "--check"]) == 2
    assert "ladderband describe" in capsys.readouterr().err
    assert main(["describe", "--out", str(tmp_path)]) == 0
    assert not (tmp_path / "examples" / "bands" / "old.json").exists()
    (tmp_path / "openapi.json").write_text("{}")
    assert main(["describe", "--out", str(tmp_path), "--check"]) == 2


def test_table_of_the_demonstration():
    answer = {
        "lines": {"position_cm1": [1.0], "intensity": [0.25], "assignment": ["1^1_0"]},
        "completeness": {"captured": 0.25, "total": 1.0, "missing_at_most": 0.75},
        "accuracy": {"bound": 1e-12, "evidence": "proven", "route": "ladder"},
        "warnings": ["so"],
    }
    text = table(answer)
    assert "1^1_0" in text
    assert "warning: so" in text
    assert "###############" in text
