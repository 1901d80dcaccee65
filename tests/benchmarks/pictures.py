"""Time of a progression as a picture and of the guide's pages, as a browser sees them.

    python tests/benchmarks/pictures.py

One web process of the whole service over HTTP. Cold: no picture of that progression was drawn
before. Kept: the same again, from the process. Held: the browser has it and asks (304). Pages: the
slowest ones, each computed at its first visit.
"""

from __future__ import annotations

import http.client
import statistics
import sys
import time
from pathlib import Path
from urllib.parse import urlsplit

sys.path.insert(0, str(Path(__file__).parents[1]))
from ladderband.web.guide.source import names
from live_service import serving

ROUNDS = 40
QUERY = (
    "/v1/progressions?wavenumber_initial_cm1=992,608&wavenumber_final_cm1=923,522"
    "&huang_rhys={},0.08&temperature_k=298.15&format={}"
)


def timed(connection, path, **headers):
    """Milliseconds of one request, and its response."""
    start = time.perf_counter()
    connection.request("GET", path, headers=headers)
    response = connection.getresponse()
    body = response.read()
    elapsed = 1e3 * (time.perf_counter() - start)
    assert response.status == (304 if headers else 200), body
    return elapsed, response


def row(name, times):
    print(f"{name:28}{min(times):9.1f}{statistics.median(times):9.1f}{max(times):9.1f}")


def pages():
    """First and later visits of every page, in a fresh process."""
    with serving("--workers", "1") as server:
        connection = http.client.HTTPConnection(urlsplit(server.url).netloc)
        first = {slug: timed(connection, f"/docs/{slug}")[0] for slug in names()}
        row("all pages, later visits", [timed(connection, f"/docs/{slug}")[0] for slug in names()])
    for slug in sorted(first, key=first.__getitem__)[-4:]:
        row(f"page {slug}, first visit", [first[slug]])


def main():
    print(f"{'ms':28}{'min':>9}{'median':>9}{'max':>9}")
    pages()
    for kind in ("svg", "png"):
        with serving("--workers", "1") as server:
            connection = http.client.HTTPConnection(urlsplit(server.url).netloc)
            paths = [QUERY.format(1 + k / 100, kind) for k in range(ROUNDS)]
            row(f"{kind}, first of a worker", [timed(connection, QUERY.format(0.5, kind))[0]])
            found = [timed(connection, path) for path in paths]
            row(f"{kind}, cold", [elapsed for elapsed, _ in found])
            row(f"{kind}, kept", [timed(connection, path)[0] for path in paths])
            tags = [response.headers["ETag"] for _, response in found]
            held = [
                timed(connection, path, **{"If-None-Match": tag})[0]
                for path, tag in zip(paths, tags, strict=True)
            ]
            row(f"{kind}, held", held)


if __name__ == "__main__":
    main()
