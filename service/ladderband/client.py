"""``ladderband sweep``: send a sweep to a service, watch it, write its table.

Made for a login node: it survives a lost connection and a restarted service, and running it again
with the same file finds the job that is already there. Needs the extra ``client``.
"""

from __future__ import annotations

import sys
import time
import uuid
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

import httpx
import orjson
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TimeRemainingColumn

POLL_S = 0.5
PATIENCE_S = 120.0
"""How long a service may be away before the client gives up; the job goes on without it."""


class ClientError(Exception):
    """The sweep did not lead to a table; the message says why."""


@dataclass(frozen=True)
class SweepOrder:
    """What the command was asked for."""

    url: str
    file: Path
    table: Path | None
    output: Path | None
    format: str
    key: str | None


def run_sweep(order: SweepOrder) -> None:
    """Send, watch, write.

    Raises
    ------
    ClientError
        The service refused the sweep, could not be reached, or the job failed.
    """
    headers = {"Authorization": f"Bearer {order.key}"} if order.key else {}
    with httpx.Client(base_url=order.url, headers=headers, timeout=60.0) as http:
        job = _submit(http, _document(order))
        print(f"job {job['id']}", file=sys.stderr)
        job = _watch(http, job)
        if job["state"] != "succeeded":
            raise ClientError(_why(job.get("problem") or {}, f"The job was {job['state']}."))
        with _output(order.output) as file:
            _download(http, job["id"], order.format, file)


def _document(order: SweepOrder) -> dict[str, Any]:
    document: dict[str, Any] = orjson.loads(order.file.read_bytes())
    if order.table is not None:
        document["table_csv"] = order.table.read_text()
    return document


def _submit(http: httpx.Client, document: dict[str, Any]) -> dict[str, Any]:
    headers = {
        "Prefer": "respond-async",
        "Idempotency-Key": uuid.uuid4().hex,  # a repeat after a lost reply finds the same job
        "Content-Type": "application/json",
    }
    body = orjson.dumps(document)
    return _json(_patient(lambda: http.post("/v1/sweeps", content=body, headers=headers)))


def _watch(http: httpx.Client, job: dict[str, Any]) -> dict[str, Any]:
    columns = [BarColumn(), MofNCompleteColumn(), TimeRemainingColumn()]
    address = f"/v1/jobs/{job['id']}"
    with Progress("{task.description}", *columns, transient=True) as bar:
        task = bar.add_task(job["id"], total=job["total"])
        while job["state"] in {"queued", "running"}:
            time.sleep(POLL_S)
            job = _json(_patient(lambda: http.get(address)))
            bar.update(task, completed=job["done"], description=job["state"])
    return job


def _download(http: httpx.Client, job_id: str, name: str, file: BinaryIO) -> None:
    """Fetch the table; a broken transfer goes on where it stopped."""
    received, end = 0, time.monotonic() + PATIENCE_S
    while True:
        headers = {"Range": f"bytes={received}-"} if received else {}
        try:
            url = f"/v1/jobs/{job_id}/result"
            with http.stream("GET", url, params={"format": name}, headers=headers) as answer:
                if answer.status_code not in {200, 206}:
                    answer.read()
                    _json(answer)
                for chunk in answer.iter_bytes():
                    file.write(chunk)
                    received += len(chunk)
            return
        except httpx.TransportError as error:
            if time.monotonic() > end:
                raise ClientError(f"The table could not be fetched: {error}") from error
            time.sleep(POLL_S)


def _patient(send: Any) -> httpx.Response:
    """Send until the service answers, for PATIENCE_S at most."""
    end = time.monotonic() + PATIENCE_S
    while True:
        try:
            answer: httpx.Response = send()
            if answer.status_code not in {429, 503}:
                return answer
            problem = _why(_parsed(answer), f"The service answered {answer.status_code}.")
        except httpx.TransportError as error:
            problem = f"The service cannot be reached: {error}"
        if time.monotonic() > end:
            raise ClientError(problem)
        time.sleep(2 * POLL_S)


def _json(answer: httpx.Response) -> dict[str, Any]:
    document = _parsed(answer)
    if answer.is_error:
        raise ClientError(_why(document, f"The service answered {answer.status_code}."))
    return document


def _parsed(answer: httpx.Response) -> dict[str, Any]:
    try:
        document: dict[str, Any] = orjson.loads(answer.content)
    except orjson.JSONDecodeError:
        return {}
    return document


def _why(problem: dict[str, Any], otherwise: str) -> str:
    """The problem's sentences, with the places they are about."""
    lines = [str(problem.get("detail") or problem.get("title") or otherwise)]
    lines += [f"  {entry['pointer']}: {entry['detail']}" for entry in problem.get("errors", [])]
    return "\n".join(lines)


@contextmanager
def _output(path: Path | None) -> Iterator[BinaryIO]:
    """A file that appears under its name only when it is complete; standard output without one."""
    if path is None:
        yield sys.stdout.buffer
        return
    part = path.with_name(path.name + ".part")
    with part.open("wb") as file:
        yield file
    part.replace(path)
