"""Gather what sections are judged by, as of a day and as known at an instant.

The one place where rows become `rules.facts`. For the depot's present it reads `latest` and the
histories that rules ask for; for a past day or an earlier knowledge, all readings up to then.
"""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from functools import lru_cache
from itertools import islice
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import books, section_records
from service.records.tables import (
    CalibrationRow,
    Concession,
    InstrumentRow,
    Latest,
    ReadingRow,
    Section,
    SectionVersion,
    VisitRow,
    VoidRow,
)
from service.records.unit_of_work import end_of_day
from service.rules import facts as rules
from service.rules.limits import Edition
from service.rules.quantities import QUANTITIES
from service.rules.words import (
    Ballast,
    CalibrationResult,
    Comparison,
    ConditionLeft,
    Rail,
    Source,
    Stage,
    TaskDone,
    Work,
)

_section = Section.__table__  # type: ignore[attr-defined]
_version = SectionVersion.__table__  # type: ignore[attr-defined]
_visit = VisitRow.__table__  # type: ignore[attr-defined]
_void = VoidRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]
_latest = Latest.__table__  # type: ignore[attr-defined]
_concession = Concession.__table__  # type: ignore[attr-defined]
_instrument = InstrumentRow.__table__  # type: ignore[attr-defined]
_calibration = CalibrationRow.__table__  # type: ignore[attr-defined]

CHUNK = 1000
"""Sections read together; bounds the memory of judging a whole depot."""

_WET = frozenset(name for name, quantity in QUANTITIES.items() if quantity.wetness_matters)


@dataclass(frozen=True, slots=True)
class Gathered:
    """One section ready to be judged. `versions` are its record's rows, oldest first."""

    facts: rules.SectionFacts
    book: str | None
    editions: tuple[Edition, ...]
    versions: tuple[Row[Any], ...]


@dataclass(frozen=True, slots=True)
class Moment:
    """As of which day a depot is judged, and as known when (None: all that is stored)."""

    depot: str
    time_zone: str
    as_of: date
    known_at: datetime | None = None
    present: bool = False
    """True when `as_of` is the depot's today and `known_at` is None: `latest` may be used."""


def version_on(versions: Sequence[Row[Any]], day: date) -> Row[Any] | None:
    """The record in force on a day: the highest version that holds from then or earlier."""
    return next((row for row in reversed(versions) if row.valid_from_on <= day), None)


def returned_on(versions: Sequence[Row[Any]], day: date) -> date | None:
    """The last day up to `day` on which the section came back from out of use."""
    if all(row.state != "out_of_use" for row in versions):
        return None
    returned, before = None, None
    for start in sorted({row.valid_from_on for row in versions if row.valid_from_on <= day}):
        row = version_on(versions, start)
        assert row is not None
        if before == "out_of_use" and row.state == "in_use":
            returned = start
        before = row.state
    return returned


@dataclass(frozen=True, slots=True)
class Register:
    """What does not change while visits are stored: records, editions, instruments."""

    versions: Mapping[str, Sequence[Row[Any]]]
    editions: Mapping[str, tuple[Edition, ...]]
    instruments: Mapping[str, rules.Instrument]

    def record(self, row: Row[Any], day: date) -> rules.SectionRecord:
        """The record of a version, without its neighbours."""
        return section_records.record(row, returned_on(self.versions[row.section], day), {})


def register(
    connection: Connection, moment: Moment, names: Sequence[str], instruments: Sequence[str]
) -> Register:
    """Records of the named sections with the editions of every book any version names."""
    versions = _versions(connection, moment, list(names)) if names else {}
    named = {row.book for rows in versions.values() for row in rows if row.book is not None}
    editions = books.editions_of_books(connection, sorted(named), moment.known_at)
    return Register(versions, editions, _instruments(connection, moment, instruments))


