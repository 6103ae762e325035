"""Limit books on the wire: lists, drafts, edits, issue and withdrawal.

What an edition says is spelt by `application.book_content`, whose models are used as they are.
"""

from __future__ import annotations

import json
from dataclasses import fields
from datetime import date
from typing import Any

from pydantic import ConfigDict, Field

from service.api.schemas.base import Answer, Instant, Request
from service.api.whole import IGNORED
from service.application.book_content import (
    BookCombination,
    BookLimit,
    BookNote,
    BookTask,
    Content,
    Draft,
)
from service.application.books import BookRecord, EditionRecord
from service.rules.words import EditionState

_SOURCE = {"clause": "H 2.1", "source": "house rule, invented", "confirmed": True, "standing": "practice"}
CONTENT: dict[str, Any] = {
    "title": "Harrow Vale Railway, track circuit rules",
    "dry_ballast_ohm_km": None,
    "limits": [
        {
            "limit": "drop_shunt",
            "title": "Drop shunt",
            "quantity": "drop_shunt",
            "unit": "Ohm",
            "minimum": {"value": 0.5, "hazard": "wrong_side", "near_margin": 0.1},
            "applies": {"circuit_kinds": ["dc", "dc_ac_immune"]},
            **_SOURCE,
        }
    ],
    "tasks": [{"task": "shunt_test", "interval": "P3M", "grace": "P14D", "needs": ["drop_shunt"], **_SOURCE}],
    "combinations": [{"circuit_kind": "dc", "traction": "none", **_SOURCE}],
    "notes": [],
}
WHOLE: dict[str, Any] = Content.model_validate_json(json.dumps(CONTENT)).model_dump(mode="json")
HEAD: dict[str, Any] = {
    "book": "harrow-vale-house",
    "edition": "2",
    "state": "draft",
    "version": 1,
    "digest": "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08",
    "drafted_at": "2026-11-02T10:00:00Z",
    "drafted_by": ["R. Ashdown"],
    "effective_on": None,
    "issued_at": None,
    "issued_by": None,
    "withdrawn_on": None,
    "withdrawn_at": None,
    "withdrawn_by": None,
}


class EditionDraft(Draft):
    """A new edition, to be kept as a draft. Its book is made with the first."""

    model_config = ConfigDict(
        json_schema_extra={"examples": [{"book": "harrow-vale-house", "edition": "2", **CONTENT}]}
    )


class EditionEdit(Content):
    """All that a draft says, at whatever depth; the other members are the service's own and ignored."""

    model_config = ConfigDict(json_schema_extra={"examples": [WHOLE], "required": list(Content.model_fields)})

    book: object = Field(default=None, description=IGNORED)
    edition: object = Field(default=None, description=IGNORED)
    state: object = Field(default=None, description=IGNORED)
    version: object = Field(default=None, description=IGNORED)
    digest: object = Field(default=None, description=IGNORED)
    drafted_at: object = Field(default=None, description=IGNORED)
    drafted_by: object = Field(default=None, description=IGNORED)
    effective_on: object = Field(default=None, description=IGNORED)
    issued_at: object = Field(default=None, description=IGNORED)
    issued_by: object = Field(default=None, description=IGNORED)
    withdrawn_on: object = Field(default=None, description=IGNORED)
    withdrawn_at: object = Field(default=None, description=IGNORED)
    withdrawn_by: object = Field(default=None, description=IGNORED)

    def content(self) -> Content:
        """The editable members."""
        return Content(**{name: getattr(self, name) for name in Content.model_fields})


class IssueSent(Request):
    """From which day on the edition is in force: later than today in every time zone."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"effective_on": "2026-12-15"}]})

    effective_on: date


class WithdrawalSent(Request):
    """From which day on the edition is in force no longer: later than today in every time zone."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"withdrawn_on": "2027-03-01"}]})

    withdrawn_on: date


class EditionHead(Answer):
    """An edition without what it says. `digest` is the SHA-256 of its content."""

    book: str
    edition: str
    state: EditionState
    version: int
    digest: str
    drafted_at: Instant
    drafted_by: tuple[str, ...]
    effective_on: date | None
    issued_at: Instant | None
    issued_by: str | None
    withdrawn_on: date | None
    withdrawn_at: Instant | None
    withdrawn_by: str | None


class EditionAnswer(EditionHead):
    """An edition with all it says. `drafted_by` names every holder who had a part in it."""

    model_config = ConfigDict(json_schema_extra={"examples": [HEAD | WHOLE]})

    title: str
    dry_ballast_ohm_km: float | None
    limits: tuple[BookLimit, ...]
    tasks: tuple[BookTask, ...]
    combinations: tuple[BookCombination, ...]
    notes: tuple[BookNote, ...]


class BookAnswer(Answer):
    """A limit book and its editions, in order of drafting."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "book": "harrow-vale-house",
                    "title": CONTENT["title"],
                    "created_at": HEAD["drafted_at"],
                    "editions": [HEAD],
                }
            ]
        }
    )

    book: str
    title: str
    created_at: Instant
    editions: tuple[EditionHead, ...]


_HEAD = tuple(field.name for field in fields(EditionRecord) if field.name != "content")


def edition_answer(record: EditionRecord) -> EditionAnswer:
    """An edition read with its content."""
    assert record.content is not None
    said = {name: getattr(record.content, name) for name in Content.model_fields}
    return EditionAnswer(**{name: getattr(record, name) for name in _HEAD}, **said)


def book_answer(record: BookRecord) -> BookAnswer:
    """A book of a list."""
    heads = tuple(EditionHead(**{name: getattr(one, name) for name in _HEAD}) for one in record.editions)
    return BookAnswer(book=record.book, title=record.title, created_at=record.created_at, editions=heads)
