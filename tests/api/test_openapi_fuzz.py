"""Requests made from the OpenAPI document: no 5xx, no undocumented status, no answer off its schema.

Most names in paths are those of records that exist, so that requests reach past "not found".
"""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, datetime
from typing import Any

import pytest
import schemathesis
from hypothesis import HealthCheck, given, settings
from schemathesis.checks import CHECKS

from service.application import access, audits, sections, visits
from service.application.section_content import Content
from service.application.visit_content import Draft, ReadingDraft
from service.rules.words import CircuitKind, SectionState, Traction
from support.api import ACTOR, Api, served

VISIT = "0197c0de-0000-7000-8000-000000000001"
KNOWN = {
    "depot": "harrow",
    "section": "TV114",
    "visit": VISIT,
    "audit": "latest",
    "instrument": "SB-22",
    "book": "house",
    "edition": "1",
    "type": "stale",
}
# A batch answers 200 with an outcome for each visit, and refuses inside it; what fits the schema may still
# contradict what is stored.
EXCLUDED = ("negative_data_rejection", "positive_data_acceptance")


def furnish(api: Api) -> None:
    """A section visited and audited."""
    content = Content(
        state=SectionState.IN_USE,
        circuit_kind=CircuitKind.DC,
        traction=Traction.NONE,
        required_test_points=("relay_end",),
    )
    reading = ReadingDraft("drop_shunt", "relay_end", "as_left", "eq", 0.7, "Ohm", "SB-22")
    visited_at = datetime(2026, 11, 30, 8, tzinfo=UTC)
    api.depot("harrow")
    with api.service.unit_of_work(ACTOR) as tx:
        sections.create(tx, "harrow", "TV114", content)
    with api.service.unit_of_work(ACTOR) as tx:
        visits.post(tx, "harrow", [Draft(VISIT, "TV114", visited_at, readings=(reading,))], None)
    audits.run(api.service, ACTOR, "harrow")


def map_path_parameters(_context: Any, path_parameters: dict[str, Any] | None) -> dict[str, Any] | None:
    if path_parameters and len(str(sorted(path_parameters.items()))) % 4:
        return {name: KNOWN.get(name, value) for name, value in path_parameters.items()}
    return path_parameters


def map_headers(_context: Any, headers: dict[str, Any] | None) -> dict[str, Any] | None:
    """Edits mostly name the version that is there."""
    for name in headers or {}:
        if name.lower() == "if-match" and headers is not None and len(str(headers[name])) % 4:
            headers[name] = '"v1"'
    return headers


@pytest.fixture
def schema(database_url: str) -> Iterator[Any]:
    with served(database_url) as api:
        furnish(api)
        loaded = schemathesis.openapi.from_dict(api.app.openapi())
        loaded.config.update(base_url=api.base_url)
        loaded.hook(map_path_parameters)
        loaded.hook(map_headers)
        loaded.key = api.key(*access.SCOPES)
        yield loaded


@schemathesis.serializer("application/x-ndjson")
def as_lines(_context: Any, value: Any) -> bytes:
    return str(value).encode(errors="replace")


@schemathesis.serializer("text/csv")
def as_csv(_context: Any, value: Any) -> bytes:
    return str(value).encode(errors="replace")


def test_no_request_surprises(schema: Any, subtests: pytest.Subtests) -> None:
    checks = [check for check in CHECKS.get_all() if check.__name__ not in EXCLUDED]
    sent = {"Authorization": f"Bearer {schema.key}"}
    for found in schema.get_all_operations():
        operation = found.ok()
        with subtests.test(operation=operation.label):

            @settings(max_examples=10, deadline=None, suppress_health_check=list(HealthCheck), database=None)
            @given(case=operation.as_strategy())
            def surprise(case: schemathesis.Case) -> None:
                case.call_and_validate(checks=checks, headers=sent)

            surprise()
