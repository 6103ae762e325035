"""A line of the journal on the wire.

The content of a line has the shape of the record it speaks of.
"""

from __future__ import annotations

from typing import Any

from pydantic import ConfigDict

from service.api.schemas.base import Answer, Instant


class ActorAnswer(Answer):
    """By which key, and who holds it."""

    key: str
    holder: str


class SubjectAnswer(Answer):
    """What the line is about."""

    kind: str
    name: str


class LineAnswer(Answer):
    """One change. `content` is the full state after it; `sections` null means every one of the depot.

    `digest` is the SHA-256 of the line's RFC 8785 form without `digest`.
    """

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "depot": "harrow-vale",
                    "sequence": 1,
                    "recorded_at": "2026-11-01T08:00:00.000000Z",
                    "actor": {"key": "engineer", "holder": "R. Ashdown"},
                    "action": "depot_created",
                    "subject": {"kind": "depot", "name": "harrow-vale"},
                    "sections": [],
                    "content": {"depot": "harrow-vale", "title": "Harrow Vale signalling depot"},
                    "previous_digest": "0" * 64,
                    "digest": "5f" * 32,
                }
            ]
        }
    )

    depot: str
    sequence: int
    recorded_at: Instant
    actor: ActorAnswer
    action: str
    subject: SubjectAnswer
    sections: list[str] | None
    content: Any
    previous_digest: str
    digest: str
