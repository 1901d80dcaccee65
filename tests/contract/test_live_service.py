"""The running service: real processes, real HTTP, several clients, large and hostile bodies."""

from __future__ import annotations

import http.client
import io
import json
import os
import socket
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from urllib.parse import urlsplit

import httpx
import numpy as np
import pytest

from live_service import KERNELS, serving

MODE = {"wavenumber_initial_cm1": 992.0, "wavenumber_final_cm1": 923.0, "huang_rhys": 1.25}
PAIR = {
    "wavenumber_initial_cm1": 1000,
    "wavenumber_final_cm1": 900,
    "huang_rhys": "2.25",
    "v_initial_max": 6,
    "v_final_max": 6,
}


@pytest.fixture
def http_client(live_server):
    with httpx.Client(base_url=live_server.url, timeout=60) as client:
        yield client


def test_is_ready_and_healthy(http_client):
    assert http_client.get("/healthz").json() == {"status": "ok"}
    ready = http_client.get("/readyz").json()
    assert ready["status"] == "ready"
    assert ready["engines"] >= 1


def test_documentation_page_and_its_files_come_from_the_service(http_client):
    assert http_client.get("/docs", follow_redirects=True).url.path == "/docs/"
    page = http_client.get("/docs/interface")
    assert "default-src 'none'" in page.headers["Content-Security-Policy"]
    for name in ("swagger-ui.css", "swagger-ui-bundle.js", "interface.js", "favicon-32x32.png"):
        assert f"interface/{name}" in page.text
        assert http_client.get(f"/docs/interface/{name}").status_code == 200
    assert "http://" not in page.text
    assert "https://" not in page.text


def test_request_id_is_kept_when_it_is_sane(http_client):
    kept = http_client.get("/healthz", headers={"X-Request-ID": "run-17/b"})
    assert kept.headers["X-Request-ID"] == "run-17/b"
    made = http_client.get("/healthz", headers={"X-Request-ID": "a b"})
    assert made.headers["X-Request-ID"] != "a b"


def test_metrics_count_the_requests_of_all_workers(http_client):
    def answered():
        lines = http_client.get("/metrics").text.splitlines()
        label = 'ladderband_requests_total{method="GET",route="/healthz",status="200"}'
        return sum(float(line.split()[-1]) for line in lines if line.startswith(label))

    time.sleep(0.5)
    before = answered()
    for _ in range(20):
        httpx.get(str(http_client.base_url) + "/healthz")
    for _ in range(50):  # the other worker writes its counts five times a second
        if answered() == before + 20:
            return
        time.sleep(0.1)
    assert answered() == before + 20


def test_32_threads_with_different_digits_get_what_a_lone_caller_gets(http_client):
    digits = [None, 5, 12, 15, 16, 17, 20, 25, 30, 40, 50, 60, 80, 100, 150, 200]

    def ask(count):
        body = PAIR if count is None else PAIR | {"digits": count}
        answer = http_client.post("/v1/overlaps", json=body).json()
        return answer["overlap_integrals"], answer["franck_condon_factors"], answer["accuracy"]

    alone = {count: ask(count) for count in digits}
    with ThreadPoolExecutor(32) as pool:
        together = list(pool.map(ask, digits * 8))
    assert together == [alone[count] for count in digits * 8]


# --- bodies ---


def test_chunked_body_is_read_whole(live_server):
    body = json.dumps({"modes": [MODE], "v_final_max": 5}).encode()
    pieces = (body[k : k + 7] for k in range(0, len(body), 7))
    headers = {"Content-Type": "application/json"}
    answer = httpx.post(live_server.url + "/v1/progressions", content=pieces, headers=headers)
    assert answer.status_code == 200
    assert len(answer.json()["lines"]["position_cm1"]) == 6


def early_answer(url: str, head: str, send) -> bytes:
    """Send a head, then pieces until the service answers or hangs up; the start of the answer."""
    address = urlsplit(url)
    with socket.create_connection((address.hostname, address.port), timeout=20) as connection:
        connection.sendall(head.encode())
        try:
            for piece in send:
                connection.sendall(piece)
        except OSError:
            pass  # the service need not read to the end what it refuses
        try:
            return connection.recv(65536)
        except ConnectionResetError:
            return b""


def test_100_megabytes_of_known_length_are_refused_unread(live_server):
    head = "POST /v1/overlaps HTTP/1.1\r\nHost: x\r\nContent-Type: application/json\r\n"
    answer = early_answer(live_server.url, head + "Content-Length: 100000000\r\n\r\n", [])
    assert answer.startswith(b"HTTP/1.1 413")
    assert b"application/problem+json" in answer


def test_100_megabytes_in_chunks_are_refused_at_the_limit(live_server):
    head = (
        "POST /v1/overlaps HTTP/1.1\r\nHost: x\r\nContent-Type: application/json\r\n"
        "Transfer-Encoding: chunked\r\n\r\n"
    )
    chunk = b"100000\r\n" + b" " * 0x100000 + b"\r\n"
    answer = early_answer(live_server.url, head, [chunk] * 100)
    assert answer == b"" or answer.startswith(b"HTTP/1.1 413")
    assert httpx.get(live_server.url + "/healthz").status_code == 200


