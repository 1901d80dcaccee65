"""``ladderband demo``: start the service, ask one question over HTTP, show the answer, stop."""

from __future__ import annotations

import contextlib
import json
import subprocess
import sys
import urllib.request
from collections.abc import Iterator
from pathlib import Path
from typing import Any

# Invented for the demonstration, of the size found in aromatic molecules.
QUESTION: dict[str, Any] = {
    "process": "absorption",
    "origin_cm1": 26650.0,
    "temperature_k": 298.15,
    "threshold": 0.02,
    "modes": [
        {
            "label": "ring breathing",
            "wavenumber_initial_cm1": 992.0,
            "wavenumber_final_cm1": 923.0,
            "huang_rhys": 1.25,
        },
        {
            "label": "in-plane bend",
            "wavenumber_initial_cm1": 608.0,
            "wavenumber_final_cm1": 522.0,
            "displacement": -0.4,
        },
    ],
}
PATH = "/v1/progressions"
PICTURE = "ladderband-demo.svg"


def run_demo(folder: Path) -> int:
    """Run the demonstration; writes one SVG into ``folder``."""
    with service() as url:
        print(f"POST {url}{PATH}")
        print(json.dumps(QUESTION, indent=2), end="\n\n")
        answer = json.loads(post(url + PATH, QUESTION, "application/json"))
        print(table(answer))
        picture = folder / PICTURE
        view = "?title=Two+modes+at+298.15+K&width=900"
        picture.write_bytes(post(url + PATH + view, QUESTION, "image/svg+xml"))
    print(f"\nThe sticks are drawn in {picture}.")
    return 0


@contextlib.contextmanager
def service() -> Iterator[str]:
    """The service on a free port of this machine; its address."""
    command = [sys.executable, "-m", "ladderband", "serve", "--host", "127.0.0.1", "--port", "0"]
    command += ["--workers", "1", "--no-log-requests"]
    print("Starting the service (its first start compiles the kernels, about half a minute) ...")
    process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    try:
        assert process.stdout is not None
        line = process.stdout.readline()
        if "http://" not in line:
            raise SystemExit("ladderband: the service did not start; see the lines above.")
        yield line.split()[-1]
    finally:
        process.terminate()
        process.wait()


def post(url: str, body: dict[str, Any], accept: str) -> bytes:
    """The body of the answer to one POST."""
    headers = {"Content-Type": "application/json", "Accept": accept}
    request = urllib.request.Request(url, json.dumps(body).encode(), headers)
    with urllib.request.urlopen(request, timeout=60) as response:
        content: bytes = response.read()
    return content


def table(answer: dict[str, Any]) -> str:
    """The lines as a table for people, and what the answer says about itself."""
    lines = answer["lines"]
    columns = (lines["position_cm1"], lines["intensity"], lines["assignment"])
    rows = [
        f"{position:>14.2f}  {intensity:>10.6f}  {'#' * round(60 * intensity):<24}  {name}"
        for position, intensity, name in zip(*columns, strict=True)
    ]
    head = f"{'position/cm^-1':>14}  {'intensity':>10}  {'':<24}  assignment (mode^final_initial)"
    complete, accuracy = answer["completeness"], answer["accuracy"]
    foot = (
        f"captured {complete['captured']:.6f} of {complete['total']:g}, "
        f"missing at most {complete['missing_at_most']:.3g} ({accuracy['evidence']})\n"
        f"every intensity is right to {_largest(accuracy['bound']):.2g} "
        f"({accuracy['evidence']}, by {accuracy['route']})"
    )
    notes = [f"warning: {warning}" for warning in answer["warnings"]]
    return "\n".join([head, *rows, "", foot, *notes])


def _largest(bound: Any) -> float:
    return float(max(bound)) if isinstance(bound, list) else float(bound)
