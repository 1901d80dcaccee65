"""The digest of a checked request: same question and version, same digest, however it was written.

The question of the use case is hashed, not the body: 95 and 95.0, spaces, the order of members and
defaults spelled out or left away do not matter.
"""

from __future__ import annotations

import hashlib
from fractions import Fraction
from typing import Any

import numpy as np
import orjson

from ladderband import __version__

_OPTIONS = orjson.OPT_SERIALIZE_NUMPY | orjson.OPT_SORT_KEYS


def _plain(value: Any) -> Any:
    if isinstance(value, Fraction):
        return f"{value.numerator}/{value.denominator}"
    if isinstance(value, np.ndarray):
        return np.ascontiguousarray(value)
    raise TypeError(type(value).__name__)


def request_digest(path: str, question: Any) -> str:
    """32 hexadecimal digits that name the answer to one checked request."""
    canonical = orjson.dumps([__version__, path, question], default=_plain, option=_OPTIONS)
    return hashlib.blake2b(canonical, digest_size=16).hexdigest()
