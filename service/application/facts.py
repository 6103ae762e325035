"""Gather what sections are judged by, as of a day and as known at an instant.

The one place where facts come together. For the depot's present the readings are those of `latest` and the
histories that rules ask for; for a past day or an earlier knowledge, all readings up to then.
"""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from itertools import islice
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.application import books, section_records
from service.application.fact_queries import Found, Moment, ask_versions, find, historic, versions_of
from service.application.fact_rows import calibration_of, returned_on, version_on
from service.records import several
from service.records.tables import CalibrationRow, InstrumentRow, Section
from service.rules import facts as rules
from service.rules.limits import Edition
from service.rules.readings import counting

__all__ = ["Gathered", "Moment", "Register", "assemble", "gather", "instruments_of", "register"]

_section = Section.__table__  # type: ignore[attr-defined]
_instrument = InstrumentRow.__table__  # type: ignore[attr-defined]
_calibration = CalibrationRow.__table__  # type: ignore[attr-defined]

CHUNK = 1000
"""Sections read together; bounds the memory of judging a whole depot."""


@dataclass(frozen=True, slots=True)
class Gathered:
    """One section ready to be judged. `versions` are its record's rows, oldest first."""

    facts: rules.SectionFacts
    book: str | None
    editions: tuple[Edition, ...]
    versions: tuple[Any, ...]


@dataclass(frozen=True, slots=True)
class Register:
    """What readings are judged against: records, editions, instruments."""

    versions: Mapping[str, Sequence[Any]]
    editions: Mapping[str, tuple[Edition, ...]]
    instruments: Mapping[str, rules.Instrument]

    def record(self, row: Any, day: date) -> rules.SectionRecord:
        """The record of a version, without its neighbours."""
        return section_records.record(row, returned_on(self.versions[row.section], day), {})

    @property
    def history(self) -> tuple[str, ...]:
        """Quantities of which every reading is needed."""
        return historic(edition for several_ in self.editions.values() for edition in several_)


def books_named(versions: Mapping[str, Sequence[Any]]) -> set[str]:
    """Every book that any version names."""
    return {row.book for rows in versions.values() for row in rows if row.book is not None}


def register(connection: Connection, moment: Moment, names: Sequence[str]) -> Register:
    """Records of the named sections with the editions of every book any version names; no instruments."""
    versions = versions_of(several.run(connection, ask_versions(connection, moment, names))[0])
    editions = books.editions_of_books(connection, sorted(books_named(versions)), moment.known_at)
    return Register(versions, editions, {})


def gather(connection: Connection, moment: Moment, names: Sequence[str] | None) -> Iterator[Gathered]:
    """Facts of the named sections (None: all of the depot) in order of name.

    A section that has no record yet on the day is left out.
    """
    if names is None:
        query = sa.select(_section.c.section).where(_section.c.depot == moment.depot)
        names = connection.execute(query.order_by(_section.c.section)).scalars().all()
    remaining = iter(sorted(names))
    every = instruments_of(connection, moment, None) if len(names) > CHUNK else None
    while chunk := list(islice(remaining, CHUNK)):
        known = register(connection, moment, chunk)
        found = find(connection, moment, chunk, known.history)
        if every is None:
            used = {
                one.instrument for several_ in found.readings.values() for one in several_ if one.instrument
            }
            instruments = instruments_of(connection, moment, sorted(used))
        else:
            instruments = every
        yield from assemble(
            connection, moment, chunk, Register(known.versions, known.editions, instruments), found
        )


def assemble(
    connection: Connection, moment: Moment, names: Sequence[str], known: Register, found: Found
) -> Iterator[Gathered]:
    """Bring together what was read of the named sections, in their order; only neighbours are asked for."""
    in_force = {name: version_on(known.versions.get(name, ()), moment.as_of) for name in names}
    polarities = _polarities(connection, moment, in_force, known.versions)
    for name in names:
        row = in_force[name]
        if row is None:
            continue
        rows = known.versions[name]
        visits, later = _up_to(moment.as_of, found.visits.get(name, ()))
        later += [version.valid_from_on for version in rows if version.valid_from_on > moment.as_of]
        yield Gathered(
            rules.SectionFacts(
                record=section_records.record(row, returned_on(rows, moment.as_of), polarities.get(name, {})),
                visits=tuple(visits),
                readings=tuple(found.readings.get(name, ())),
                instruments=known.instruments,
                concessions=tuple(found.concessions.get(name, ())),
                next_version_on=min(later, default=None),
            ),
            row.book,
            known.editions.get(row.book, ()) if row.book is not None else (),
            tuple(rows),
        )


def _up_to(day: date, visits: Sequence[rules.Visit]) -> tuple[Sequence[rules.Visit], list[date]]:
    """The visits up to a day; and the days of those that count later, on which the status may change.

    A correction takes back what it replaces on every day, whenever it says that it was made.
    """
    if all(visit.visited_on <= day for visit in visits):
        return visits, []
    counted = counting(visits)
    later = [visit.visited_on for visit in counted if visit.visited_on > day]
    return [visit for visit in counted if visit.visited_on <= day], later


def _polarities(
    connection: Connection,
    moment: Moment,
    in_force: Mapping[str, Any],
    versions: Mapping[str, Sequence[Any]],
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
        known.update(versions_of(several.run(connection, ask_versions(connection, moment, unread))[0]))
    said: dict[str, dict[str, str | None]] = {}
    for name, entries in boundaries.items():
        said[name] = {}
        for entry in entries:
            theirs = version_on(known.get(entry["neighbour"], ()), moment.as_of)
            for other in json.loads(theirs.adjacent) if theirs is not None else ():
                if other["boundary"] == entry["boundary"] and other["neighbour"] == name:
                    said[name][entry["boundary"]] = other["polarity"]
    return said


def instruments_of(
    connection: Connection, moment: Moment, names: Sequence[str] | None
) -> dict[str, rules.Instrument]:
    """Instruments with their calibrations in order of date; all of the depot's for None.

    The record keeps when an instrument was last changed, not when it was first known: at an earlier
    instant it is taken as known only with a calibration that was.
    """
    if names is not None and not names:
        return {}
    joined = _instrument.outerjoin(
        _calibration,
        sa.and_(
            _calibration.c.depot == _instrument.c.depot, _calibration.c.instrument == _instrument.c.instrument
        ),
    )
    query = (
        sa.select(
            _instrument.c.instrument.label("name"),
            _instrument.c.recorded_at.label("changed_at"),
            _calibration,
        )
        .select_from(joined)
        .where(_instrument.c.depot == moment.depot)
        .order_by(_instrument.c.instrument, _calibration.c.calibrated_on)
    )
    if names is not None:
        query = query.where(_instrument.c.instrument.in_(names))
    calibrations: dict[str, list[rules.Calibration]] = defaultdict(list)
    for row in connection.execute(query):
        known = row.calibrated_on is not None
        if moment.known_at is not None:
            known = known and row.recorded_at <= moment.known_at
            if not known and row.changed_at > moment.known_at:
                continue
        found = calibrations[row.name]
        if known:
            found.append(calibration_of(row))
    return {name: rules.Instrument(name, tuple(several_)) for name, several_ in calibrations.items()}