def gather(
    connection: Connection,
    moment: Moment,
    names: Sequence[str] | None,
    known: Register | None = None,
) -> Iterator[Gathered]:
    """Facts of the named sections (None: all of the depot) in order of name.

    A section that has no record yet on the day is left out. `known` saves reading its part again.
    """
    if names is None:
        query = sa.select(_section.c.section).where(_section.c.depot == moment.depot)
        names = connection.execute(query.order_by(_section.c.section)).scalars().all()
    remaining = iter(sorted(names))
    instruments = None if len(names) <= CHUNK else _instruments(connection, moment, None)
    while chunk := list(islice(remaining, CHUNK)):
        yield from _gather_chunk(connection, moment, chunk, instruments, known)


def _gather_chunk(
    connection: Connection,
    moment: Moment,
    names: list[str],
    instruments: Mapping[str, rules.Instrument] | None,
    known: Register | None,
) -> Iterator[Gathered]:
    if known is None:
        known = register(connection, moment, names, ())
    versions, editions = known.versions, known.editions
    in_force = {name: version_on(versions.get(name, ()), moment.as_of) for name in names}
    visits = _visits(connection, moment, names)
    readings = _readings(connection, moment, names, editions)
    concessions = _concessions(connection, moment, names)
    if instruments is None:
        used = {reading.instrument for found in readings.values() for reading in found if reading.instrument}
        unread = sorted(used - known.instruments.keys())
        instruments = {**known.instruments, **_instruments(connection, moment, unread)}
    polarities = _polarities(connection, moment, in_force, versions)
    for name in names:
        row = in_force.get(name)
        if row is None:
            continue
        rows = versions[name]
        later = [version.valid_from_on for version in rows if version.valid_from_on > moment.as_of]
        yield Gathered(
            rules.SectionFacts(
                record=section_records.record(row, returned_on(rows, moment.as_of), polarities.get(name, {})),
                visits=tuple(visits.get(name, ())),
                readings=tuple(readings.get(name, ())),
                instruments=instruments,
                concessions=tuple(concessions.get(name, ())),
                next_version_on=min(later, default=None),
            ),
            row.book,
            editions.get(row.book, ()) if row.book is not None else (),
            tuple(rows),
        )


def _in_chunk(table: sa.Table, depot: str, names: list[str]) -> sa.ColumnElement[bool]:
    """Of one section by equality; of many by range, since `names` are neighbours in order."""
    if len(names) == 1:
        return sa.and_(table.c.depot == depot, table.c.section == names[0])
    return sa.and_(table.c.depot == depot, table.c.section >= names[0], table.c.section <= names[-1])


def _versions(connection: Connection, moment: Moment, names: list[str]) -> dict[str, list[Row[Any]]]:
    query = sa.select(_version).where(_in_chunk(_version, moment.depot, names))
    if moment.known_at is not None:
        query = query.where(_version.c.recorded_at <= moment.known_at)
    wanted = set(names)
    found: dict[str, list[Row[Any]]] = defaultdict(list)
    for row in connection.execute(query.order_by(_version.c.section, _version.c.version)):
        if row.section in wanted:
            found[row.section].append(row)
    return found


def _polarities(
    connection: Connection,
    moment: Moment,
    in_force: Mapping[str, Row[Any] | None],
    versions: Mapping[str, Sequence[Row[Any]]],
) -> dict[str, dict[str, str | None]]:
    """section → boundary → what the neighbour's own record says there."""
    boundaries: dict[str, list[dict[str, Any]]] = {}
    for name, row in in_force.items():
        if row is not None and row.adjacent != "[]":
            boundaries[name] = json.loads(row.adjacent)
    neighbours = {entry["neighbour"] for entries in boundaries.values() for entry in entries}
    unread = sorted(neighbour for neighbour in neighbours if neighbour and neighbour not in versions)
    known = dict(versions)
    if unread:
        query = sa.select(_version).where(_version.c.depot == moment.depot, _version.c.section.in_(unread))
        if moment.known_at is not None:
            query = query.where(_version.c.recorded_at <= moment.known_at)
        others: dict[str, list[Row[Any]]] = defaultdict(list)
        for row in connection.execute(query.order_by(_version.c.section, _version.c.version)):
            others[row.section].append(row)
        known.update(others)
    said: dict[str, dict[str, str | None]] = {}
    for name, entries in boundaries.items():
        said[name] = {}
        for entry in entries:
            theirs = version_on(known.get(entry["neighbour"], ()), moment.as_of)
            for other in json.loads(theirs.adjacent) if theirs is not None else ():
                if other["boundary"] == entry["boundary"] and other["neighbour"] == name:
                    said[name][entry["boundary"]] = other["polarity"]
    return said


