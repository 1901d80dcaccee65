"""The body reader: lengths, chunks, depth, repeated members."""

from __future__ import annotations

import io
import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from ladderband.web.body import parse, read_bytes, read_json
from ladderband.web.problems import BodyTooLarge, MalformedJson, UnsupportedMediaType

VALUES = st.recursive(
    st.none()
    | st.booleans()
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(max_size=6),
    lambda inner: (
        st.lists(inner, max_size=4) | st.dictionaries(st.text(max_size=4), inner, max_size=4)
    ),
    max_leaves=20,
)


class Pieces(io.RawIOBase):
    """A stream that hands out a few bytes at a time, as a chunked body may."""

    def __init__(self, content, size):
        self.content, self.size = content, size

    def read(self, count=-1):
        piece, self.content = self.content[: self.size], self.content[self.size :]
        return piece


def chunked(content, size=3):
    return {"wsgi.input": Pieces(content, size), "wsgi.input_terminated": True}


def of_length(content):
    return {"wsgi.input": io.BytesIO(content), "CONTENT_LENGTH": str(len(content))}


def test_bodies_at_and_above_the_limit():
    for environ in (of_length(b"x" * 10), chunked(b"x" * 10)):
        assert read_bytes(environ, 10) == b"x" * 10
    for environ in (of_length(b"x" * 11), chunked(b"x" * 11)):
        with pytest.raises(BodyTooLarge):
            read_bytes(environ, 10)


def test_a_large_length_is_refused_without_reading():
    environ = {"wsgi.input": None, "CONTENT_LENGTH": "9" * 30}
    with pytest.raises(BodyTooLarge):
        read_bytes(environ, 10)


def test_no_length_and_no_end_is_no_body():
    assert read_bytes({"wsgi.input": io.BytesIO(b"never read")}, 100) == b""


@given(VALUES)
def test_parses_what_json_writes(value):
    """The standard library's json is the outside judge."""
    assert parse(json.dumps(value).encode(), 50) == value


def nested(depth):
    return b"[" * depth + b"]" * depth


def test_depth_at_and_above_the_limit():
    assert parse(nested(5), 5) == [[[[[]]]]]
    for depth in (6, 7, 500, 2000):
        with pytest.raises(MalformedJson):
            parse(nested(depth), 5)


def test_depth_through_objects_and_lists():
    assert parse(b'{"a": [{"b": 1}]}', 3)
    with pytest.raises(MalformedJson):
        parse(b'{"a": [{"b": 1}]}', 2)


@pytest.mark.parametrize(
    "raw", [b'{"a": 1, "a": 1}', b'{"x": {"a:": 1, "a:": 2}}', b'[{"a": 1}, {"b": 1, "b": 2}]',
            b'{"\\u0061": 1, "a": 2}']
)  # fmt: skip
def test_repeated_members(raw):
    with pytest.raises(MalformedJson, match="more than once"):
        parse(raw, 10)


@pytest.mark.parametrize("raw", [b'{"a:b": 1, "c": ":::"}', b'[{"a": 1}, {"a": 2}]', b'":"'])
def test_colons_in_strings_are_not_members(raw):
    assert parse(raw, 10) == json.loads(raw)


@pytest.mark.parametrize(
    "kind", ["application/json", "Application/JSON; charset=utf-8", "application/a+json"]
)
def test_json_media_types(kind):
    assert read_json(of_length(b"{}") | {"CONTENT_TYPE": kind}, 10, 5) == {}


@pytest.mark.parametrize("kind", ["", "text/json", "application/jsonx", "multipart/form-data"])
def test_other_media_types(kind):
    with pytest.raises(UnsupportedMediaType):
        read_json(of_length(b"{}") | {"CONTENT_TYPE": kind}, 10, 5)
