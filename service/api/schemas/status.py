"""Statuses, verdicts and task states on the wire.

Their examples serve the schemas of visits, audits and findings too.
"""

from __future__ import annotations

from datetime import UTC, date, datetime
from typing import Annotated, Any

from pydantic import AfterValidator, AwareDatetime, ConfigDict

from service.api.schemas.base import Answer, Instant
from service.rules.words import (
    Comparison,
    Compliance,
    Hazard,
    SectionState,
    Stage,
    TaskState,
    VerdictWord,
)


def _in_utc(at: datetime) -> datetime:
    """An instant in UTC; one within hours of the first or the last year there is may have none."""
    try:
        return at.astimezone(UTC)
    except OverflowError:
        raise ValueError("lies outside the calendar") from None


UtcInstant = Annotated[AwareDatetime, AfterValidator(_in_utc)]
"""An RFC 3339 instant as sent, any offset accepted; in UTC from here on."""

REASON: dict[str, Any] = {
    "code": "undecided",
    "reason": "the reading does not tell on which side of the limit it lies",
}
VERDICT: dict[str, Any] = {
    "limit": "drop-shunt",
    "quantity": "drop_shunt",
    "test_point": "relay_end",
    "verdict": "within",
    "hazard": "wrong_side",
    "unit": "Ohm",
    "measured": 0.7,
    "comparison": "eq",
    "judged": 0.7,
    "min": 0.5,
    "near_min": 0.6,
    "near_max": None,
    "max": None,
    "margin": 0.2,
    "book": "harrow-vale-house",
    "edition": "1",
    "clause": "H3.1",
    "confirmed": True,
    "concession": None,
    "visit": "0197c0de-7b1a-7c3d-9e4f-5a6b7c8d9e0f",
    "visited_at": "2026-11-30T09:12:00.000000Z",
    "stage": "as_left",
    "instrument": "SB-22",
    "doubtful": None,
    "reasons": [],
}
SUMMARY: dict[str, Any] = {
    "compliance": "yes",
    "overdue": False,
    "worst_hazard": None,
    "next_due_on": "2027-02-28",
    "holds_until": "2027-02-27",
    "sequence": 4711,
}
TASK: dict[str, Any] = {
    "task": "shunt_test",
    "state": "current",
    "interval": "P3M",
    "clause": "H7.1",
    "last_done_on": "2026-11-30",
    "visit": "0197c0de-7b1a-7c3d-9e4f-5a6b7c8d9e0f",
    "due_on": "2027-02-28",
    "grace_until_on": "2027-03-14",
    "days_overdue": 0,
    "concession": None,
    "reasons": [],
}
STATUS: dict[str, Any] = {
    "depot": "harrow-vale",
    "section": "TV114",
    "section_version": 3,
    "state": "in_use",
    "as_of": "2026-12-01",
    "as_known_at": None,
    "book": "harrow-vale-house",
    "edition": "1",
    **SUMMARY,
    "verdicts": [VERDICT],
    "tasks": [TASK],
    "cautions": [],
}


class ReasonAnswer(Answer):
    """Why, as a stable code and in words."""

    code: str
    reason: str


class VerdictAnswer(Answer):
    """One limit against one track circuit, in the quantity's base unit; `margin` is positive inside."""

    model_config = ConfigDict(json_schema_extra={"examples": [VERDICT]})

    limit: str
    quantity: str
    test_point: str | None
    verdict: VerdictWord
    hazard: Hazard | None
    unit: str
    measured: float | None
    comparison: Comparison | None
    judged: float | None
    min: float | None
    near_min: float | None
    near_max: float | None
    max: float | None
    margin: float | None
    book: str
    edition: str
    clause: str
    confirmed: bool
    concession: str | None
    visit: str | None
    visited_at: Instant | None
    stage: Stage | None
    instrument: str | None
    doubtful: str | None
    reasons: list[ReasonAnswer]


class TaskAnswer(Answer):
    """Where one task stands; `interval` is an ISO 8601 duration."""

    task: str
    state: TaskState
    interval: str | None
    clause: str
    last_done_on: str | None
    visit: str | None
    due_on: str | None
    grace_until_on: str | None
    days_overdue: int
    concession: str | None
    reasons: list[ReasonAnswer]


class SummaryAnswer(Answer):
    """A status in brief. `compliance` is null for a track circuit that is not judged (not in use)."""

    compliance: Compliance | None
    overdue: bool
    worst_hazard: Hazard | None
    next_due_on: date | None
    holds_until: date | None
    sequence: int


class StatusAnswer(SummaryAnswer):
    """A track circuit's verdicts and tasks as of a day; it holds until `holds_until` unless something is
    written. `as_known_at` null: all that is stored."""

    model_config = ConfigDict(json_schema_extra={"examples": [STATUS]})

    depot: str
    section: str
    section_version: int
    state: SectionState
    as_of: str
    as_known_at: Instant | None
    book: str | None
    edition: str | None
    verdicts: list[VerdictAnswer]
    tasks: list[TaskAnswer]
    cautions: list[ReasonAnswer]
