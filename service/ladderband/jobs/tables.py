"""The table of a sweep: made shard by shard, merged part by part, never whole in memory.

A *block* is a run of rows as columns in one JSON object, column name to list. The columns are
``point``, the varied members, the collected members (named by their pointers without the leading
slash) and ``error``, which is null for a point that was answered.
"""

from __future__ import annotations

import io
from collections.abc import Iterable, Iterator, Sequence
from typing import Any

import numpy as np
import orjson

from ladderband.jobs.sweeps import looked_up, tokens

Block = dict[str, list[Any]]

PART_ROWS = 8192
"""Rows of a merged part: under a megabyte as text, ten as objects of a web process that renders it."""


def column_names(pointers: Sequence[str], collect: Sequence[str]) -> list[str]:
    """Names of all columns, in order."""
    varied = [pointer.removeprefix("/") for pointer in pointers]
    collected = [pointer.removeprefix("/") for pointer in collect]
    # a member that is varied and collected under the same name keeps both columns
    collected = [f"answer:{name}" if name in varied else name for name in collected]
    return ["point", *varied, *collected, "error"]


def append_point(
    block: Block, point: int, values: Sequence[Any], found: Sequence[Any], error: str | None
) -> None:
    """Add one point: a row, or as many rows as the lists among the collected values are long."""
    lengths = {len(value) for value in found if isinstance(value, list)}
    if len(lengths) > 1:
        error, found = f"The collected lists have different lengths: {sorted(lengths)}.", []
        lengths = set()
    rows = lengths.pop() if lengths else 1
    columns = iter(block.values())
    for value in (point, *values):
        next(columns).extend([value] * rows)
    width = len(block) - len(values) - 2
    for value in found or [None] * width:
        next(columns).extend(value if isinstance(value, list) else [value] * rows)
    next(columns).extend([error] * rows)


def collected(answer: Any, pointers: Sequence[str]) -> list[Any]:
    """The members of an answer as plain JSON values.

    Raises LookupError with a sentence when one is missing.
    """
    found = []
    for pointer in pointers:
        try:
            value = looked_up(answer, tokens(pointer))
            found.append(orjson.loads(orjson.dumps(value, option=orjson.OPT_SERIALIZE_NUMPY)))
        except LookupError as error:
            raise LookupError(f"The answer has nothing at {pointer!r}: {error.args[0]}") from error
    return found


def merged(blocks: Iterable[bytes]) -> Iterator[bytes]:
    """The blocks of the shards as parts of PART_ROWS rows, then the header as the last part."""
    header = _Header()
    pending: Block = {}
    for data in blocks:
        block: Block = orjson.loads(data)
        header.add(block)
        for name, values in block.items():
            pending.setdefault(name, []).extend(values)
        while len(pending["point"]) >= PART_ROWS:
            yield orjson.dumps({name: values[:PART_ROWS] for name, values in pending.items()})
            pending = {name: values[PART_ROWS:] for name, values in pending.items()}
    if pending.get("point"):
        yield orjson.dumps(pending)
    yield header.dumped()


class _Header:
    """What a reader must know before the first row: columns, their types, rows, failed points."""

    def __init__(self) -> None:
        self.types: dict[str, str] = {}
        self.rows = 0
        self.errors = 0

    def add(self, block: Block) -> None:
        self.rows += len(block["point"])
        self.errors += sum(error is not None for error in block["error"])
        for name, values in block.items():
            self.types[name] = _joined(self.types.get(name, "null"), _type_of(values))

    def dumped(self) -> bytes:
        types = {
            name: "text" if name == "error" else "number" if kind == "null" else kind
            for name, kind in self.types.items()
        }
        return orjson.dumps({"columns": types, "rows": self.rows, "failed_points": self.errors})


_NAMES: dict[type, str] = {
    int: "integer",
    float: "number",
    str: "text",
    bool: "boolean",
    type(None): "null",
}


def _type_of(values: list[Any]) -> str:
    kind = "null"
    for found in set(map(type, values)):
        kind = _joined(kind, _NAMES.get(found, "json"))
    return kind


def _joined(one: str, other: str) -> str:
    """The narrowest type that holds both."""
    if one == other or other == "null":
        return one
    if one == "null":
        return other
    return "number" if {one, other} == {"integer", "number"} else "json"


# ---------------------------------------------------------------- bytes for people and programs


def csv_rows(block: Block, *, header: bool) -> bytes:
    """Rows as CSV (RFC 4180); numbers in the shortest form that reads back exactly."""
    lines = [_csv_line(list(block))] if header else []
    lines += map(_csv_line, zip(*block.values(), strict=True))
    return "".join(lines).encode()


def _csv_line(cells: Iterable[Any]) -> str:
    return ",".join(_csv_cell(cell) for cell in cells) + "\r\n"


def _csv_cell(cell: Any) -> str:
    if cell is None:
        return ""
    text = cell if isinstance(cell, str) else orjson.dumps(cell).decode()
    if any(mark in text for mark in ',"\r\n'):
        return '"' + text.replace('"', '""') + '"'
    return text


