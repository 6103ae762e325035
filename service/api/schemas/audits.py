"""Audits, weekly lists, findings and responses on the wire.

The list in other formats than JSON is laid out in `reports`.
"""

from __future__ import annotations

from datetime import date
from typing import Any, Literal

from pydantic import ConfigDict, Field

from service.api.schemas.base import Answer, Instant, Line, Remarks, Request
from service.api.schemas.status import VERDICT, TaskAnswer, VerdictAnswer
from service.rules.words import FindingState, Hazard

AUDIT: dict[str, Any] = {
    "depot": "harrow-vale",
    "audit": "2026-11-30",
    "state": "finished",
    "started_at": "2026-11-30T05:00:00.000000Z",
    "finished_at": "2026-11-30T05:00:01.100000Z",
    "started_by": "clock",
    "known_at": "2026-11-30T05:00:00.000000Z",
    "sequence": 4711,
    "digest": "5d41402abc4b2a76b9719d911017c592ae6f0b1c2d3e4f5061728394a5b6c7d8",
    "editions": [
        {
            "book": "harrow-vale-house",
            "edition": "1",
            "digest": "7d793037a0760186574b0282f2f435e79d3e5f9ac5d5e7c1a2b3c4d5e6f70819",
        }
    ],
    "sections_judged": 236,
    "sections_not_judged": 4,
    "counts": {"compliance_yes": 170, "compliance_not_shown": 41, "compliance_no": 25, "overdue": 17},
    "caution": "Advice from records, not an authority to work or to run trains.",
}
RESPONSE: dict[str, Any] = {
    "owner": "M. Quill",
    "action": "Feed turned down, ballast to be cleaned",
    "planned_on": "2026-12-04",
    "reported_at": "2026-11-30T09:20:00Z",
    "report_reference": "WSF-118",
    "reported_to": "Control, duty officer",
    "protection": "Circuit disconnected, trains hand-signalled",
    "cause": "Feed turned up in the wet",
    "restored_by": "T114",
}
FINDING: dict[str, Any] = {
    "depot": "harrow-vale",
    "finding": "0197c0de-7b1a-7c3d-9e4f-5a6b7c8d9e0f",
    "section": "TV114",
    "kind": "found_outside",
    "hazard": "wrong_side",
    "state": "open",
    "quantity": "drop_shunt",
    "test_point": "relay_end",
    "task": None,
    "opened_on": "2026-11-23",
    "last_seen_on": "2026-11-30",
    "cleared_on": None,
    "weeks_open": 1,
    "reopens": None,
    "concession": None,
    "visit": "0197c0de-7b1a-7c3d-9e4f-5a6b7c8d9e0f",
    "verdict": {**VERDICT, "verdict": "outside", "measured": 0.3, "judged": 0.3, "margin": -0.2},
    "response": None,
    "version": 2,
}


class AuditSent(Request):
    """As of which day; the depot's today if left out."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"as_of": "2026-11-30"}]})

    as_of: date | None = None


class EditionUsed(Answer):
    """An edition that judged, with the digest of its content."""

    book: str
    edition: str
    digest: str


class AuditAnswer(Answer):
    """A depot judged as of a date. `sequence` and `digest` are the journal's when it was judged."""

    model_config = ConfigDict(json_schema_extra={"examples": [AUDIT]})

    depot: str
    audit: str
    state: Literal["finished"]
    started_at: Instant
    finished_at: Instant
    started_by: str
    known_at: Instant
    sequence: int
    digest: str
    editions: list[EditionUsed]
    sections_judged: int
    sections_not_judged: int
    counts: dict[str, int]
    caution: str


class ResponseSent(Request):
    """Every member, null where there is nothing to say. A `found_outside` is cleared once report, protection,
    cause and who restored it are all said."""

    model_config = ConfigDict(json_schema_extra={"examples": [RESPONSE]})

    owner: Line | None
    action: Remarks | None
    planned_on: date | None
    reported_at: Instant | None
    report_reference: Line | None
    reported_to: Line | None
    protection: Remarks | None
    cause: Remarks | None
    restored_by: Line | None
    updated_at: object = Field(default=None, description="Ignored")
    updated_by: object = Field(default=None, description="Ignored")


class ResponseAnswer(Answer):
    """What a person said of a finding, and when."""

    owner: str | None
    action: str | None
    planned_on: str | None
    reported_at: Instant | None
    report_reference: str | None
    reported_to: str | None
    protection: str | None
    cause: str | None
    restored_by: str | None
    updated_at: Instant
    updated_by: str


class FindingAnswer(Answer):
    """One thing wrong with one track circuit, from audit to audit until cleared."""

    model_config = ConfigDict(json_schema_extra={"examples": [FINDING]})

    depot: str
    finding: str
    section: str
    kind: str
    hazard: Hazard | None
    state: FindingState
    quantity: str | None
    test_point: str | None
    task: str | None
    opened_on: str
    last_seen_on: str
    cleared_on: str | None
    weeks_open: int
    reopens: str | None
    concession: str | None
    visit: str | None
    verdict: VerdictAnswer | None
    response: ResponseAnswer | None
    version: int


LISTED: dict[str, Any] = {
    "section": "TV114",
    "title": "Up Main, Tarn Viaduct",
    "line_name": "Harrow Vale main line",
    "from_km": 11.4,
    "to_km": 12.3,
    "circuit_kind": "dc",
    "traction": "none",
    "asset_reference": None,
    "state": "in_use",
    "book": "harrow-vale-house",
    "edition": "1",
    "compliance": "no",
    "overdue": False,
    "worst_hazard": "wrong_side",
    "next_due_on": "2027-02-28",
    "last_visited_at": "2026-11-23T09:12:00.000000Z",
    "tasks": [],
    "findings": [FINDING],
}


class ListedSection(Answer):
    """A track circuit on the weekly list, with its findings, gravest first."""

    section: str
    title: str | None
    line_name: str | None
    from_km: float | None
    to_km: float | None
    circuit_kind: str
    traction: str
    asset_reference: str | None
    state: str
    book: str | None
    edition: str | None
    compliance: str | None
    overdue: bool
    worst_hazard: str | None
    next_due_on: str | None
    last_visited_at: Instant | None
    tasks: list[TaskAnswer]
    findings: list[FindingAnswer]


class WeeklyListAnswer(Answer):
    """The weekly list: what the audit was, then each track circuit not in order, gravest first."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "depot": "harrow-vale",
                    "title": "Harrow Vale signalling depot",
                    "time_zone": "Europe/London",
                    "audit": AUDIT,
                    "sections": [LISTED],
                }
            ]
        }
    )

    depot: str
    title: str
    time_zone: str
    audit: AuditAnswer
    sections: list[ListedSection]
