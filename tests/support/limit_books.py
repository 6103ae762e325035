"""Builders of limit books as JSON, and a service with a shelf of them to act on.

Invented names throughout.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import UTC, date, datetime
from typing import Any

import httpx

from service.application import access, editions, sections
from service.application.book_content import Draft
from service.application.books import EditionRecord
from service.application.context import Service
from service.application.section_content import Content as SectionContent
from service.records.unit_of_work import Actor, Transaction
from service.rules.words import CircuitKind, SectionState, Traction

DRAFTER = Actor("drafter", "R. Marlowe")
ISSUER = Actor("issuer", "J. Abara")

SOURCE: dict[str, Any] = {
    "clause": "1.1",
    "source": "house rule, invented",
    "confirmed": True,
    "standing": "practice",
}


def limit(**changes: Any) -> dict[str, Any]:
    """A drop shunt of at least 0.5 Ω, as JSON, but for the changes."""
    plain = {
        "limit": "drop_shunt",
        "quantity": "drop_shunt",
        "unit": "Ohm",
        "minimum": {"value": 0.5, "hazard": "wrong_side", "near_margin": 0.1},
    }
    return plain | SOURCE | changes


def task(**changes: Any) -> dict[str, Any]:
    """A shunt test every three months, as JSON, but for the changes."""
    return {"task": "shunt_test", "interval": "P3M", "needs": ["drop_shunt"]} | SOURCE | changes


def edition(**changes: Any) -> dict[str, Any]:
    """The body that drafts edition 1 of the book `house` with one limit, but for the changes."""
    return {"book": "house", "edition": "1", "title": "House rules", "limits": [limit()]} | changes


def draft_of(body: dict[str, Any]) -> Draft:
    return Draft.model_validate_json(json.dumps(body))


@dataclass
class Shelf:
    """The service under test."""

    service: Service
    clock: list[datetime]
    url: str

    def at(self, day: date, hour: int = 9) -> None:
        self.clock[0] = datetime(day.year, day.month, day.day, hour, tzinfo=UTC)

    def write(self, action: Any, *arguments: Any, actor: Actor = DRAFTER, **words: Any) -> Any:
        with self.service.unit_of_work(actor) as tx:
            return action(tx, *arguments, **words)

    def read(self, action: Any, *arguments: Any, **words: Any) -> Any:
        with self.service.read(snapshot=True) as connection:
            return action(connection, *arguments, **words)

    def draft(self, **changes: Any) -> EditionRecord:
        record: EditionRecord = self.write(editions.draft, draft_of(edition(**changes)))
        return record

    def issue(self, effective_on: date, name: str = "1", **words: Any) -> EditionRecord:
        words = {"expected": 1, "actor": ISSUER} | words
        record: EditionRecord = self.write(editions.issue, "house", name, effective_on, **words)
        return record

    def section(self, name: str, depot: str = "ashby", **changes: Any) -> None:
        content = {
            "state": SectionState.IN_USE,
            "circuit_kind": CircuitKind.DC,
            "traction": Traction.NONE,
            "required_test_points": ("feed_end", "relay_end"),
            "book": "house",
        }
        self.write(sections.create, depot, name, SectionContent(**(content | changes)))


def keys(tx: Transaction) -> dict[str, str]:
    everything = ("read", "limits")
    wanted = {
        "drafter": access.Wanted("drafter", DRAFTER.holder, everything),
        "issuer": access.Wanted("issuer", ISSUER.holder, everything),
        "reader": access.Wanted("reader", "A. Reader", ("read",)),
        "bound": access.Wanted("bound", "B. Bound", everything, depot="ashby"),
    }
    return {name: access.create(tx, key, name.encode().ljust(32, b"-")) for name, key in wanted.items()}


@dataclass
class Api:
    """The app over HTTP, and the shelf behind it."""

    base_url: str
    shelf: Shelf
    keys: dict[str, str]

    def call(self, method: str, path: str, key: str = "drafter", **words: Any) -> httpx.Response:
        headers = {"Authorization": f"Bearer {self.keys[key]}"} | words.pop("headers", {})
        return httpx.request(method, f"{self.base_url}{path}", headers=headers, **words)

    def get(self, path: str, key: str = "reader", **words: Any) -> httpx.Response:
        return self.call("GET", path, key, **words)

    def post(self, path: str, body: Any, key: str = "drafter", **words: Any) -> httpx.Response:
        return self.call("POST", path, key, json=body, **words)

    def put(self, path: str, body: Any, tag: str | None, key: str = "drafter") -> httpx.Response:
        headers = {} if tag is None else {"If-Match": tag}
        return self.call("PUT", path, key, json=body, headers=headers)
