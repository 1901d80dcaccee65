"""What a sweep on all compute processes costs the small requests beside it.

Run: python tests/benchmarks/jobs_beside.py [database URL]

One sweep keeps every compute process busy; to measure without it they are suspended, in turns of
a second, so that other work on the machine disturbs both alike.
"""

from __future__ import annotations

import json
import os
import statistics
import sys
import tempfile
import time
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from http.client import HTTPConnection
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import psutil

sys.path.insert(0, str(Path(__file__).parents[1]))

from jobs.engine_helpers import OVERLAPS
from live_service import LiveServer, serving

TURNS = 12
TURN_S = 1.0

SWEEP = {
    "resource": "overlaps",
    "request": {**OVERLAPS, "v_initial_max": 25, "v_final_max": 25, "digits": 50},
    "vary": [{"pointer": "/displacement", "range": {"start": 0.1, "stop": 3.0, "points": 500_000}}],
    "collect": ["/sums/0"],
}
HEAD = {"Content-Type": "application/json"}

Times = list[float]


def send(http: HTTPConnection, path: str, body: Any) -> bytes:
    http.request("POST", path, json.dumps(body), HEAD)
    answer = http.getresponse()
    data = answer.read()
    assert answer.status in {200, 202}, data
    return data


def one_connection(address: str, _: int) -> Times:
    """The time of each small request of a turn, one after the other."""
    http = HTTPConnection(address, timeout=60)
    send(http, "/v1/overlaps", OVERLAPS)
    times, end = [], time.perf_counter() + TURN_S
    while (begun := time.perf_counter()) < end:
        send(http, "/v1/overlaps", OVERLAPS)
        times.append(time.perf_counter() - begun)
    http.close()
    return times


def small_requests(address: str, connections: int) -> Times:
    with ThreadPoolExecutor(connections) as pool:
        found = pool.map(partial(one_connection, address), range(connections))
        return [seconds for times in found for seconds in times]


def compute_processes(live: LiveServer) -> list[psutil.Process]:
    """Those of the engine for sweeps: the busy ones."""
    found = [p for p in live.family() if "ladderband.jobs.child" in p.cmdline()]
    return [p for p in found if p.nice() == 19]


def begun(live: LiveServer, http: HTTPConnection) -> list[psutil.Process]:
    """The compute processes once all of them work on the sweep."""
    send(http, "/v1/sweeps", SWEEP)
    time.sleep(15.0)
    return compute_processes(live)


def measured(live: LiveServer, connections: int) -> tuple[list[Times], list[Times]]:
    """The turns alone and those beside the sweep."""
    address = urlsplit(live.url).netloc
    busy = begun(live, HTTPConnection(address, timeout=60))
    alone, beside = [], []
    for _ in range(TURNS):
        for process in busy:
            process.suspend()
        alone.append(small_requests(address, connections))
        for process in busy:
            process.resume()
        beside.append(small_requests(address, connections))
    used = statistics.mean(sum(p.cpu_times()[:2]) for p in busy)
    print(f"{len(busy)} compute processes, {used:.0f} s of processor each so far")
    return alone, beside


def show(name: str, turns: list[Times]) -> None:
    times = sorted(seconds for turn in turns for seconds in turn)
    rate = len(times) / (len(turns) * TURN_S)
    middle, tail = 1e3 * statistics.median(times), 1e3 * times[int(0.99 * len(times))]
    print(f"  {name:15} {rate:6.0f} requests/s   median {middle:5.2f} ms   p99 {tail:6.2f} ms")


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        url = sys.argv[1] if len(sys.argv) > 1 else f"sqlite:///{folder}/jobs.db"
        with serving("--database-url", url, data_dir=Path(folder)) as live:
            for connections in (1, 8):
                alone, beside = measured(live, connections)
                print(f"{connections} connections, load {os.getloadavg()[0]:.1f}")
                show("alone", alone)
                show("beside a sweep", beside)
                pairs = zip(alone, beside, strict=True)
                ratios = sorted(statistics.median(b) / statistics.median(a) for a, b in pairs)
                print(f"  median, beside / alone: {statistics.median(ratios):.2f}", end="   each ")
                print(" ".join(f"{ratio:.2f}" for ratio in ratios))


if __name__ == "__main__":
    main()