def test_a_client_that_hangs_up_leaves_the_service_up(live_server):
    address = urlsplit(live_server.url)
    for _ in range(8):
        connection = http.client.HTTPConnection(address.hostname, address.port)
        connection.putrequest("POST", "/v1/overlaps")
        connection.putheader("Content-Type", "application/json")
        connection.putheader("Content-Length", "1000")
        connection.endheaders(b"{")
        connection.close()
    assert httpx.get(live_server.url + "/healthz").status_code == 200


@pytest.mark.parametrize(
    ("request_text", "status"),
    {
        "no HTTP": ("hello\r\n\r\n", 400),
        "no version": ("GET / HTTP/9.9\r\n\r\n", 400),
        "bad header": ("GET / HTTP/1.1\r\nno colon\r\n\r\n", 400),
        "long address": (f"GET /{'a' * 9000} HTTP/1.1\r\n\r\n", 414),
        "large header": (f"GET / HTTP/1.1\r\nX: {'a' * 9000}\r\n\r\n", 431),
        "many headers": ("GET / HTTP/1.1\r\n" + "A: 1\r\n" * 200 + "\r\n", 431),
    }.values(),
)
def test_what_is_not_even_http_is_a_problem_document(request_text, status, live_server):
    answer = early_answer(live_server.url, request_text, [])
    head, _, body = answer.partition(b"\r\n\r\n")
    assert head.startswith(f"HTTP/1.1 {status}".encode())
    assert b"application/problem+json" in head
    assert json.loads(body)["status"] == status


# --- size ---


def test_a_2000_by_2000_table_stays_below_400_megabytes():
    """Both tables as JSON, 4 million numbers each; the peak of every process of the service."""
    body = PAIR | {"v_initial_max": 1999, "v_final_max": 1999}
    with serving("--workers", "1", "--deadline-s", "60") as server:
        size = 0
        address, patience = server.url + "/v1/overlaps", {"Prefer": "wait=60"}
        with httpx.stream("POST", address, json=body, headers=patience, timeout=120) as answer:
            assert answer.status_code == 200
            for piece in answer.iter_raw():
                size += len(piece)
        peak = max(peak_memory_mb(process.pid) for process in server.family())
    assert size > 80e6
    assert peak < 400.0, f"peak {peak:.0f} MB"


def peak_memory_mb(pid: int) -> float:
    """Largest resident memory a process ever had (Linux)."""
    with open(f"/proc/{pid}/status") as status:
        line = next(line for line in status if line.startswith("VmHWM"))
    return int(line.split()[1]) / 1024


def test_streamed_json_is_the_same_numbers_as_npy(http_client):
    body = PAIR | {"v_initial_max": 299, "v_final_max": 399}
    text = http_client.post("/v1/overlaps", json=body)
    assert text.headers["Transfer-Encoding"] == "chunked"
    binary = http_client.post("/v1/overlaps?format=npy", json=body).content
    from_npy = np.load(io.BytesIO(binary))
    assert (np.array(text.json()["overlap_integrals"]) == from_npy).all()


# --- start and stop ---


def test_stops_within_seconds_in_spite_of_idle_connections():
    with serving() as server:
        address = urlsplit(server.url)
        idle = [http.client.HTTPConnection(address.hostname, address.port) for _ in range(6)]
        for connection in idle:
            connection.request("GET", "/healthz")
            connection.getresponse().read()
        family = server.family()
        assert server.stop(grace_s=10.0) == 0
        assert not any(process.is_running() for process in family)
        for connection in idle:
            connection.close()


def test_a_running_request_is_answered_before_the_stop():
    body = PAIR | {
        "v_initial_max": 1200,
        "v_final_max": 1200,
    }  # the largest done in the web process
    with serving("--workers", "1") as server, ThreadPoolExecutor(1) as pool:
        running = pool.submit(
            httpx.post, server.url + "/v1/overlaps?format=npy", json=body, timeout=60
        )
        time.sleep(0.1)
        assert server.stop() == 0
        assert running.result().status_code == 200


def test_a_killed_worker_is_replaced():
    with serving("--workers", "1") as server:
        (worker,) = server.web_workers()
        worker.kill()
        for _ in range(200):
            try:
                assert httpx.get(server.url + "/healthz").status_code == 200
                break
            except httpx.TransportError:
                time.sleep(0.1)
        else:
            pytest.fail("no worker came back")


def command(*arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "ladderband", *arguments],
        capture_output=True,
        text=True,
        timeout=60,
        env={**os.environ, **environment},
    )


@pytest.mark.parametrize("host", ["0.0.0.0", "192.0.2.1", "::", "example.org"])
def test_a_host_others_can_reach_is_refused_without_consent(host):
    result = command("serve", "--host", host, "--data-dir", str(KERNELS))
    assert result.returncode == 2
    assert "--allow-open" in result.stderr


def test_a_data_folder_that_cannot_be_written_is_named(tmp_path):
    blocked = tmp_path / "file"
    blocked.write_text("")
    result = command("serve", "--data-dir", str(blocked / "x"))
    assert result.returncode == 2
    assert "--data-dir" in result.stderr


def test_the_demonstration_writes_its_picture(tmp_path):
    result = command("demo", "--out", str(tmp_path), LADDERBAND_DATA_DIR=str(KERNELS))
    assert result.returncode == 0, result.stderr
    assert "1^1_0" in result.stdout
    assert (tmp_path / "ladderband-demo.svg").read_text().startswith("<?xml")
