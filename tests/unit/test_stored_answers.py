"""Answers in the job records: every resource's answer comes back, and nothing else is made."""

from __future__ import annotations

import pickle

import pytest

from ladderband.formats.stored import UnreadableAnswer, dump_answer, load_answer
from ladderband.numerics.accuracy import Deadline
from ladderband.schemas.query import ViewQuery
from ladderband.usecases.limits import Limits
from ladderband.web.resources import RESOURCES

EXAMPLES = [
    pytest.param(resource, body, id=f"{resource.name}-{name}")
    for resource in RESOURCES
    for name, body in resource.examples.items()
]


@pytest.mark.parametrize(("resource", "body"), EXAMPLES)
def test_an_answer_comes_back_with_the_same_numbers(resource, body):
    loaded = resource.request.read(body)
    answer = resource.use_case(loaded.question, Limits(work_s=60.0), Deadline.none())
    data = dump_answer(answer)
    again = load_answer(data[k : k + 1000] for k in range(0, len(data), 1000))
    view = ViewQuery().read({})
    for name in resource.offered:
        # plots hold identifiers of their own; many digits have no npy
        if name not in ("svg", "png") and not (name == "npy" and "digits" in body):
            first, second = (
                content(resource.rendered(loaded, found, name, view)) for found in (answer, again)
            )
            assert first == second


def content(body):
    return body if isinstance(body, bytes) else b"".join(body)


class Harmful:
    def __reduce__(self):
        return print, ("code ran",)


@pytest.mark.parametrize(
    "data",
    [pickle.dumps(Harmful()), pickle.dumps(Deadline), b"", b"nonsense", dump_answer(1)[:-1]],
    ids=["a call", "a class by name only", "empty", "nonsense", "cut"],
)
def test_anything_else_is_refused(data, capsys):
    try:
        found = load_answer([data])
    except UnreadableAnswer:
        pass
    else:
        assert found is Deadline
    assert capsys.readouterr().out == ""
