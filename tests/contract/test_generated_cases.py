"""schemathesis against the running service, with cases generated from its own description."""

from __future__ import annotations

from types import SimpleNamespace

import pytest
import schemathesis
from hypothesis import HealthCheck, Phase, settings
from marshmallow import ValidationError
from schemathesis.checks import CHECKS

from ladderband.web import sweeps
from ladderband.web.description import description
from ladderband.web.resource import VIEW
from ladderband.web.resources import RESOURCES

SCHEMA = schemathesis.openapi.from_dict(description())
CASES = 60
# documents of an outside standard, of which only the members we need are described
LOOSE = ("#/initial/qcschema/", "#/final/qcschema/")
BY_PATH = {resource.path: resource for resource in RESOURCES}
BY_PATH[sweeps.PATH] = SimpleNamespace(request=sweeps.REQUEST)


def wrong_only_together(case, response) -> bool:
    """Whether each member is right by itself, so that only their combination was refused.

    JSON Schema cannot say a frequency ratio, a cost, or the range of a decimal string.
    """
    resource = BY_PATH[case.path]
    if case.method == "GET":
        names = {k: [str(v)] for k, v in case.query.items() if k not in VIEW.fields}
        parameters = resource.short_form.read(names)
        try:
            body = resource.short_form.body(parameters)
        except ValidationError:  # columns of two lengths
            return True
    else:
        body = case.body
    try:
        resource.request.load(body)
    except ValidationError:
        pointers = [entry["pointer"] for entry in response.json()["errors"]]
        return all(isinstance(value_at(body, p), str) or p.startswith(LOOSE) for p in pointers)
    return True


def value_at(body, pointer):
    """The value a JSON pointer points at, None when there is none."""
    for token in pointer.split("/")[1:]:
        try:
            body = body[int(token)] if isinstance(body, list) else body[token]
        except (KeyError, IndexError, TypeError, ValueError):
            return None
    return body


@pytest.fixture(scope="module")
def base_url(live_server):
    return live_server.url


@SCHEMA.exclude(path="/metrics").parametrize()
@settings(
    max_examples=CASES,
    derandomize=True,
    deadline=None,
    database=None,
    phases=[Phase.explicit, Phase.generate],
    suppress_health_check=list(HealthCheck),
)
def test_generated_case(case, base_url):
    response = case.call(base_url=base_url)
    excluded = []
    if (
        response.status_code == 422
        and case.meta.generation.mode.is_positive
        and wrong_only_together(case, response)
    ):
        excluded = [CHECKS.get_one("positive_data_acceptance")]
    case.validate_response(response, excluded_checks=excluded)
