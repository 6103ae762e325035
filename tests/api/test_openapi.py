"""The OpenAPI document: as committed, valid, with examples that fit, problems and scopes for all."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any

import httpx
import pytest
from fastapi.routing import APIRoute
from jsonschema import Draft202012Validator
from openapi_spec_validator import validate

from service.api.deps import Needs
from service.api.openapi import calls
from service.app import create_app
from service.application import access
from service.settings import Settings
from support import scopes
from support.api import Api
from support.house import ROOT

JSON = "application/json"
OPEN = {"get_live", "get_ready", "get_metrics", "explain_problem"}
"""What answers without a key: for machines that watch, and pages that explain."""


@pytest.fixture(scope="module")
def app() -> Any:
    return create_app(Settings(database_url="sqlite://"))


@pytest.fixture(scope="module")
def document(app: Any) -> dict[str, Any]:
    made: dict[str, Any] = json.loads(json.dumps(app.openapi()))
    return made


def operations(document: dict[str, Any]) -> Iterator[tuple[str, str, dict[str, Any]]]:
    for path, methods in document["paths"].items():
        for method, operation in methods.items():
            yield path, method, operation


def test_the_committed_document_is_the_apps(document: dict[str, Any]) -> None:
    """When it is not: `shuntbook openapi > openapi/openapi.json`, and look at what changed."""
    assert json.loads((ROOT / "openapi" / "openapi.json").read_text()) == document


def test_the_document_is_valid(document: dict[str, Any]) -> None:
    validate(document)


def test_every_operation_has_a_name_of_its_own(document: dict[str, Any]) -> None:
    names = [operation["operationId"] for _, _, operation in operations(document)]
    assert sorted(set(names)) == sorted(names)


def test_every_operation_says_what_it_does(document: dict[str, Any]) -> None:
    assert [path for path, _, operation in operations(document) if not operation.get("description")] == []


def resolved(document: dict[str, Any], schema: dict[str, Any]) -> dict[str, Any]:
    while "$ref" in schema:
        schema = document["components"]["schemas"][schema["$ref"].rpartition("/")[2]]
    return schema


def has_example(document: dict[str, Any], content: dict[str, Any]) -> bool:
    """An example beside the schema, in it, or for the items of a page or array."""
    schema = resolved(document, content["schema"])
    if "example" in content or "examples" in content or "examples" in schema:
        return True
    items = schema.get("items") or schema.get("properties", {}).get("items", {}).get("items")
    return items is not None and has_example(document, {"schema": items})


def contents(operation: dict[str, Any]) -> Iterator[tuple[str, dict[str, Any]]]:
    if JSON in (sent := operation.get("requestBody", {}).get("content", {})):
        yield "request", sent[JSON]
    for status, response in operation["responses"].items():
        if status.startswith("2") and JSON in response.get("content", {}):
            yield status, response["content"][JSON]


def test_every_json_body_has_an_example(document: dict[str, Any]) -> None:
    without = [
        (operation["operationId"], where)
        for _, _, operation in operations(document)
        for where, content in contents(operation)
        if not has_example(document, content)
    ]
    assert without == []


def test_every_example_fits_its_schema(document: dict[str, Any], subtests: pytest.Subtests) -> None:
    for name, schema in document["components"]["schemas"].items():
        for example in schema.get("examples", ()):
            with subtests.test(schema=name):
                root = {"$ref": f"#/components/schemas/{name}", "components": document["components"]}
                errors = [error.message for error in Draft202012Validator(root).iter_errors(example)]
                assert errors == []


def test_every_problem_is_documented_as_one(document: dict[str, Any]) -> None:
    for _, _, operation in operations(document):
        assert {"500", "503"} <= set(operation["responses"])
        for status, response in operation["responses"].items():
            assert response["description"]
            assert status < "400" or set(response["content"]) == {"application/problem+json"}


def test_every_route_asks_for_a_key_exactly_once(app: Any) -> None:
    for route in app.routes:
        if isinstance(route, APIRoute) and route.include_in_schema:
            asked = [call for call in calls(route) if isinstance(call, Needs)]
            assert len(asked) == (0 if route.name in OPEN else 1), route.path


def test_scopes_of_writes_are_not_those_of_reads(document: dict[str, Any]) -> None:
    for path, method, operation in operations(document):
        scope = operation.get("x-scope")
        assert scope in {*access.SCOPES, "any", None}
        if method != "get" and not path.startswith(("/v1/checks", "/v1/calculations/")):  # which keep nothing
            assert scope in set(access.SCOPES) - {"read"}


def test_the_table_of_scopes_is_the_apps(document: dict[str, Any]) -> None:
    """When it is not: `python -m support.scopes` in `tests/` prints it for DEVELOPERS.md."""
    written = (ROOT / "DEVELOPERS.md").read_text().partition(scopes.BEGIN)[2].partition(scopes.END)[0]
    assert written.strip() == scopes.table(document)


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_the_pages_need_no_internet(api: Api) -> None:
    client = api.client()
    for page in ("/docs", "/redoc"):
        text = client.get(page).text
        sources = [part.split('"')[0] for part in text.split('src="')[1:]]
        sources += [part.split('"')[0] for part in text.split('href="')[1:]]
        assert sources
        for source in sources:
            assert source.startswith("/"), source
            answer: httpx.Response = client.get(source)
            assert answer.status_code == 200
    assert client.get("/openapi.json").json()["openapi"].startswith("3.1")
