"""Visits on the wire: as handhelds post them, as they are answered and as they are read again.

A posted visit becomes the draft that `application.visits` takes; nothing is judged here.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import ConfigDict, Field, StringConstraints

from service.api.schemas.base import Answer, Instant, Line, Name, Remarks, Request
from service.api.schemas.status import SUMMARY, VERDICT, SummaryAnswer, UtcInstant, VerdictAnswer
from service.application.visit_content import Draft, ReadingDraft, TaskDraft, whole
from service.rules.words import (
    Ballast,
    BallastState,
    Comparison,
    ConditionLeft,
    Rail,
    Source,
    Stage,
    TaskDone,
    Work,
)

VisitId = Annotated[str, StringConstraints(pattern=r"^[0-9a-f]{8}(-[0-9a-f]{4}){3}-[0-9a-f]{12}$")]
"""A UUID the client made, in lower case."""

Word = Annotated[str, StringConstraints(pattern=r"^[a-z][a-z0-9_]{0,59}$")]
Short = Annotated[str, StringConstraints(min_length=1, max_length=60)]

VISIT: dict[str, Any] = {
    "visit": "0197c0de-7b1a-7c3d-9e4f-5a6b7c8d9e0f",
    "section": "TV114",
    "visited_at": "2026-11-30T09:12:00Z",
    "device": "HH-07",
    "tester": "T114",
    "conditions": {"ballast": "wet", "ballast_state": "clean", "rail": "clean", "air_temperature_c": 6},
    "tasks": [{"task": "shunt_test", "done": "done", "reason": None}],
    "work_done": [],
    "condition_left": "fit",
    "remarks": None,
    "replaces": None,
    "pack": None,
    "readings": [
        {
            "quantity": "drop_shunt",
            "test_point": "relay_end",
            "stage": "as_left",
            "comparison": "eq",
            "value": 0.7,
            "unit": "Ohm",
            "instrument": "SB-22",
        },
        {
            "quantity": "residual_voltage",
            "test_point": "feed_end",
            "stage": "as_left",
            "value": 310,
            "unit": "mV",
            "shunt_ohm": 0.5,
            "source": "shunt",
            "instrument": "VM-3",
        },
    ],
}


class ReadingSent(Request):
    """One reading as given. `eq` is the value read, `ge` at least so much, `lt` less than it."""

    quantity: Word
    test_point: Short
    stage: Stage
    comparison: Comparison | None = None
    value: Annotated[float, Field(strict=True)]
    unit: Short
    instrument: Name | None = None
    shunt_ohm: float | None = None
    source: Source | None = None


class TaskSent(Request):
    """What the technician says of one task."""

    task: Word
    done: TaskDone
    reason: Line | None = None


class ConditionsSent(Request):
    """What was seen at the track."""

    ballast: Ballast | None = None
    ballast_state: BallastState | None = None
    rail: Rail | None = None
    air_temperature_c: Annotated[float, Field(ge=-90, le=90)] | None = None


class VisitSent(Request):
    """One attendance at one track circuit. `visited_at` is when testing ended; the client makes the id."""

    model_config = ConfigDict(json_schema_extra={"examples": [VISIT]})

    visit: VisitId
    section: Name
    visited_at: UtcInstant
    device: Name | None = None
    tester: Line | None = None
    conditions: ConditionsSent | None = None
    tasks: Annotated[list[TaskSent], Field(max_length=50)] | None = None
    work_done: Annotated[list[Work], Field(max_length=50)] | None = None
    condition_left: ConditionLeft | None = None
    remarks: Remarks | None = None
    replaces: VisitId | None = None
    pack: Name | None = None
    readings: Annotated[list[ReadingSent], Field(max_length=200)] | None = None

    def draft(self) -> Draft:
        """The visit as the application takes it."""
        seen = self.conditions or ConditionsSent()
        return Draft(
            visit=self.visit,
            section=self.section,
            visited_at=self.visited_at,
            device=self.device,
            tester=self.tester,
            ballast=seen.ballast,
            ballast_state=seen.ballast_state,
            rail=seen.rail,
            air_temperature_c=None if seen.air_temperature_c is None else whole(seen.air_temperature_c),
            tasks=tuple(TaskDraft(task.task, task.done, task.reason) for task in self.tasks or ()),
            work_done=tuple(self.work_done or ()),
            condition_left=self.condition_left,
            remarks=self.remarks,
            replaces=self.replaces,
            pack=self.pack,
            readings=tuple(
                ReadingDraft(
                    reading.quantity,
                    reading.test_point,
                    reading.stage,
                    reading.comparison or Comparison.EQ,
                    whole(reading.value),
                    reading.unit,
                    reading.instrument,
                    None if reading.shunt_ohm is None else whole(reading.shunt_ohm),
                    reading.source,
                )
                for reading in self.readings or ()
            ),
        )


class CautionAnswer(Answer):
    """Something to know; `pointer` into the visit where it has a place."""

    code: str
    pointer: str | None
    reason: str


PROTECT: dict[str, Any] = {
    "code": "protect_and_report",
    "pointer": None,
    "reason": "Outside a wrong-side limit: protect and report under your rules before adjusting.",
}
OUTCOME: dict[str, Any] = {
    "visit": VISIT["visit"],
    "section": "TV114",
    "outcome": "stored",
    "received_at": "2026-11-30T09:14:10.000000Z",
    "clock_offset_s": -1,
    "verdicts": [VERDICT],
    "status": SUMMARY,
    "cautions": [],
    "problem": None,
}


class OutcomeAnswer(Answer):
    """What became of a posted visit. Drop your copy only on `stored` or `already_stored`."""

    model_config = ConfigDict(json_schema_extra={"examples": [OUTCOME]})

    visit: str | None
    section: str | None
    outcome: Literal["stored", "already_stored", "refused"]
    received_at: Instant | None
    clock_offset_s: int | None
    verdicts: list[VerdictAnswer]
    status: SummaryAnswer | None
    cautions: list[CautionAnswer]
    problem: dict[str, Any] | None


class BatchOutcomeAnswer(OutcomeAnswer):
    """One outcome of a batch; `index` counts from 0."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"index": 0, **OUTCOME}]})

    index: int


