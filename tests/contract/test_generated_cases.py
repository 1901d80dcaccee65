"""schemathesis against the running service, with cases generated from its own description."""

from __future__ import annotations

import pytest
import schemathesis
from hypothesis import HealthCheck, Phase, settings
from schemathesis.checks import CHECKS

from ladderband.web.description import description

SCHEMA = schemathesis.openapi.from_dict(description())
CASES = 60
# Complaints JSON Schema can express. A request that is valid by the document must not meet one of
# them; others (a frequency ratio, rows of one length, a cost) the document says in words only.
EXPRESSIBLE = (
    "member is not known",
    "null is not allowed",
    "is not a number",
    "is not a whole number",
    "is not a list",
    "is not an object",
    "is not a string",
    "neither true nor false",
    "none of the allowed words",
    "outside the allowed range",
)


def contradictions(case, response) -> list[dict]:
    """Complaints about a request that the document itself forbids or allows by schema.

    The range of a number written as text is not expressible.
    """
    source = dict(case.query or {}) if case.method == "GET" else case.body
    return [
        entry
        for entry in response.json().get("errors", [])
        # the request inside a sweep is described where its resource is
        if not (case.path == "/v1/sweeps" and entry["pointer"].startswith("#/request/"))
        and any(phrase in entry["detail"] for phrase in EXPRESSIBLE)
        and not isinstance(value_at(source, entry["pointer"]), (str, Missing))
    ]


class Missing:
    """Nothing is there: the member was derived from another one."""


def value_at(value, pointer):
    """The value a JSON pointer points at."""
    for token in pointer.split("/")[1:]:
        try:
            value = value[int(token)] if isinstance(value, list) else value[token]
        except (KeyError, IndexError, TypeError, ValueError):
            return Missing()
    return value


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
    response = case.call(base_url=base_url, timeout=60)
    excluded = []
    if response.status_code == 422 and case.meta.generation.mode.is_positive:
        assert not contradictions(case, response)
        excluded = [CHECKS.get_one("positive_data_acceptance")]
    case.validate_response(response, excluded_checks=excluded)
