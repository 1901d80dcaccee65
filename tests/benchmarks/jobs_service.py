"""The whole service under load: many clients with the same requests, memory of a large sweep, and
what a sweep costs the small requests beside it.

Run: python tests/benchmarks/jobs_service.py [same | memory | beside] [database URL]
"""

from __future__ import annotations

import os
import statistics
import sys
import tempfile
import time
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import httpx
import psutil
import sqlalchemy as sa

sys.path.insert(0, str(Path(__file__).parents[1]))

from ladderband.jobs import records
from ladderband.jobs.database import Database
from live_service import serving

SMALL: dict[str, Any] = {
    "wavenumber_initial_cm1": 1000.0,
    "wavenumber_final_cm1": 900.0,
    "displacement": 1.5,
    "v_initial_max": 1,
    "v_final_max": 5,
}
CLIENTS, REQUESTS = 64, 1000


@contextmanager
def service(url: str, folder: str) -> Iterator[tuple[str, psutil.Process]]:
    os.environ["LADDERBAND_DATABASE_URL"] = url
    with serving(data_dir=Path(folder)) as live:
        yield live.url, psutil.Process(live.process.pid)


def same_requests(url: str, folder: str) -> None:
    """64 clients submit the same 1000 requests at once."""
    with service(url, folder) as (address, _):
        begun = time.perf_counter()
        with ThreadPoolExecutor(CLIENTS) as pool:
            answers = list(pool.map(lambda _: one_client(address), range(CLIENTS)))
        submitted = time.perf_counter() - begun
        with httpx.Client(base_url=address, timeout=60) as http:
            while http.get("/v1/jobs?state=queued").json()["jobs"]:
                time.sleep(0.5)
            while http.get("/v1/jobs?state=running").json()["jobs"]:
                time.sleep(0.5)
        total = time.perf_counter() - begun
    database = Database(url)
    with database.reading() as connection:
        jobs = connection.scalar(sa.select(sa.func.count()).select_from(records.job))
        query = sa.select(sa.func.count(), sa.func.max(records.shard.c.attempt))
        shards, attempts = connection.execute(query).one()
    database.close()
    names = {tuple(found) for found in answers}
    print(f"{CLIENTS} clients x {REQUESTS} equal requests: {jobs} jobs, {shards} computations, ")
    print(f"  at most {attempts} attempt each, {len(names)} distinct list of job ids seen")
    rate = CLIENTS * REQUESTS / submitted
    print(f"  submitted in {submitted:.0f} s ({rate:.0f}/s), all computed after {total:.0f} s")


def one_client(address: str) -> list[str]:
    found = []
    with httpx.Client(base_url=address, timeout=120) as http:
        for number in range(REQUESTS):
            body = {**SMALL, "displacement": number / 500}
            answer = http.post("/v1/overlaps", json=body, headers={"Prefer": "respond-async"})
            assert answer.status_code == 202, answer.text
            found.append(answer.json()["id"])
    return found


def memory(url: str, folder: str) -> None:
    """A sweep of 100,000 points, its table fetched as CSV."""
    with (
        service(url, folder) as (address, root),
        httpx.Client(base_url=address, timeout=600) as http,
    ):
        http.post("/v1/overlaps", json=SMALL)
        before = resident(root)
        begun = time.perf_counter()
        job = http.post("/v1/sweeps", json=sweep(100_000)).json()
        peak: dict[str, float] = {}
        while (found := http.get(job["links"]["self"]).json())["finished"] is None:
            peak = highest(peak, resident(root))
            time.sleep(0.2)
        took = time.perf_counter() - begun
        size = 0
        with http.stream("GET", job["links"]["result"] + "?format=csv") as answer:
            for chunk in answer.iter_bytes():
                size += len(chunk)
                peak = highest(peak, resident(root)) if size % 7 == 0 else peak
        peak = highest(peak, resident(root))
    print(
        f"sweep of 100,000 points: {found['state']} in {took:.0f} s, table of {size / 2**20:.1f} MiB"
    )
    for name, value in sorted(peak.items()):
        print(f"  {name:20} before {before.get(name, 0):6.0f} MiB   highest {value:6.0f} MiB")


def sweep(points: int) -> dict[str, Any]:
    span = {"start": 0.0, "stop": 3.0, "points": points}
    return {
        "resource": "overlaps",
        "request": SMALL,
        "vary": [{"pointer": "/displacement", "range": span}],
        "collect": ["/sums/0", "/accuracy/bound"],
    }


def resident(root: psutil.Process) -> dict[str, float]:
    """Resident memory in MiB of the largest process of each sort."""
    found: dict[str, float] = {}
    for process in root.children(recursive=True):
        try:
            line = " ".join(process.cmdline())
            size = process.memory_info().rss / 2**20
        except psutil.Error:
            continue
        name = "web worker" if "web.server" in line else "compute process"
        name = "engine supervisor" if "ladderband engine" in line else name
        found = highest(found, {name: size})
    return found


def highest(one: dict[str, float], other: dict[str, float]) -> dict[str, float]:
    return {name: max(one.get(name, 0.0), other.get(name, 0.0)) for name in {*one, *other}}


def beside(url: str, folder: str) -> None:
    """Small requests alone and beside a sweep, in turns."""
    with service(url, folder) as (address, _), httpx.Client(base_url=address, timeout=60) as http:
        alone, together = [], []
        for turn in range(5):
            alone.append(small_requests(address))
            body = sweep(200_000)
            body["request"] = {**SMALL, "v_final_max": 6 + turn}
            job = http.post("/v1/sweeps", json=body).json()
            time.sleep(1.0)
            together.append(small_requests(address))
            http.delete(job["links"]["self"])
    for name, found in (("alone", alone), ("beside a sweep", together)):
        rates, tails = zip(*found, strict=True)
        rate, tail = statistics.median(rates), statistics.median(tails)
        print(f"  {name:15} {rate:6.0f} requests/s   p99 {1e3 * tail:5.1f} ms")
    ratios = sorted(b[0] / a[0] for a, b in zip(alone, together, strict=True))
    print(f"beside / alone, each turn: {' '.join(f'{ratio:.2f}' for ratio in ratios)}")


def small_requests(address: str) -> tuple[float, float]:
    """Requests a second and the 99th percentile of 8 connections in 3 s."""

    def client(_: int) -> list[float]:
        times = []
        with httpx.Client(base_url=address, timeout=60) as http:
            end = time.perf_counter() + 3.0
            while (begun := time.perf_counter()) < end:
                http.post("/v1/overlaps", json=SMALL).raise_for_status()
                times.append(time.perf_counter() - begun)
        return times

    with ThreadPoolExecutor(8) as pool:
        times = sorted(t for found in pool.map(client, range(8)) for t in found)
    return len(times) / 3.0, times[int(0.99 * len(times))]


def main() -> None:
    chosen = sys.argv[1] if len(sys.argv) > 1 else "same"
    run = {"same": same_requests, "memory": memory, "beside": beside}[chosen]
    with tempfile.TemporaryDirectory() as folder:
        run(sys.argv[2] if len(sys.argv) > 2 else f"sqlite:///{folder}/jobs.db", folder)


if __name__ == "__main__":
    main()
