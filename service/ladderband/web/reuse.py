"""What may be used again: by browsers and proxies, and in this process."""

from __future__ import annotations

import threading
from collections import OrderedDict

from flask import Response, g, request

MAX_AGE_S = 3600
"""The answer to a question never changes within one version of the service, so what a GET answered
may be shown without asking. Only an upgrade can change it, or the first key that is asked for; an
hour is how long either may take to reach everybody. After it a cache must ask, and is told 304."""

PICTURE_BYTES = 16_000_000
TEXT_BYTES = 8_000_000
"""Apart, because ten thousand answers of a fitting loop must not push a dashboard's picture out."""

_PICTURES = frozenset({"svg", "png"})


def allow_reuse(response: Response) -> Response:
    """Say who may keep the answer to the present request, and for how long.

    With a key only the client itself may: a proxy must not hand the answer to somebody without one.
    The answer to a POST is nobody's to keep; its ETag serves If-None-Match.
    """
    response.headers["Vary"] = "Accept"
    if request.method == "POST":
        response.headers["Cache-Control"] = "private, max-age=0, must-revalidate"
        return response
    keeper = "private" if g.get("key_id") else "public"
    response.headers["Cache-Control"] = f"{keeper}, max-age={MAX_AGE_S}, must-revalidate"
    return response


class KeptBodies:
    """Bodies of answers by their tag; the least recently sent make room."""

    def __init__(self, most_bytes: int) -> None:
        self.most_bytes = most_bytes
        self._kept: OrderedDict[str, bytes] = OrderedDict()
        self._size = 0
        self._lock = threading.Lock()

    def find(self, tag: str) -> bytes | None:
        """The body of this tag, None when it is not here."""
        with self._lock:
            if tag in self._kept:
                self._kept.move_to_end(tag)
            return self._kept.get(tag)

    def keep(self, tag: str, body: bytes) -> None:
        """Keep a body, unless it alone would fill the place."""
        with self._lock:
            if tag in self._kept or len(body) > self.most_bytes // 4:
                return
            self._kept[tag] = body
            self._size += len(body)
            while self._size > self.most_bytes:
                self._size -= len(self._kept.popitem(last=False)[1])


class Kept:
    """What one web process keeps: pictures, and everything else."""

    def __init__(self) -> None:
        self._pictures = KeptBodies(PICTURE_BYTES)
        self._texts = KeptBodies(TEXT_BYTES)

    def of(self, name: str) -> KeptBodies:
        """The place for answers in a format."""
        return self._pictures if name in _PICTURES else self._texts
