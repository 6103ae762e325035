"""The OpenAPI document: what the framework knows of the routes, completed by what our dependencies say.

Bodies read as bytes, the scope each operation needs, and the problems it may answer with are filled in
here, so that no route repeats them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any

from fastapi import FastAPI
from fastapi.dependencies.models import Dependant
from fastapi.openapi.utils import get_openapi
from fastapi.routing import APIRoute
from pydantic import BaseModel, TypeAdapter
from pydantic.json_schema import models_json_schema

from service.api import conditional
from service.api.bodies import JsonBody, RawBody
from service.api.deps import Needs
from service.api.problem_kinds import KINDS
from service.api.problems import MEDIA_TYPE

_REF = "#/components/schemas/"
_SECURITY = {
    "key": {"type": "http", "scheme": "bearer", "description": "An access key"},
    "key_as_password": {
        "type": "http",
        "scheme": "basic",
        "description": "On GET only: any name, and the access key as password",
    },
}
_HEADERS = {401: "WWW-Authenticate", 503: "Retry-After"}
_PROBLEM = {
    "type": "object",
    "required": ["type", "title", "status", "detail", "instance", "errors"],
    "properties": {
        "type": {"type": "string", "format": "uri-reference"},
        "title": {"type": "string"},
        "status": {"type": "integer"},
        "detail": {"type": "string"},
        "instance": {"type": "string", "description": "The request's id"},
        "errors": {
            "type": "array",
            "items": {
                "type": "object",
                "required": ["code", "reason"],
                "properties": {
                    "code": {"type": "string"},
                    "reason": {"type": "string"},
                    "pointer": {"type": "string"},
                    "parameter": {"type": "string"},
                    "line": {"type": "integer"},
                    "column": {"type": "string"},
                },
            },
        },
        "stored_digest": {"type": "string"},
        "server_time": {"type": "string", "format": "date-time"},
    },
}


def install(app: FastAPI) -> None:
    """Have the app answer `/openapi.json` with the completed document, made when first asked for."""
    app.openapi = lambda: document(app)  # type: ignore[method-assign]


def document(app: FastAPI) -> dict[str, Any]:
    """The whole document."""
    if app.openapi_schema is None:
        made = get_openapi(
            title=app.title, version=app.version, description=app.description, routes=app.routes
        )
        routes = [route for route in app.routes if isinstance(route, APIRoute) and route.include_in_schema]
        _complete(made, routes)
        app.openapi_schema = made
    return app.openapi_schema


def calls(route: APIRoute) -> list[Callable[..., Any]]:
    """Every dependency of a route, at whatever depth."""
    return list(_calls(route.dependant))


def _calls(dependant: Dependant) -> Iterator[Callable[..., Any]]:
    for inner in dependant.dependencies:
        if inner.call is not None:
            yield inner.call
        yield from _calls(inner)


def _complete(made: dict[str, Any], routes: list[APIRoute]) -> None:
    components = made.setdefault("components", {})
    schemas = components.setdefault("schemas", {})
    for unused in ("HTTPValidationError", "ValidationError"):
        schemas.pop(unused, None)
    schemas["Problem"] = _PROBLEM
    components["securitySchemes"] = _SECURITY
    _restore_nulls(schemas, routes)
    models = {call.model for route in routes for call in calls(route) if isinstance(call, JsonBody)}
    references = _add_schemas(schemas, models)
    for route in routes:
        for method in route.methods or ():
            _complete_operation(made["paths"][route.path][method.lower()], route, method, references)


def _restore_nulls(schemas: dict[str, Any], routes: list[APIRoute]) -> None:
    """Put answers' schemas in again: the framework drops every null, from examples too."""
    answers = [(route.name, TypeAdapter(route.response_model)) for route in routes if route.response_model]
    _, definitions = TypeAdapter.json_schemas(
        [(name, "serialization", answer) for name, answer in answers], ref_template=f"{_REF}{{model}}"
    )
    schemas.update({name: schema for name, schema in definitions["$defs"].items() if name in schemas})


def _add_schemas(schemas: dict[str, Any], models: set[type[BaseModel]]) -> dict[type[BaseModel], str]:
    """Add the schemas of request bodies; one that differs from an answer's of the same name is renamed."""
    ordered = sorted(models, key=lambda model: model.__name__)
    names, definitions = models_json_schema(
        [(model, "validation") for model in ordered], ref_template=f"{_REF}{{model}}"
    )
    added = definitions.get("$defs", {})
    renamed = {name: f"{name}Sent" for name, schema in added.items() if schemas.get(name, schema) != schema}
    for name, schema in added.items():
        schemas[renamed.get(name, name)] = _pointed_anew(schema, renamed)
    references = {model: names[model, "validation"]["$ref"].removeprefix(_REF) for model in ordered}
    return {model: f"{_REF}{renamed.get(name, name)}" for model, name in references.items()}


def _pointed_anew(schema: Any, renamed: dict[str, str]) -> Any:
    if isinstance(schema, dict):
        return {key: _pointed_anew(value, renamed) for key, value in schema.items()}
    if isinstance(schema, list):
        return [_pointed_anew(value, renamed) for value in schema]
    if isinstance(schema, str) and schema.startswith(_REF):
        name = schema.removeprefix(_REF)
        return f"{_REF}{renamed.get(name, name)}"
    return schema


def _complete_operation(
    operation: dict[str, Any], route: APIRoute, method: str, references: dict[type[BaseModel], str]
) -> None:
    operation["operationId"] = route.operation_id or route.name
    for call in calls(route):
        if isinstance(call, Needs):
            ways = ["key", "key_as_password"] if method == "GET" else ["key"]
            operation["security"] = [{way: []} for way in ways]
            operation["x-scope"] = call.scope or "any"
        if call is conditional.edits:
            required = next(one for one in operation["parameters"] if one["name"] == "if-match")
            required["required"] = True  # optional to the framework, so that its absence is a 428
        if isinstance(call, JsonBody):
            content = {"application/json": {"schema": {"$ref": references[call.model]}}}
            operation["requestBody"] = {"required": True, "content": content}
        if isinstance(call, RawBody):
            content = {media_type: {"schema": {}} for media_type in call.media_types}
            operation.setdefault("requestBody", {"required": True, "content": content})
    responses = operation["responses"]
    responses.pop("422", None)
    for status in sorted(statuses(route) | {int(code) for code in responses if int(code) >= 400}):
        responses[str(status)] = _problem_response(status)


def statuses(route: APIRoute) -> set[int]:
    """The problems that a route's dependencies and address can answer with, whatever it does itself."""
    found = {500, 503}
    for call in calls(route):
        if isinstance(call, Needs):
            found |= {401, 422} | ({403} if call.scope or call.every_depot else set())
        if isinstance(call, JsonBody | RawBody):
            found |= {400, 413, 415, 422}
        if call is conditional.edits or call is conditional.edits_or_creates:
            found |= {400, 412, 428}
    if "{" in route.path:
        found.add(404)
    return found


def _problem_response(status: int) -> dict[str, Any]:
    titles = [f"{kind.title} (`{kind.type}`)" for kind in KINDS.values() if kind.status == status]
    response: dict[str, Any] = {
        "description": "; ".join(titles),
        "content": {MEDIA_TYPE: {"schema": {"$ref": f"{_REF}Problem"}}},
    }
    if status in _HEADERS:
        response["headers"] = {_HEADERS[status]: {"schema": {"type": "string"}}}
    return response
