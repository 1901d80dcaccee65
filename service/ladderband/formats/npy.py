"""The .npy format: one array, exactly as in memory, little-endian float64 or integers."""

from __future__ import annotations

import io
from collections.abc import Iterator
from typing import Any

import numpy as np

BLOCK = 1 << 17
"""Numbers sent in one piece: 1 MB."""


def npy_body(array: Any) -> Iterator[bytes]:
    """An array as the bytes ``numpy.save`` would write, in pieces."""
    array = np.ascontiguousarray(array)
    array = array.astype(array.dtype.newbyteorder("<"), copy=False)
    head = io.BytesIO()
    np.lib.format.write_array_header_1_0(head, np.lib.format.header_data_from_array_1_0(array))
    yield head.getvalue()
    flat = array.reshape(-1)
    for start in range(0, flat.size, BLOCK):
        yield flat[start : start + BLOCK].tobytes()