@lru_cache(maxsize=4096)
def _tasks(text: str) -> tuple[rules.TaskClaim, ...]:
    return tuple(rules.TaskClaim(item["task"], TaskDone(item["done"])) for item in json.loads(text))


@lru_cache(maxsize=4096)
def _work(text: str) -> frozenset[Work]:
    return frozenset(Work(word) for word in json.loads(text))


def visit_of(
    row: Mapping[str, Any] | Row[*tuple[Any, ...]], time_zone: ZoneInfo, voided: bool
) -> rules.Visit:
    """The rule object of a row of `visit`."""
    values = row if isinstance(row, Mapping) else row._mapping
    return rules.Visit(
        visit=values["visit"],
        visited_at=values["visited_at"],
        visited_on=values["visited_at"].astimezone(time_zone).date(),
        ballast=Ballast(values["ballast"]) if values["ballast"] else None,
        rail=Rail(values["rail"]) if values["rail"] else None,
        tasks=_tasks(values["tasks"]),
        work=_work(values["work_done"]),
        condition_left=ConditionLeft(values["condition_left"]) if values["condition_left"] else None,
        replaces=values["replaces"],
        voided=voided,
    )


_VISIT_COLUMNS = [
    _visit.c[name]
    for name in (
        "section",
        "visit",
        "visited_at",
        "ballast",
        "rail",
        "tasks",
        "work_done",
        "condition_left",
        "replaces",
    )
]


def _visits(connection: Connection, moment: Moment, names: list[str]) -> dict[str, list[rules.Visit]]:
    joined = _visit.outerjoin(
        _void, sa.and_(_void.c.depot == _visit.c.depot, _void.c.visit == _visit.c.visit)
    )
    query = (
        sa.select(*_VISIT_COLUMNS, _void.c.voided_at)
        .select_from(joined)
        .where(_in_chunk(_visit, moment.depot, names))
        .where(_visit.c.visited_at < end_of_day(moment.as_of, moment.time_zone))
        .order_by(_visit.c.section, _visit.c.visited_at, _visit.c.visit)
    )
    if moment.known_at is not None:
        query = query.where(_visit.c.received_at <= moment.known_at)
    zone = ZoneInfo(moment.time_zone)
    found: dict[str, list[rules.Visit]] = defaultdict(list)
    for row in connection.execute(query):
        voided = row.voided_at is not None and (moment.known_at is None or row.voided_at <= moment.known_at)
        found[row.section].append(visit_of(row, zone, voided))
    return found


def reading_of(row: Mapping[str, Any] | Row[Any], stage: str, value: float) -> rules.Reading:
    """The rule object of a row of `reading` or of `latest`."""
    values = row if isinstance(row, Mapping) else row._mapping
    return rules.Reading(
        visit=values["visit"],
        quantity=values["quantity"],
        test_point=values["test_point"],
        stage=Stage(stage),
        comparison=Comparison(values["comparison"]),
        value=value,
        instrument=values["instrument"],
        shunt_ohm=values["shunt_ohm"],
        source=Source(values["source"]) if values["source"] else None,
        doubtful=values["doubtful"],
    )


def _historic(editions: Iterable[Edition]) -> list[str]:
    """Quantities of which rules need every reading, not only the latest."""
    needed = set(_WET)
    for edition in editions:
        for task in edition.tasks:
            needed.update(task.needs, task.needs_anywhere)
    return sorted(needed)


