"""Concessions on the wire: as asked for, as granted, how ended.

Mapped to and from the application member by member.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated

from pydantic import ConfigDict, Field, JsonValue, StringConstraints

from service.api.schemas.base import Answer, Instant, Line, Name, Remarks, Request
from service.api.whole import IGNORED
from service.application.concessions import Concession, Content
from service.application.equipment import TestPoint

_EXAMPLE: dict[str, JsonValue] = {
    "section": "TV114",
    "limit": "drop_shunt_minimum",
    "task": None,
    "test_point": "relay_end",
    "allowed_min": 0.4,
    "allowed_max": None,
    "conditions": "Until the relay end bonds are renewed",
    "protection": "Train detection proved by sweeping; speed 30 km/h",
    "asked_by": "T. Okafor",
    "approved_by": None,
    "from_on": "2026-06-01",
    "until_on": "2026-06-30",
}
_GRANTED: dict[str, JsonValue] = {
    "depot": "harrow-vale",
    "concession": "0197c0de-0000-7000-8000-000000000001",
    "version": 1,
    "approved_by": "R. Marlowe",
    "granted_at": "2026-05-30T10:00:00Z",
    "granted_by": "R. Marlowe",
    "ended_on": None,
    "ended_at": None,
    "ended_by": None,
    "ended_why": None,
}

Value = Annotated[float, Field(ge=-1e12, le=1e12)]


class ConcessionSent(Request):
    """A concession asked for: exactly one of `limit` and `task`; allowed values in the base unit.

    It is approved by the holder of the key that grants it, who is not the one who asked.
    """

    model_config = ConfigDict(json_schema_extra={"examples": [_EXAMPLE]})

    section: Name
    limit: Line | None
    task: Line | None
    test_point: TestPoint | None
    allowed_min: Value | None
    allowed_max: Value | None
    conditions: Annotated[Remarks, StringConstraints(min_length=1)]
    protection: Remarks | None
    asked_by: Line
    approved_by: Line | None
    from_on: date
    until_on: date
    depot: object = Field(default=None, description=IGNORED)
    concession: object = Field(default=None, description=IGNORED)
    version: object = Field(default=None, description=IGNORED)
    granted_at: object = Field(default=None, description=IGNORED)
    granted_by: object = Field(default=None, description=IGNORED)
    ended_on: object = Field(default=None, description=IGNORED)
    ended_at: object = Field(default=None, description=IGNORED)
    ended_by: object = Field(default=None, description=IGNORED)
    ended_why: object = Field(default=None, description=IGNORED)

    def content(self) -> Content:
        """What is asked for."""
        return Content(
            section=self.section,
            limit=self.limit,
            task=self.task,
            test_point=self.test_point,
            allowed_min=self.allowed_min,
            allowed_max=self.allowed_max,
            conditions=self.conditions,
            protection=self.protection,
            asked_by=self.asked_by,
            approved_by=self.approved_by,
            from_on=self.from_on,
            until_on=self.until_on,
        )


class EndSent(Request):
    """Why a concession ends before its time."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"why": "Bonds renewed and tested"}]})

    why: Annotated[Remarks, StringConstraints(min_length=1)]


class ConcessionAnswer(Answer):
    """A concession as granted; `ended_on` and what follows null unless it was ended early."""

    model_config = ConfigDict(json_schema_extra={"examples": [_EXAMPLE | _GRANTED]})

    depot: str
    concession: str
    version: int
    section: str
    limit: str | None
    task: str | None
    test_point: str | None
    allowed_min: float | None
    allowed_max: float | None
    conditions: str
    protection: str | None
    asked_by: str
    approved_by: str
    from_on: date
    until_on: date
    granted_at: Instant
    granted_by: str
    ended_on: date | None
    ended_at: Instant | None
    ended_by: str | None
    ended_why: str | None


def concession_answer(kept: Concession) -> ConcessionAnswer:
    """One concession."""
    content = kept.content
    return ConcessionAnswer(
        depot=kept.depot,
        concession=kept.concession,
        version=kept.version,
        section=content.section,
        limit=content.limit,
        task=content.task,
        test_point=content.test_point,
        allowed_min=content.allowed_min,
        allowed_max=content.allowed_max,
        conditions=content.conditions,
        protection=content.protection,
        asked_by=content.asked_by,
        approved_by=content.approved_by or kept.granted_by,
        from_on=content.from_on,
        until_on=content.until_on,
        granted_at=kept.granted_at,
        granted_by=kept.granted_by,
        ended_on=kept.ended_on,
        ended_at=kept.ended_at,
        ended_by=kept.ended_by,
        ended_why=kept.ended_why,
    )
