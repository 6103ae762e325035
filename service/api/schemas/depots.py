"""Depots on the wire.

What lies under a depot has schemas of its own.
"""

from __future__ import annotations

from enum import StrEnum
from typing import Annotated

from pydantic import ConfigDict, Field, JsonValue

from service.api.schemas.base import Answer, Instant, Line, Name, Request


class Weekday(StrEnum):
    """The day of the weekly audit."""

    MONDAY = "monday"
    TUESDAY = "tuesday"
    WEDNESDAY = "wednesday"
    THURSDAY = "thursday"
    FRIDAY = "friday"
    SATURDAY = "saturday"
    SUNDAY = "sunday"


_TERMS: dict[str, JsonValue] = {
    "title": "Harrow Vale signalling depot",
    "time_zone": "Europe/London",
    "audit_weekday": "monday",
    "audit_hour": 5,
}
_SERVED: dict[str, JsonValue] = {"version": 1, "created_at": "2026-11-01T08:00:00Z", "sequence": 1}

Hour = Annotated[int, Field(ge=0, le=23)]


class DepotDraft(Request):
    """A depot to be opened."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"depot": "harrow-vale", **_TERMS}]})

    depot: Name
    title: Line
    time_zone: Line
    audit_weekday: Weekday
    audit_hour: Hour


class DepotEdit(Request):
    """Every editable member; the others are the service's own and ignored."""

    model_config = ConfigDict(json_schema_extra={"examples": [_TERMS]})

    title: Line
    time_zone: Line
    audit_weekday: Weekday
    audit_hour: Hour
    depot: object = Field(default=None, description="Ignored")
    version: object = Field(default=None, description="Ignored")
    created_at: object = Field(default=None, description="Ignored")
    sequence: object = Field(default=None, description="Ignored")


class DepotAnswer(Answer):
    """A depot; `sequence` is the journal's: take a snapshot, then follow the journal from there."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"depot": "harrow-vale", **_TERMS, **_SERVED}]})

    depot: str
    title: str
    time_zone: str
    audit_weekday: Weekday
    audit_hour: int
    version: int
    created_at: Instant
    sequence: int
