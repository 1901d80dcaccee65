"""What may be used again: by browsers and proxies, and in this process."""

from __future__ import annotations

import threading
from collections import OrderedDict

from flask import Response, g, request

MAX_AGE_S = 3600
"""The answer to a question never changes within one version of the service, so what a GET answered
may be shown without asking. Only an upgrade can change it, or the first key that is asked for; an
hour is how long either may take to reach everybody. After it a cache must ask, and is told 304."""

KEPT_BYTES = 16_000_000


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


class KeptPictures:
    """Plots by the tag of their answer; the least recently shown make room."""

    def __init__(self, most_bytes: int = KEPT_BYTES) -> None:
        self.most_bytes = most_bytes
        self._kept: OrderedDict[str, bytes] = OrderedDict()
        self._size = 0
        self._lock = threading.Lock()

    def find(self, tag: str) -> bytes | None:
        """The plot of this tag, None when it is not here."""
        with self._lock:
            if tag in self._kept:
                self._kept.move_to_end(tag)
            return self._kept.get(tag)

    def keep(self, tag: str, picture: bytes) -> None:
        """Keep a plot, unless it alone would fill the place."""
        with self._lock:
            if tag in self._kept or len(picture) > self.most_bytes // 4:
                return
            self._kept[tag] = picture
            self._size += len(picture)
            while self._size > self.most_bytes:
                self._size -= len(self._kept.popitem(last=False)[1])