def _readings(
    connection: Connection,
    moment: Moment,
    names: list[str],
    editions: Mapping[str, tuple[Edition, ...]],
) -> dict[str, list[rules.Reading]]:
    ends = end_of_day(moment.as_of, moment.time_zone)
    query = sa.select(_reading).where(_in_chunk(_reading, moment.depot, names), _reading.c.visited_at < ends)
    found: dict[str, list[rules.Reading]] = defaultdict(list)
    if moment.present:
        historic = _historic(edition for several in editions.values() for edition in several)
        ahead = _latest_rows(connection, moment, names, frozenset(historic), ends, found)
        if not ahead:
            query = query.where(_reading.c.quantity.in_(historic))
        # a handheld ahead of midnight has the last word in `latest`: fall back on all readings
        else:
            found.clear()
    elif moment.known_at is not None:
        query = query.where(
            sa.exists().where(
                _visit.c.depot == _reading.c.depot,
                _visit.c.visit == _reading.c.visit,
                _visit.c.received_at <= moment.known_at,
            )
        )
    for row in connection.execute(query):
        found[row.section].append(reading_of(row, row.stage, row.value))
    return found


def _latest_rows(
    connection: Connection,
    moment: Moment,
    names: list[str],
    historic: frozenset[str],
    ends: datetime,
    found: dict[str, list[rules.Reading]],
) -> bool:
    """Add the latest readings to `found`; True if one of them was taken after the day judged."""
    query = sa.select(_latest).where(_in_chunk(_latest, moment.depot, names))
    for row in connection.execute(query):
        if row.visited_at >= ends:
            return True
        if row.quantity not in historic:
            stage, value = ("as_left", row.as_left) if row.as_left is not None else ("as_found", row.as_found)
            found[row.section].append(reading_of(row, stage, value))
    return False


def _concessions(
    connection: Connection, moment: Moment, names: list[str]
) -> dict[str, list[rules.Concession]]:
    query = sa.select(_concession).where(_in_chunk(_concession, moment.depot, names))
    if moment.known_at is not None:
        query = query.where(_concession.c.granted_at <= moment.known_at)
    found: dict[str, list[rules.Concession]] = defaultdict(list)
    for row in connection.execute(query.order_by(_concession.c.concession)):
        known = row.ended_at is not None and (moment.known_at is None or row.ended_at <= moment.known_at)
        found[row.section].append(
            rules.Concession(
                concession=row.concession,
                limit=row.limit_name,
                task=row.task,
                test_point=row.test_point,
                allowed_min=row.allowed_min,
                allowed_max=row.allowed_max,
                from_on=row.from_on,
                until_on=row.until_on,
                ended_on=row.ended_on if known else None,
            )
        )
    return found


def _instruments(
    connection: Connection, moment: Moment, names: Sequence[str] | None
) -> dict[str, rules.Instrument]:
    """Instruments with their calibrations in order of date; all of the depot's for None."""
    if names is not None and not names:
        return {}
    joined = _instrument.outerjoin(
        _calibration,
        sa.and_(
            _calibration.c.depot == _instrument.c.depot, _calibration.c.instrument == _instrument.c.instrument
        ),
    )
    query = (
        sa.select(_instrument.c.instrument.label("name"), _calibration)
        .select_from(joined)
        .where(_instrument.c.depot == moment.depot)
        .order_by(_instrument.c.instrument, _calibration.c.calibrated_on)
    )
    if names is not None:
        query = query.where(_instrument.c.instrument.in_(names))
    calibrations: dict[str, list[rules.Calibration]] = defaultdict(list)
    for row in connection.execute(query):
        known = calibrations[row.name]
        if row.calibrated_on is None or (moment.known_at is not None and row.recorded_at > moment.known_at):
            continue
        known.append(calibration_of(row))
    return {name: rules.Instrument(name, tuple(found)) for name, found in calibrations.items()}


def calibration_of(row: Row[Any]) -> rules.Calibration:
    """The rule object of a row of `calibration`; its resolution is kept in the base unit."""
    step = {} if row.resolution is None else {row.resolution_unit: row.resolution}
    return rules.Calibration(row.calibrated_on, row.due_on, CalibrationResult(row.result), step)
