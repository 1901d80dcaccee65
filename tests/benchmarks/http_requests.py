"""Requests a second over HTTP, as ratios measured in one run.

    python tests/benchmarks/http_requests.py

1. ``POST /v1/progressions`` (one mode, 20 lines; validation, log line and metrics included) against
   an empty Flask route in the same server configuration, for questions never asked before and for one
   that was. Rounds alternate.
2. 10,000 oscillator pairs in one request against one pair a request.

Client and server share the machine's cores, so the client reads answers with as little work as it
can: raw sockets, and nothing but the length of a body is looked at.
"""

from __future__ import annotations

import contextlib
import http.client
import json
import os
import socket
import statistics
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable
from pathlib import Path
from urllib.parse import urlsplit

import numpy as np

CONNECTIONS = 16
ROUNDS = 7
SECONDS = 2.0
PAIRS = 10_000

EMPTY_APP = """
import os
import socket
import sys
from flask import Flask
from ladderband.settings import load_settings
from ladderband.web import server

class Nothing:
    def flush(self):
        pass

class Empty(server.Server):
    def load(self):
        app = Flask("empty")
        app.config["LEDGER"] = Nothing()
        app.add_url_rule("/empty", "empty", lambda: "{}")
        return app

sys.argv = sys.argv[:1]
listener = socket.create_server(("127.0.0.1", 0), backlog=2048)
listener.set_inheritable(True)
os.environ[server.LISTENER] = str(listener.fileno())
Empty(load_settings(port=0)).run()
"""

ONE_MODE = {
    "modes": [{"wavenumber_initial_cm1": 992.0, "wavenumber_final_cm1": 923.0, "huang_rhys": 1.25}],
    "v_final_max": 19,
    "threshold": 0.0,
}


def started(
    command: list[str], folder: str, log: str
) -> tuple[subprocess.Popen[bytes], tuple[str, int]]:
    """A server process and its address; log lines go to a file, as in service."""
    environment = {**os.environ, "PROMETHEUS_MULTIPROC_DIR": folder, "OMP_NUM_THREADS": "1"}
    with Path(folder, log).open("wb") as stderr:
        process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=stderr, env=environment)
    assert process.stdout is not None
    address = urlsplit(process.stdout.readline().decode().split()[-1])
    return process, (address.hostname or "", address.port or 0)


def request_bytes(method: str, path: str, body: bytes = b"") -> bytes:
    """One HTTP request."""
    head = f"{method} {path} HTTP/1.1\r\nHost: x\r\n"
    if body:
        head += f"Content-Type: application/json\r\nContent-Length: {len(body)}\r\n"
    return head.encode() + b"\r\n" + body


def exchange(connection: socket.socket, message: bytes) -> bytes:
    """Send one request, read one answer of known length; returns its head."""
    connection.sendall(message)
    data = connection.recv(65536)
    while (end := data.find(b"\r\n\r\n")) < 0:
        data += connection.recv(65536)
    at = data.lower().index(b"content-length:") + 15
    missing = end + 4 + int(data[at : data.index(b"\r", at)]) - len(data)
    while missing > 0:
        missing -= len(connection.recv(1 << 20))
    return data[:end]


Messages = Callable[[int], bytes]
"""The k-th request of a connection; connections count in steps of CONNECTIONS."""


def rate(address: tuple[str, int], messages: Messages, seconds: float) -> float:
    """Requests a second over CONNECTIONS keep-alive connections."""
    counts = [0] * CONNECTIONS
    stop = time.perf_counter() + seconds

    def work(index: int) -> None:
        with socket.create_connection(address) as connection:
            connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            while time.perf_counter() < stop:
                message = messages(CONNECTIONS * counts[index] + index)
                assert b" 200 " in exchange(connection, message)[:20]
                counts[index] += 1

    threads = [threading.Thread(target=work, args=(k,)) for k in range(CONNECTIONS)]
    began = time.perf_counter()
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    return sum(counts) / (time.perf_counter() - began)


def show(name: str, values: list[float], unit: str) -> None:
    low, high = min(values), max(values)
    print(f"{name:<44} {statistics.median(values):>12.0f} {unit}  ({low:.0f} to {high:.0f})")


