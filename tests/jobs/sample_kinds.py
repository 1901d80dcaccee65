"""Kinds for tests: small arithmetic, and the misbehaviour that engines must survive."""

from __future__ import annotations

import math
import os
import signal
import time
from collections.abc import Callable
from dataclasses import replace
from hashlib import sha256
from pathlib import Path
from typing import Any

import orjson

from ladderband.jobs.kinds import Kind, Kinds, Refused
from ladderband.jobs.submissions import canonical
from ladderband.numerics.accuracy import Deadline

Request = dict[str, Any]


def _add(request: Request, deadline: Deadline) -> Request:
    return {"sum": request["a"] + request["b"], "root": math.sqrt(abs(request["a"]))}


def _sleep(request: Request, deadline: Deadline) -> Request:
    time.sleep(request["seconds"])
    mark(request)
    return {"slept_s": request["seconds"], "x": math.sin(request.get("x", 0.0))}


def _spin(request: Request, deadline: Deadline) -> Request:
    """Busy for a time, then a number that shows any difference in the last bit."""
    end = time.perf_counter() + request["seconds"]
    while time.perf_counter() < end:
        deadline.check()
    mark(request)
    x = request.get("x", 0.0)
    return {"x": x, "y": math.sin(x) / 3.0, "z": math.exp(-x * 1e-3)}


def _work(request: Request, deadline: Deadline) -> Request:
    """A fixed amount of arithmetic."""
    x = y = request["x"]
    for _ in range(request["steps"]):
        y = y * 0.999 + 0.5
    return {"x": x, "y": y}


def mark(request: Request) -> None:
    """Append a line to a file, so that tests can count what was computed."""
    if "mark" in request:
        with Path(request["mark"]).open("a") as file:
            file.write(f"{request.get('x', 0)}\n")


def _crash(request: Request, deadline: Deadline) -> Request:
    if request.get("x", 0) == request.get("at", 0):
        os.kill(os.getpid(), signal.SIGKILL)
    return {"x": request.get("x", 0)}


def _hog(request: Request, deadline: Deadline) -> Request:
    return {"size": len(bytearray(request["bytes"]))}


def _refuse(request: Request, deadline: Deadline) -> Request:
    if request.get("x", 0) % 2:
        raise Refused({"type": "odd", "title": "Odd", "status": 422, "detail": "x is odd."})
    if request.get("x", 0) == 4:
        raise RuntimeError("a defect")
    return {"half": request.get("x", 0) // 2, "steps": list(range(request.get("steps", 1)))}


def _estimate(request: Request) -> float:
    if not isinstance(request.get("x", 0), int | float):
        raise Refused({"type": "validation", "status": 422, "detail": "x is not a number."})
    return float(request.get("seconds", 0.001))


def kinds() -> dict[str, Kind]:
    answers = [_add, _sleep, _spin, _work, _crash, _hog, _refuse]
    return {a.__name__[1:]: _kind(a) for a in answers}


def _kind(answer: Callable[[Request, Deadline], Request]) -> Kind:
    def stored(request: Request, deadline: Deadline) -> bytes:
        return orjson.dumps(answer(request, deadline))

    return Kind(answer.__name__[1:], _estimate, answer, stored)


def counted_kinds() -> Kinds:
    """The service's own kinds; each single overlaps request computed leaves its digest in a file."""
    from ladderband.web.kinds import kinds as service_kinds

    found = service_kinds()
    overlaps, file = found["overlaps"], Path(os.environ["LADDERBAND_TEST_MARKS"])

    def stored(request: Request, deadline: Deadline) -> bytes:
        with file.open("a") as opened:
            opened.write(sha256(canonical(request)).hexdigest() + "\n")
        return overlaps.stored(request, deadline)

    return {**found, "overlaps": replace(overlaps, stored=stored)}