def ndjson_rows(block: Block) -> bytes:
    """Rows as one JSON object a line."""
    names = list(block)
    return b"".join(
        orjson.dumps(dict(zip(names, row, strict=True)), option=orjson.OPT_APPEND_NEWLINE)
        for row in zip(*block.values(), strict=True)
    )


NPY_TYPES = {"integer": "<i8", "number": "<f8", "boolean": "?"}


def npy_dtype(columns: dict[str, str]) -> np.dtype[Any]:
    """The structured type of the table's numeric columns; the point number is always one of them.

    A column with gaps (failed points) is written as float64 with NaN in the gaps.
    """
    return np.dtype(
        [
            (name, NPY_TYPES["integer" if name == "point" else "number"])
            for name, kind in columns.items()
            if kind in NPY_TYPES
        ]
    )


def npy_rows(block: Block, dtype: np.dtype[Any]) -> bytes:
    """Rows as the packed records of a structured array."""
    table = np.empty(len(block["point"]), dtype)
    for name in dtype.names or ():
        values = block[name]
        table[name] = [np.nan if v is None else v for v in values] if name != "point" else values
    return table.tobytes()


def npy_header(dtype: np.dtype[Any], rows: int) -> bytes:
    """The start of a .npy file (format 1.0) of ``rows`` records."""
    buffer = io.BytesIO()
    np.lib.format.write_array_header_1_0(
        buffer, {"descr": dtype.descr, "fortran_order": False, "shape": (rows,)}
    )
    return buffer.getvalue()


def csv_file(header: dict[str, Any], blocks: Iterable[Block]) -> Iterator[bytes]:
    yield _csv_line(header["columns"]).encode()
    for block in blocks:
        yield csv_rows(block, header=False)


def ndjson_file(header: dict[str, Any], blocks: Iterable[Block]) -> Iterator[bytes]:
    for block in blocks:
        yield ndjson_rows(block)


def npy_file(header: dict[str, Any], blocks: Iterable[Block]) -> Iterator[bytes]:
    dtype = npy_dtype(header["columns"])
    yield npy_header(dtype, header["rows"])
    for block in blocks:
        yield npy_rows(block, dtype)


def json_file(header: dict[str, Any], blocks: Iterable[Block]) -> Iterator[bytes]:
    """One JSON object: the header's members and ``rows`` as a list of lists."""
    yield orjson.dumps({**header, "columns": list(header["columns"])})[:-1] + b',"table":['
    first = True
    for block in blocks:
        rows = orjson.dumps(list(zip(*block.values(), strict=True)))[1:-1]
        yield rows if first else b"," + rows
        first = False
    yield b"]}"


def arrow_file(header: dict[str, Any], blocks: Iterable[Block]) -> Iterator[bytes]:
    """An Arrow file (IPC), one record batch a part."""
    import pyarrow as pa

    def opened(sink: Any, schema: Any) -> Any:
        return pa.ipc.new_file(sink, schema)

    return _columnar(header, blocks, opened)


def parquet_file(header: dict[str, Any], blocks: Iterable[Block]) -> Iterator[bytes]:
    """A Parquet file, one row group a part."""
    import pyarrow.parquet as pq

    def opened(sink: Any, schema: Any) -> Any:
        return pq.ParquetWriter(sink, schema)

    return _columnar(header, blocks, opened)


def _columnar(header: dict[str, Any], blocks: Iterable[Block], opened: Any) -> Iterator[bytes]:
    import pyarrow as pa

    kinds = {"integer": pa.int64(), "number": pa.float64(), "boolean": pa.bool_()}
    columns = header["columns"]
    schema = pa.schema([(name, kinds.get(kind, pa.string())) for name, kind in columns.items()])
    sink = _Sink()
    with opened(sink, schema) as writer:
        for block in blocks:
            plain = {n: _texts(v) if columns[n] == "json" else v for n, v in block.items()}
            arrays = [pa.array(plain[field.name], field.type) for field in schema]
            writer.write_table(pa.Table.from_arrays(arrays, schema=schema))
            yield sink.taken()
    yield sink.taken()


class _Sink(io.RawIOBase):
    """A file that is handed on piece by piece while it is written."""

    def __init__(self) -> None:
        self._pieces: list[bytes] = []
        self._position = 0

    def writable(self) -> bool:
        return True

    def write(self, data: Any) -> int:
        self._pieces.append(bytes(data))
        self._position += len(self._pieces[-1])
        return len(self._pieces[-1])

    def tell(self) -> int:
        return self._position

    def taken(self) -> bytes:
        """What was written since the last time."""
        pieces, self._pieces = self._pieces, []
        return b"".join(pieces)


def _texts(values: list[Any]) -> list[str | None]:
    """Values of mixed types as JSON text."""
    return [None if value is None else orjson.dumps(value).decode() for value in values]
