"""Judge one visit's readings of a section described on the spot, by a limit book. Nothing is kept.

The verdicts are those that `visits` and `status` give for what is stored; here section, readings and
instruments all come with the question.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime
from types import SimpleNamespace
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.application import books, section_content, section_records, visit_content
from service.application.visit_content import Draft as VisitDraft
from service.application.visit_content import ReadingDraft
from service.errors import Fault, NotAcceptableError
from service.records.tables import LimitBook
from service.rules import doubtful
from service.rules.facts import Calibration, Instrument, Reading, SectionFacts, Visit
from service.rules.limits import Edition
from service.rules.quantities import UNITS, base_unit, to_base
from service.rules.status import Status, judge
from service.rules.words import (
    Ballast,
    CalibrationResult,
    Comparison,
    EditionState,
    Rail,
    Source,
    Stage,
    Work,
)

_book = LimitBook.__table__  # type: ignore[attr-defined]

VISIT = "check"
"""The name under which the rules know the visit; no answer shows it."""


@dataclass(frozen=True, slots=True)
class CalibrationGiven:
    """One calibration of an instrument that comes with the question."""

    calibrated_on: date
    due_on: date
    result: CalibrationResult
    resolution: float | None = None
    resolution_unit: str | None = None


@dataclass(frozen=True, slots=True)
class InstrumentGiven:
    """An instrument that comes with the question."""

    instrument: str
    calibrations: tuple[CalibrationGiven, ...]


@dataclass(frozen=True, slots=True)
class Check:
    """What is asked. `edition` None: the one in force on the day; named, it may be a draft."""

    book: str
    edition: str | None
    visited_on: date
    section: str
    content: section_content.Content
    readings: tuple[ReadingDraft, ...]
    ballast: Ballast | None = None
    rail: Rail | None = None
    work_done: tuple[Work, ...] = ()
    instruments: tuple[InstrumentGiven, ...] = ()


@dataclass(frozen=True, slots=True)
class Checked:
    """What the readings show. Verdicts name no visit; tasks are not judged by one visit alone.

    `doubts` are (index, code) of readings that something in their own visit speaks against.
    """

    status: Status
    doubts: tuple[tuple[int, str], ...]


def check(connection: Connection, asked: Check) -> Checked:
    """Judge what is asked.

    Raises NotAcceptableError naming every fault of the section, the readings and the instruments, or if
    there is no such book or edition.
    """
    faults = tuple(_faults(asked))
    if faults:
        raise NotAcceptableError("The check cannot be made as it is.", faults)
    editions = _editions(connection, asked)
    values = section_content.columns(asked.content)
    row: Any = SimpleNamespace(section=asked.section, version=0, **values)  # as if it had been kept
    record = section_records.record(row, None, {})
    readings = [_reading(given) for given in asked.readings]
    hints = doubtful.EquipmentHints(record.circuit_kind, section_records.feed_emf_v(row))
    doubts = doubtful.doubts(hints, readings)
    for index, code in doubts.items():
        readings[index] = replace(readings[index], doubtful=code)
    at = _instant(asked.visited_on)
    visit = Visit(VISIT, at, asked.visited_on, asked.ballast, asked.rail, work=frozenset(asked.work_done))
    facts = SectionFacts(
        record=record,
        visits=(visit,),
        readings=tuple(readings),
        instruments={given.instrument: _instrument(given) for given in asked.instruments},
        concessions=(),
    )
    status = judge(facts, asked.book, editions, asked.visited_on)
    verdicts = tuple(replace(verdict, visit=None, visited_at=None) for verdict in status.verdicts)
    return Checked(replace(status, verdicts=verdicts), tuple(sorted(doubts.items())))


def _instant(day: date) -> datetime:
    """Some instant of the day: days are all that is judged by."""
    return datetime(day.year, day.month, day.day, tzinfo=UTC)


def _faults(asked: Check) -> Iterator[Fault]:
    for fault in section_content.faults(asked.section, asked.content):
        yield replace(fault, pointer=f"/section{fault.pointer}")
    at = _instant(asked.visited_on)
    visit = VisitDraft(VISIT, asked.section, at, work_done=asked.work_done, readings=asked.readings)
    yield from visit_content.faults(visit, at)
    for index, instrument in enumerate(asked.instruments):
        yield from _instrument_faults(instrument, f"/instruments/{index}")
    names = [instrument.instrument for instrument in asked.instruments]
    for index, name in enumerate(names):
        if name in names[:index]:
            yield Fault("repeated", "this instrument is given twice", f"/instruments/{index}/instrument")


def _instrument_faults(instrument: InstrumentGiven, at: str) -> Iterator[Fault]:
    for index, calibration in enumerate(instrument.calibrations):
        place = f"{at}/calibrations/{index}"
        if calibration.due_on < calibration.calibrated_on:
            yield Fault("out_of_order", "falls due before it was made", f"{place}/due_on")
        if (calibration.resolution is None) != (calibration.resolution_unit is None):
            yield Fault("missing", "a resolution and its unit go together", f"{place}/resolution_unit")
        elif calibration.resolution_unit not in (None, *UNITS):
            yield Fault("unknown_unit", "is not a unit this service knows", f"{place}/resolution_unit")


def _editions(connection: Connection, asked: Check) -> tuple[Edition, ...]:
    """The editions to judge by; a named one as if it were in force on the day."""
    if asked.edition is None:
        if connection.execute(sa.select(_book.c.book).where(_book.c.book == asked.book)).first() is None:
            raise _unknown("There is no limit book of this name.", "unknown_book", "/book")
        return books.editions(connection, asked.book)
    named = books.rule_of(connection, asked.book, asked.edition)
    if named is None:
        raise _unknown("The limit book has no such edition.", "unknown_edition", "/edition")
    return (replace(named, state=EditionState.ISSUED, effective_on=asked.visited_on, withdrawn_on=None),)


def _unknown(detail: str, code: str, pointer: str) -> NotAcceptableError:
    return NotAcceptableError(detail, (Fault(code, "there is none of this name", pointer),))


def _reading(given: ReadingDraft) -> Reading:
    return Reading(
        visit=VISIT,
        quantity=given.quantity,
        test_point=given.test_point,
        stage=Stage(given.stage),
        comparison=Comparison(given.comparison),
        value=to_base(given.value, given.unit),
        instrument=given.instrument,
        shunt_ohm=given.shunt_ohm,
        source=None if given.source is None else Source(given.source),
    )


def _instrument(given: InstrumentGiven) -> Instrument:
    calibrations = sorted(given.calibrations, key=lambda calibration: calibration.calibrated_on)
    return Instrument(given.instrument, tuple(_calibration(calibration) for calibration in calibrations))


def _calibration(given: CalibrationGiven) -> Calibration:
    step: dict[str, float] = {}
    if given.resolution is not None and given.resolution_unit is not None:
        step[base_unit(given.resolution_unit)] = to_base(given.resolution, given.resolution_unit)
    return Calibration(given.calibrated_on, given.due_on, given.result, step)
