"""How an access key is shown to whoever holds it: never the key itself.

A key itself is never shown again.
"""

from __future__ import annotations

from pydantic import ConfigDict

from service.api.schemas.base import Answer, Instant


class KeyAnswer(Answer):
    """A key; `depot` null is good for every depot, `device` null for none in particular."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "label": "handheld-7",
                    "holder": "T. Marlow",
                    "scopes": ["read", "readings"],
                    "depot": "harrow-vale",
                    "device": "HH-07",
                    "created_at": "2026-11-01T08:00:00Z",
                    "expires_at": None,
                }
            ]
        }
    )

    label: str
    holder: str
    scopes: list[str]
    depot: str | None
    device: str | None
    created_at: Instant
    expires_at: Instant | None
