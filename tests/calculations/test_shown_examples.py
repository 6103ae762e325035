"""The examples of the OpenAPI document are real: each request gets the answer that stands beside it."""

from __future__ import annotations

from typing import Any

import pytest
from jsonschema import Draft202012Validator

from service.app import create_app
from service.settings import Settings
from support.calculations import Bench

DOCUMENT: dict[str, Any] = create_app(Settings(database_url="sqlite://")).openapi()
PATHS = [path for path in DOCUMENT["paths"] if path.startswith("/v1/calculations/")]


def close(shown: Any, found: Any) -> bool:
    """Whether an answer is the one shown, its figures rounded and its lists cut short."""
    if isinstance(shown, dict):
        return shown.keys() == found.keys() and all(close(shown[name], found[name]) for name in shown)
    if isinstance(shown, list):
        return len(shown) <= len(found) and all(map(close, shown, found))
    if isinstance(shown, float):
        return bool(found == pytest.approx(shown, rel=1e-3, abs=1e-6))
    return bool(shown == found)


def test_there_are_nine_calculations() -> None:
    assert len(PATHS) == 9


@pytest.mark.parametrize("path", PATHS)
def test_the_first_example_is_answered_as_shown(bench: Bench, path: str) -> None:
    operation = DOCUMENT["paths"][path]["post"]
    sent = operation["requestBody"]["content"]["application/json"]["schema"]["$ref"].rpartition("/")[2]
    body = DOCUMENT["components"]["schemas"][sent]["examples"][0]
    answered = operation["responses"]["200"]["content"]["application/json"]["schema"]
    shown = DOCUMENT["components"]["schemas"][answered["$ref"].rpartition("/")[2]]["examples"][0]
    found = bench.ask(path.rpartition("/")[2], body)
    assert close(shown, found)
    root = answered | {"components": DOCUMENT["components"]}
    assert [error.message for error in Draft202012Validator(root).iter_errors(found)] == []
