"""Checks on the wire: a section, the readings of one visit and a book in, verdicts out.

Sections, readings and verdicts are spelt as everywhere else; only what is asked and answered is here.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated, Any

from pydantic import ConfigDict, Field

from service.api.schemas.base import Answer, Name, Request
from service.api.schemas.sections import SectionDraft
from service.api.schemas.status import VERDICT, ReasonAnswer, VerdictAnswer
from service.api.schemas.visits import CautionAnswer, ReadingSent
from service.application.checks import CalibrationGiven, Check, Checked, InstrumentGiven
from service.application.visit_content import ReadingDraft
from service.rules.doubtful import WORDS
from service.rules.words import Ballast, CalibrationResult, Comparison, Compliance, Hazard, Rail, Work

_EXAMPLE: dict[str, Any] = {
    "book": "harrow-vale-house",
    "edition": None,
    "visited_on": "2026-11-30",
    "section": {
        "section": "TV114",
        "state": "in_use",
        "circuit_kind": "dc",
        "traction": "none",
        "required_test_points": ["relay_end"],
    },
    "ballast": "dry",
    "rail": "clean",
    "work_done": [],
    "readings": [
        {
            "quantity": "drop_shunt",
            "test_point": "relay_end",
            "stage": "as_left",
            "value": 0.7,
            "unit": "Ohm",
            "instrument": "SB-22",
        }
    ],
    "instruments": [
        {
            "instrument": "SB-22",
            "calibrations": [
                {
                    "calibrated_on": "2026-05-04",
                    "due_on": "2027-05-03",
                    "result": "pass",
                    "resolution": 0.1,
                    "resolution_unit": "Ohm",
                }
            ],
        }
    ],
}


_VERDICT: dict[str, Any] = VERDICT | {"visit": None, "visited_at": None}


class CheckCalibration(Request):
    """`resolution` is the step of a box or the last digit of a meter."""

    calibrated_on: date
    due_on: date
    result: CalibrationResult
    resolution: Annotated[float, Field(gt=0, le=1e9)] | None = None
    resolution_unit: str | None = None


class CheckInstrument(Request):
    """An instrument with all its calibrations; one not sent counts as unknown."""

    instrument: Name
    calibrations: Annotated[list[CheckCalibration], Field(max_length=200)]


class CheckSent(Request):
    """`edition` null: the one of the book in force on the day; a named one may be a draft.

    The section is described as in the register; its `book` is not looked at.
    """

    model_config = ConfigDict(json_schema_extra={"examples": [_EXAMPLE]})

    book: Name
    edition: Name | None = None
    visited_on: date
    section: SectionDraft
    ballast: Ballast | None = None
    rail: Rail | None = None
    work_done: Annotated[list[Work], Field(max_length=50)] | None = None
    readings: Annotated[list[ReadingSent], Field(max_length=200)]
    instruments: Annotated[list[CheckInstrument], Field(max_length=200)] | None = None

    def check(self) -> Check:
        """What is asked of the application."""
        return Check(
            book=self.book,
            edition=self.edition,
            visited_on=self.visited_on,
            section=self.section.section,
            content=self.section.content(),
            readings=tuple(_reading(reading) for reading in self.readings),
            ballast=self.ballast,
            rail=self.rail,
            work_done=tuple(self.work_done or ()),
            instruments=tuple(_instrument(instrument) for instrument in self.instruments or ()),
        )


class CheckAnswer(Answer):
    """What the readings show by themselves: no earlier visit, task or concession is known here.

    Verdicts are as in a status, without a visit. `doubtful` points at readings that contradict others.
    """

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "book": "harrow-vale-house",
                    "edition": "1",
                    "visited_on": "2026-11-30",
                    "compliance": "yes",
                    "worst_hazard": None,
                    "verdicts": [_VERDICT],
                    "cautions": [],
                    "doubtful": [],
                }
            ]
        }
    )

    book: str
    edition: str | None
    visited_on: date
    compliance: Compliance | None
    worst_hazard: Hazard | None
    verdicts: list[VerdictAnswer]
    cautions: list[ReasonAnswer]
    doubtful: list[CautionAnswer]


def check_answer(asked: CheckSent, checked: Checked) -> CheckAnswer:
    """From the application's value."""
    status = checked.status
    return CheckAnswer(
        book=asked.book,
        edition=status.edition,
        visited_on=asked.visited_on,
        compliance=status.compliance,
        worst_hazard=status.worst_hazard,
        verdicts=[VerdictAnswer.model_validate(verdict) for verdict in status.verdicts],
        cautions=[ReasonAnswer.model_validate(caution) for caution in status.cautions],
        doubtful=[
            CautionAnswer(code=code, pointer=f"/readings/{index}", reason=WORDS[code])
            for index, code in checked.doubts
        ],
    )


def _reading(sent: ReadingSent) -> ReadingDraft:
    return ReadingDraft(
        sent.quantity,
        sent.test_point,
        sent.stage,
        sent.comparison or Comparison.EQ,
        sent.value,
        sent.unit,
        sent.instrument,
        sent.shunt_ohm,
        sent.source,
    )


def _instrument(sent: CheckInstrument) -> InstrumentGiven:
    given = tuple(
        CalibrationGiven(one.calibrated_on, one.due_on, one.result, one.resolution, one.resolution_unit)
        for one in sent.calibrations
    )
    return InstrumentGiven(sent.instrument, given)
