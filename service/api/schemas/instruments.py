"""Instruments on the wire, with their calibrations.

Mapped to and from the application member by member.
"""

from __future__ import annotations

from datetime import date
from enum import StrEnum
from typing import Annotated

from pydantic import ConfigDict, Field, JsonValue

from service.api.schemas.base import Answer, Instant, Line, Request
from service.api.whole import IGNORED
from service.application.instruments import Calibration, Content, Instrument
from service.rules.words import CalibrationResult


class InstrumentKind(StrEnum):
    SHUNT_BOX = "shunt_box"
    METER = "meter"


_EXAMPLE: dict[str, JsonValue] = {
    "kind": "shunt_box",
    "title": "Shunt box 22",
    "serial": "4471",
    "calibrations": [
        {
            "calibrated_on": "2026-02-03",
            "due_on": "2027-02-03",
            "result": "pass",
            "accuracy_percent": 1.0,
            "resolution": 0.1,
            "resolution_unit": "Ohm",
            "lead_resistance_ohm": 0.01,
            "certificate": "C-2026-118",
        }
    ],
}

Positive = Annotated[float, Field(gt=0, le=1e12)]


class CalibrationSent(Request):
    """One calibration. `resolution` is a box's step or a meter's last digit."""

    calibrated_on: date
    due_on: date
    result: CalibrationResult
    accuracy_percent: Annotated[float, Field(ge=0, le=100)] | None = None
    resolution: Positive | None = None
    resolution_unit: Line | None = None
    lead_resistance_ohm: Annotated[float, Field(ge=0, le=1000)] | None = None
    certificate: Line | None = None


class InstrumentSent(Request):
    """Every editable member; the others are the service's own and ignored. Calibrations are only added."""

    model_config = ConfigDict(json_schema_extra={"examples": [_EXAMPLE]})

    kind: InstrumentKind
    title: Line | None
    serial: Line | None
    calibrations: Annotated[list[CalibrationSent], Field(max_length=1000)]
    depot: object = Field(default=None, description=IGNORED)
    instrument: object = Field(default=None, description=IGNORED)
    version: object = Field(default=None, description=IGNORED)
    recorded_at: object = Field(default=None, description=IGNORED)

    def content(self) -> Content:
        """What the register is asked to say."""
        calibrations = tuple(
            Calibration(
                one.calibrated_on,
                one.due_on,
                one.result,
                one.accuracy_percent,
                one.resolution,
                one.resolution_unit,
                one.lead_resistance_ohm,
                one.certificate,
            )
            for one in self.calibrations
        )
        return Content(self.kind.value, self.title, self.serial, calibrations)


class CalibrationAnswer(Answer):
    """One calibration; its resolution in the base unit."""

    calibrated_on: date
    due_on: date
    result: CalibrationResult
    accuracy_percent: float | None
    resolution: float | None
    resolution_unit: str | None
    lead_resistance_ohm: float | None
    certificate: str | None


class InstrumentAnswer(Answer):
    """An instrument with its calibrations by date."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                _EXAMPLE
                | {
                    "depot": "harrow-vale",
                    "instrument": "SB-22",
                    "version": 1,
                    "recorded_at": "2026-02-04T09:00:00Z",
                }
            ]
        }
    )

    depot: str
    instrument: str
    version: int
    recorded_at: Instant
    kind: InstrumentKind
    title: str | None
    serial: str | None
    calibrations: list[CalibrationAnswer]


def instrument_answer(kept: Instrument) -> InstrumentAnswer:
    """One instrument."""
    return InstrumentAnswer(
        depot=kept.depot,
        instrument=kept.instrument,
        version=kept.version,
        recorded_at=kept.recorded_at,
        kind=InstrumentKind(kept.content.kind),
        title=kept.content.title,
        serial=kept.content.serial,
        calibrations=[CalibrationAnswer.model_validate(one) for one in kept.content.calibrations],
    )