class VoidSent(Request):
    """Why a visit is void."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"why": "Read at TV115 by mistake"}]})

    why: Line


class ReadingAnswer(Answer):
    """One reading as it was given."""

    quantity: str
    test_point: str
    stage: Stage
    comparison: Comparison
    value: float
    unit: str
    instrument: str | None
    shunt_ohm: float | None
    source: Source | None


class TaskClaimAnswer(Answer):
    task: str
    done: TaskDone
    reason: str | None


class ConditionsAnswer(Answer):
    ballast: Ballast | None
    ballast_state: BallastState | None
    rail: Rail | None
    air_temperature_c: float | None


class VoidedAnswer(Answer):
    """When, by whom and why a visit was declared void."""

    voided_at: Instant
    voided_by: str
    why: str


STORED: dict[str, Any] = {
    **VISIT,
    "readings": [
        {"comparison": "eq", "shunt_ohm": None, "source": None, **reading} for reading in VISIT["readings"]
    ],
    "received_at": "2026-11-30T09:14:10.000000Z",
    "clock_offset_s": -1,
    "received_by": "handheld-07",
    "digest": "5d41402abc4b2a76b9719d911017c592ae6f0b1c2d3e4f5061728394a5b6c7d8",
    "voided": None,
}


class VisitAnswer(Answer):
    """A visit as it is kept, readings as they were given."""

    model_config = ConfigDict(json_schema_extra={"examples": [STORED]})

    visit: str
    section: str
    visited_at: Instant
    device: str | None
    tester: str | None
    conditions: ConditionsAnswer
    tasks: list[TaskClaimAnswer]
    work_done: list[Work]
    condition_left: ConditionLeft | None
    remarks: str | None
    replaces: str | None
    pack: str | None
    readings: list[ReadingAnswer]
    received_at: Instant
    clock_offset_s: int | None
    received_by: str
    digest: str
    voided: VoidedAnswer | None
