"""Instruments, visits, their readings, and the latest reading of each quantity and test point.

Visits and readings are never changed; a void or a replacing visit says that one no longer counts.
`latest` is a projection of `reading` and can be rebuilt.
"""

from __future__ import annotations

from datetime import date, datetime

from sqlalchemy import Index
from sqlmodel import Field, SQLModel

from service.records.columns import one_of, within_depot
from service.records.tables.base import instant, key, name
from service.rules.words import (
    Ballast,
    BallastState,
    CalibrationResult,
    Comparison,
    ConditionLeft,
    Rail,
    Source,
    Stage,
)


class InstrumentRow(SQLModel, table=True):
    """A shunt box or meter."""

    __tablename__ = "instrument"
    __table_args__ = (within_depot(of="depot"), one_of("kind", ("shunt_box", "meter")))

    depot: str = key()
    instrument: str = key()
    kind: str
    title: str | None = None
    serial: str | None = None
    version: int
    recorded_at: datetime = instant()


class CalibrationRow(SQLModel, table=True):
    """One calibration; a list, since recalibrating today does not prove last year."""

    __tablename__ = "calibration"
    __table_args__ = (within_depot("instrument", of="instrument"), one_of("result", CalibrationResult))

    depot: str = key()
    instrument: str = key()
    calibrated_on: date = Field(primary_key=True)
    due_on: date
    result: str
    accuracy_percent: float | None = None
    resolution: float | None = None
    resolution_unit: str | None = None
    lead_resistance_ohm: float | None = None
    certificate: str | None = None
    recorded_at: datetime = instant()


class VisitRow(SQLModel, table=True):
    """One attendance at one section. `tasks` and `work_done` are JSON text."""

    __tablename__ = "visit"
    __table_args__ = (
        within_depot("section", of="section"),
        one_of("ballast", Ballast),
        one_of("ballast_state", BallastState),
        one_of("rail", Rail),
        one_of("condition_left", ConditionLeft),
        Index("ix_visit_section", "depot", "section", "visited_at"),
        Index("ix_visit_received", "depot", "received_at", "visit"),
        Index("ix_visit_replaces", "depot", "replaces"),
    )

    depot: str = key()
    visit: str = key()
    section: str = name()
    visited_at: datetime = instant()
    received_at: datetime = instant()
    received_by: str
    holder: str
    """The holder of the key it came with."""
    found_outside: bool
    """As found it was outside a wrong-side limit: voiding or replacing it takes a second holder."""
    clock_offset_s: int | None = None
    device: str | None = name(null=True)
    tester: str | None = None
    ballast: str | None = None
    ballast_state: str | None = None
    rail: str | None = None
    air_temperature_c: float | None = None
    tasks: str
    work_done: str
    condition_left: str | None = None
    remarks: str | None = None
    replaces: str | None = name(null=True)
    pack: str | None = name(null=True)
    digest: str


class VoidRow(SQLModel, table=True):
    """A visit declared void, by whom and why. There is no undoing it."""

    __tablename__ = "void"
    __table_args__ = (within_depot("visit", of="visit"),)

    depot: str = key()
    visit: str = key()
    voided_at: datetime = instant()
    voided_by: str
    why: str


class ReadingRow(SQLModel, table=True):
    """`value` is in the base unit; `value_given` and `unit_given` are what was sent."""

    __tablename__ = "reading"
    __table_args__ = (
        within_depot("visit", of="visit"),
        one_of("stage", Stage),
        one_of("comparison", Comparison),
        one_of("source", Source),
        Index("ix_reading_section", "depot", "section", "quantity", "test_point", "visited_at"),
    )

    depot: str = key()
    visit: str = key()
    quantity: str = key()
    test_point: str = key()
    stage: str = key()
    section: str = name()
    visited_at: datetime = instant()
    comparison: str
    value: float
    value_given: float
    unit_given: str
    instrument: str | None = name(null=True)
    shunt_ohm: float | None = None
    source: str | None = None
    doubtful: str | None = None


class Latest(SQLModel, table=True):
    """Of each quantity and test point the one visit that decides. `comparison` and on are of the
    reading that is judged: as left where there is one, else as found."""

    __tablename__ = "latest"
    __table_args__ = (within_depot("section", of="section"),)

    depot: str = key()
    section: str = key()
    quantity: str = key()
    test_point: str = key()
    visit: str = name()
    visited_at: datetime = instant()
    as_found: float | None = None
    as_left: float | None = None
    comparison: str
    instrument: str | None = name(null=True)
    shunt_ohm: float | None = None
    source: str | None = None
    doubtful: str | None = None
