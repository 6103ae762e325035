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
from itertools import islice
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import books, section_records
from service.application.fact_rows import (
    LATEST_COLUMNS,
    READING_COLUMNS,
    VISIT_COLUMNS,
    WITH_VOID,
    calibration_of,
    concession_of,
    reading_of,
    returned_on,
    version_on,
    visit_of,
)
from service.records.tables import (
    CalibrationRow,
    Concession,
    InstrumentRow,
    Latest,
    ReadingRow,
    Section,
    SectionVersion,
    VisitRow,
)
from service.records.unit_of_work import Transaction, end_of_day
from service.rules import facts as rules
from service.rules.limits import Edition
from service.rules.quantities import QUANTITIES

_section = Section.__table__  # type: ignore[attr-defined]
_version = SectionVersion.__table__  # type: ignore[attr-defined]
_visit = VisitRow.__table__  # type: ignore[attr-defined]
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


@dataclass(frozen=True, slots=True)
class Register:
    """What does not change while visits are stored: records, editions, instruments."""

    versions: Mapping[str, Sequence[Row[Any]]]
    editions: Mapping[str, tuple[Edition, ...]]
    instruments: Mapping[str, rules.Instrument]
    visits: Mapping[str, Sequence[rules.Visit]] | None = None
    """Each section's visits in order, where they are known already."""

    def record(self, row: Row[Any], day: date) -> rules.SectionRecord:
        """The record of a version, without its neighbours."""
        return section_records.record(row, returned_on(self.versions[row.section], day), {})


def register(connection: Connection, moment: Moment, names: Sequence[str]) -> Register:
    """Records of the named sections with the editions of every book any version names."""
    versions = _versions(connection, moment, list(names)) if names else {}
    return Register(versions, books.editions_of_books(connection, _books(versions), moment.known_at), {})


def remembered(tx: Transaction, moment: Moment, epoch: int, names: Sequence[str]) -> Register:
    """As `register`, with all the depot's instruments; editions and instruments from memory if they are
    of this epoch of the depot, whose row must be locked as shared."""
    versions = _versions(tx.connection, moment, list(names)) if names else {}
    kept = tx.memory.get(moment.depot)
    if kept is None or kept.epoch != epoch:
        kept = _Kept(epoch, {}, _instruments(tx.connection, moment, None))
    unread = _books(versions) - kept.editions.keys()
    if unread:
        more = books.editions_of_books(tx.connection, unread, None)
        kept = _Kept(epoch, {**kept.editions, **more}, kept.instruments)
    tx.memory[moment.depot] = kept
    return Register(versions, kept.editions, kept.instruments)


@dataclass(frozen=True, slots=True)
class _Kept:
    """What is remembered of a depot: true for one epoch, since changes to it take the exclusive lock."""

    epoch: int
    editions: Mapping[str, tuple[Edition, ...]]
    instruments: Mapping[str, rules.Instrument]


def _books(versions: Mapping[str, Sequence[Row[Any]]]) -> set[str]:
    return {row.book for rows in versions.values() for row in rows if row.book is not None}


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
        known = register(connection, moment, names)
    versions, editions = known.versions, known.editions
    in_force = {name: version_on(versions.get(name, ()), moment.as_of) for name in names}
    visits = known.visits if known.visits is not None else _visits(connection, moment, names)
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


def _visits(connection: Connection, moment: Moment, names: list[str]) -> dict[str, list[rules.Visit]]:
    query = (
        sa.select(*VISIT_COLUMNS)
        .select_from(WITH_VOID)
        .where(_in_chunk(_visit, moment.depot, names))
        .where(_visit.c.visited_at < end_of_day(moment.as_of, moment.time_zone))
        .order_by(_visit.c.section, _visit.c.visited_at, _visit.c.visit)
    )
    if moment.known_at is not None:
        query = query.where(_visit.c.received_at <= moment.known_at)
    zone, known_at = ZoneInfo(moment.time_zone), moment.known_at
    found: dict[str, list[rules.Visit]] = defaultdict(list)
    for section, *columns, voided_at in connection.execute(query):
        voided = voided_at is not None and (known_at is None or voided_at <= known_at)
        found[section].append(visit_of(zone, *columns, voided=voided))
    return found


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
    every = sa.select(*READING_COLUMNS).where(
        _in_chunk(_reading, moment.depot, names), _reading.c.visited_at < ends
    )
    if moment.present:
        historic = _historic(edition for several in editions.values() for edition in several)
        newest = sa.select(*LATEST_COLUMNS).where(
            _in_chunk(_latest, moment.depot, names), _latest.c.quantity.not_in(historic)
        )
        both = sa.union_all(newest, every.where(_reading.c.quantity.in_(historic)))
        found, ahead = _sorted_out(connection, both, ends)
        if not ahead:
            return found
        # a handheld ahead of midnight has the last word in `latest`: go by all readings
    elif moment.known_at is not None:
        every = every.where(
            sa.exists().where(
                _visit.c.depot == _reading.c.depot,
                _visit.c.visit == _reading.c.visit,
                _visit.c.received_at <= moment.known_at,
            )
        )
    return _sorted_out(connection, every, ends)[0]


def _sorted_out(
    connection: Connection, query: sa.Select[Any] | sa.CompoundSelect[Any], ends: datetime
) -> tuple[dict[str, list[rules.Reading]], bool]:
    """Readings by section, and whether one of them was taken after the day judged."""
    found: dict[str, list[rules.Reading]] = defaultdict(list)
    ahead = False
    for section, visited_at, *columns in connection.execute(query):
        ahead = ahead or visited_at >= ends
        found[section].append(reading_of(*columns))
    return found, ahead


def _concessions(
    connection: Connection, moment: Moment, names: list[str]
) -> dict[str, list[rules.Concession]]:
    query = sa.select(_concession).where(_in_chunk(_concession, moment.depot, names))
    if moment.known_at is not None:
        query = query.where(_concession.c.granted_at <= moment.known_at)
    found: dict[str, list[rules.Concession]] = defaultdict(list)
    for row in connection.execute(query.order_by(_concession.c.concession)):
        found[row.section].append(concession_of(row, moment.known_at))
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
