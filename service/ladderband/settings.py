"""Every setting of the service: name, default, unit, meaning; each has an environment variable.

An option of ``ladderband serve`` has the name of its setting (``--max-body-bytes`` is
``max_body_bytes`` is ``LADDERBAND_MAX_BODY_BYTES``). An option wins over the environment, the
environment over the default.
"""

from __future__ import annotations

import dataclasses
import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

PREFIX = "LADDERBAND_"
TRUE, FALSE = {"1", "true", "yes", "on"}, {"0", "false", "no", "off", ""}


class SettingError(ValueError):
    """A setting has a value that cannot be used; the message says which and what is allowed."""


def _setting(default: Any, unit: str, meaning: str, low: float | None = None) -> Any:
    return dataclasses.field(
        default=default, metadata={"unit": unit, "meaning": meaning, "low": low}
    )


@dataclass(frozen=True)
class Settings:
    """The settings of one running service."""

    host: str = _setting("127.0.0.1", "", "Address to listen on.")
    port: int = _setting(8080, "", "Port to listen on; 0 takes a free one.", 0)
    workers: int = _setting(2, "processes", "Web processes.", 1)
    threads: int = _setting(4, "threads", "Threads of each web process.", 1)
    data_dir: str = _setting("", "", "Folder for caches; empty: ~/.local/share/ladderband.")
    allow_open: bool = _setting(
        False, "", "Allow a host that other machines can reach although no keys are asked for."
    )
    max_body_bytes: int = _setting(16_000_000, "bytes", "Largest request body.", 1)
    max_json_depth: int = _setting(12, "levels", "Deepest nesting of a JSON body.", 2)
    work_s: float = _setting(1.0, "s", "Largest estimated work of one request.", 0.0)
    deadline_s: float = _setting(10.0, "s", "A calculation is stopped after this time.", 0.0)
    table_elements: int = _setting(4_100_000, "numbers", "Most numbers in one table answer.", 1)
    engine: str = _setting(
        "local", "", "Where jobs run: local, or a Dask scheduler (tcp://host:8786)."
    )
    engine_processes: int = _setting(
        0, "processes", "Compute processes of the local engine; 0: one for each processor.", 0
    )
    database_url: str = _setting(
        "", "", "Job records: sqlite:///FILE or postgresql://...; empty: a file in data_dir."
    )
    small_s: float = _setting(
        0.2, "s", "Requests of more estimated work than this run in a compute process.", 0.0
    )
    wait_s: float = _setting(
        10.0, "s", "How long such a request is waited for before it becomes a job.", 0.0
    )
    job_work_s: float = _setting(600.0, "s", "Largest work of a job, or of a sweep's point.", 0.0)
    job_memory_bytes: int = _setting(
        4_294_967_296, "bytes", "Memory one compute process may use.", 268_435_456
    )
    keep_results_days: float = _setting(7.0, "days", "How long results of jobs are kept.", 0.0)
    queue_limit: int = _setting(10_000, "jobs", "Most unfinished jobs of one key.", 1)
    sweep_points: int = _setting(1_000_000, "points", "Most points of a sweep.", 1)
    cors_origins: str = _setting(
        "", "", "Web origins whose pages may call the service, comma-separated, or *."
    )
    log_requests: bool = _setting(True, "", "Write one JSON line to stderr for each request.")
    keep_alive_s: int = _setting(15, "s", "How long an idle connection is kept.", 0)
    grace_s: int = _setting(20, "s", "How long running requests may take to end at a stop.", 0)

    @property
    def data_path(self) -> Path:
        """The data folder, not necessarily there yet."""
        if self.data_dir:
            return Path(self.data_dir).expanduser().resolve()
        return Path("~/.local/share/ladderband").expanduser()

    @property
    def records_url(self) -> str:
        """Where the job records are."""
        return self.database_url or f"sqlite:///{self.data_path / 'jobs.db'}"

    @property
    def origins(self) -> frozenset[str]:
        """The origins of ``cors_origins`` as a set."""
        return frozenset(part.strip() for part in self.cors_origins.split(",") if part.strip())

    def environment(self) -> dict[str, str]:
        """The environment that makes another process load the same settings."""
        return {variable(f.name): str(getattr(self, f.name)) for f in dataclasses.fields(self)}


def variable(name: str) -> str:
    """Environment variable of a setting."""
    return PREFIX + name.upper()


def load_settings(
    environ: Mapping[str, str] | None = None, **options: str | int | float | bool | None
) -> Settings:
    """Settings from options (None: not given), then the environment, then the defaults.

    Raises
    ------
    SettingError
        A value has the wrong type or is below its lowest value.
    """
    environ = os.environ if environ is None else environ
    values: dict[str, Any] = {}
    for item in dataclasses.fields(Settings):
        given = options.get(item.name)
        raw = environ.get(variable(item.name)) if given is None else given
        if raw is not None:
            values[item.name] = _parsed(item, raw)
    return Settings(**values)


def _parsed(item: dataclasses.Field[Any], raw: str | int | float | bool) -> Any:
    kind: Any = type(item.default)
    try:
        value = _truth(raw) if kind is bool else kind(raw)
    except ValueError:
        wanted = {bool: "true or false", int: "a whole number", float: "a number"}[kind]
        raise SettingError(f"{variable(item.name)} is {raw!r}; it must be {wanted}.") from None
    low = item.metadata["low"]
    if low is not None and not low <= value < float("inf"):
        raise SettingError(f"{variable(item.name)} is {raw!r}; it must be at least {low:g}.")
    return value


def _truth(raw: str | int | float | bool) -> bool:
    text = str(raw).strip().lower()
    if text not in TRUE | FALSE:
        raise ValueError(text)
    return text in TRUE


def settings_table() -> str:
    """All settings as an aligned table: option, variable, default, unit, meaning."""
    rows = [("option", "environment variable", "default", "unit", "meaning")]
    for item in dataclasses.fields(Settings):
        option = "--" + item.name.replace("_", "-")
        meta = item.metadata
        rows.append((option, variable(item.name), str(item.default), meta["unit"], meta["meaning"]))
    widths = [max(len(row[k]) for row in rows) for k in range(5)]
    return "\n".join(
        "  ".join(c.ljust(w) for c, w in zip(r, widths, strict=True)).rstrip() for r in rows
    )
