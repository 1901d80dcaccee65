"""The OpenAPI document: valid, fresh, complete, and every example answered as described."""

from __future__ import annotations

import json
from pathlib import Path

import jsonschema
import pytest
from openapi_spec_validator import validate

from ladderband.schemas.query import VIEW_HELP
from ladderband.web.description import description, files, stale_files
from ladderband.web.resources import RESOURCES

FOLDER = Path(__file__).parents[2] / "openapi"
EXAMPLES = {
    f"{path.parent.name}/{path.stem}": path
    for path in sorted((FOLDER / "examples").rglob("*.json"))
}


@pytest.fixture(scope="module")
def document():
    return description()


def answer_schema(document, resource, schema_name):
    """The answer's schema with the components it refers to."""
    return {"$ref": f"#/components/schemas/{schema_name}", "components": document["components"]}


def test_is_valid(document):
    validate(document)


def test_is_fresh():
    assert not stale_files(FOLDER), "refresh with: ladderband describe"


def test_is_what_the_service_serves(client):
    assert client.get("/openapi.json").data == files()["openapi.json"]


def test_every_operation_has_its_own_camel_case_name(document):
    names = [op["operationId"] for path in document["paths"].values() for op in path.values()]
    assert len(set(names)) == len(names)
    assert all(name[0].islower() and name.isalnum() for name in names)


def test_every_property_is_described(document):
    bare = [
        f"{name}.{member}"
        for name, schema in document["components"]["schemas"].items()
        if name not in ("Problem",)
        for member, described in schema.get("properties", {}).items()
        if not described.get("description")
    ]
    assert not bare


def test_exclusive_bounds_are_published_as_such(document):
    width = document["components"]["schemas"]["LineShape"]["properties"]["fwhm_cm1"]
    assert width["exclusiveMinimum"] == 0
    assert "minimum" not in width


@pytest.mark.parametrize("path", EXAMPLES.values(), ids=EXAMPLES)
def test_example_sent_as_it_is_is_answered_as_described(path, client, document):
    address = f"/v1/{path.parent.name}"
    response = client.post(address, data=path.read_bytes(), content_type="application/json")
    assert response.status_code == 200, response.text
    operation = document["paths"][address]["post"]
    schema = operation["responses"]["200"]["content"]["application/json"]["schema"]
    jsonschema.validate(response.json, {**schema, "components": document["components"]})


@pytest.mark.parametrize("path", EXAMPLES.values(), ids=EXAMPLES)
def test_example_matches_its_own_request_schema(path, document):
    content = document["paths"][f"/v1/{path.parent.name}"]["post"]["requestBody"]["content"]
    schema = {**content["application/json"]["schema"], "components": document["components"]}
    jsonschema.validate(json.loads(path.read_text()), schema)


FORMATS = [(resource, name) for resource in RESOURCES for name in resource.offered]


@pytest.mark.parametrize(
    ("resource", "name"), FORMATS, ids=[f"{r.operation_id}-{n}" for r, n in FORMATS]
)
def test_every_format_of_every_resource(resource, name, client, document):
    body = next(iter(resource.examples.values()))
    response = client.post(f"{resource.path}?format={name}", json=body)
    assert response.status_code == 200, response.text
    described = document["paths"][resource.path]["post"]["responses"]["200"]["content"]
    assert response.mimetype in described
    assert len(response.data) > 100


def test_view_parameters_are_published_only_where_they_matter(document):
    for resource in RESOURCES:
        parameters = document["paths"][resource.path]["post"]["parameters"]
        names = {entry["name"] for entry in parameters}
        for name, formats in VIEW_HELP.items():
            assert (name in names) == bool(formats & set(resource.offered))