def small_requests(empty: tuple[str, int], service: tuple[str, int]) -> None:
    """Benchmark 1."""
    nothing, health = always("GET", "/empty"), always("GET", "/healthz")
    known = always("POST", "/v1/progressions", json.dumps(ONE_MODE).encode())
    plain, work, repeated, live = [], [], [], []
    for index in range(ROUNDS + 1):
        a = rate(empty, nothing, SECONDS)
        b = rate(service, new_questions(index), SECONDS)
        c = rate(service, health, SECONDS)
        d = rate(service, known, SECONDS)
        if index:  # the first round warms up
            plain.append(a)
            work.append(b)
            live.append(c)
            repeated.append(d)
    show("empty Flask route", plain, "requests/s")
    show("GET /healthz (metrics, log line)", live, "requests/s")
    show("POST /v1/progressions, a new question each", work, "requests/s")
    show("POST /v1/progressions, the same each time", repeated, "requests/s")
    for name, rates in (("new questions", work), ("the same question", repeated)):
        ratios = [b / a for a, b in zip(plain, rates, strict=True)]
        print(f"ratio to the empty route, {name}: {statistics.median(ratios):.2f} (target 0.6)")
        print(f"  rounds: {', '.join(f'{ratio:.2f}' for ratio in ratios)}\n")


def always(method: str, path: str, body: bytes = b"") -> Messages:
    """The same request again and again."""
    message = request_bytes(method, path, body)
    return lambda number: message


def new_questions(salt: int) -> Messages:
    """One mode, 20 lines, and a Huang-Rhys factor that was never asked for before."""
    before, after = json.dumps(ONE_MODE).split("1.25")

    def message(number: int) -> bytes:
        body = f"{before}1.{salt:02d}{number:09d}{after}".encode()
        return request_bytes("POST", "/v1/progressions", body)

    return message


def batches(service: tuple[str, int]) -> None:
    """Benchmark 2."""
    rng = np.random.default_rng(1)
    initial = rng.uniform(300, 3000, PAIRS)
    columns = {
        "wavenumber_initial_cm1": initial.tolist(),
        "wavenumber_final_cm1": (initial * rng.uniform(0.8, 1.2, PAIRS)).tolist(),
        "displacement": rng.uniform(-1.5, 1.5, PAIRS).tolist(),
    }
    quanta = {"v_initial_max": 0, "v_final_max": 4}
    batch = request_bytes(
        "POST", "/v1/overlaps?format=npy", json.dumps({**columns, **quanta}).encode()
    )
    text = request_bytes("POST", "/v1/overlaps", json.dumps({**columns, **quanta}).encode())
    singles, npy, as_json = [], [], []
    for index in range(4):
        a = rate(service, single_pairs(columns, quanta, index), SECONDS)
        b = PAIRS * one_connection_rate(service, batch)
        c = PAIRS * one_connection_rate(service, text)
        if index:
            singles.append(a)
            npy.append(b)
            as_json.append(c)
    show("one pair a request, 5 factors", singles, "pairs/s")
    show("10,000 pairs a request, JSON", as_json, "pairs/s")
    show("10,000 pairs a request, npy", npy, "pairs/s")
    print(
        f"ratio, JSON: {statistics.median(as_json) / statistics.median(singles):.0f} (target 100)"
    )
    print(f"ratio, npy: {statistics.median(npy) / statistics.median(singles):.0f}")


def single_pairs(columns: dict[str, list[float]], quanta: dict[str, int], salt: int) -> Messages:
    """One pair a request, each a new one."""

    def message(number: int) -> bytes:
        one = {name: values[number % PAIRS] for name, values in columns.items()} | quanta
        one["displacement"] += 1e-9 * (salt * 1e6 + number)
        return request_bytes("POST", "/v1/overlaps", json.dumps(one).encode())

    return message


def one_connection_rate(address: tuple[str, int], message: bytes) -> float:
    """Requests a second of one connection whose answers may come chunked."""
    with contextlib.closing(http.client.HTTPConnection(*address)) as connection:
        head, _, body = message.partition(b"\r\n\r\n")
        method, path, _ = head.split(b"\r\n")[0].decode().split()
        began, count = time.perf_counter(), 0
        while time.perf_counter() - began < SECONDS:
            connection.request(method, path, body, {"Content-Type": "application/json"})
            response = connection.getresponse()
            assert response.status == 200
            response.read()
            count += 1
        return count / (time.perf_counter() - began)


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        service, at = started(
            [sys.executable, "-m", "ladderband", "serve", "--port", "0", "--data-dir", folder],
            folder, "service.log",
        )  # fmt: skip
        empty, nowhere = started([sys.executable, "-c", EMPTY_APP], folder, "empty.log")
        try:
            small_requests(nowhere, at)
            batches(at)
        finally:
            service.terminate()
            empty.terminate()
            service.wait()
            empty.wait()


if __name__ == "__main__":
    main()
