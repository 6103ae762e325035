"""The statements that read what sections are judged by, made once for each database.

They take the names of the sections, the end of the day and the instant of knowledge as parameters.
What the rows mean is in `fact_rows`, how they come together in `facts`.
"""

from __future__ import annotations

from collections import defaultdict, namedtuple
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from functools import lru_cache
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.application.fact_rows import (
    LATEST_COLUMNS,
    READING_COLUMNS,
    VISIT_COLUMNS,
    WITH_VOID,
    concession_of,
    reading_of,
    visit_of,
)
from service.records import several
from service.records.columns import UtcDateTime
from service.records.several import Asked, among
from service.records.tables import Concession, Latest, ReadingRow, SectionVersion, VisitRow
from service.records.unit_of_work import end_of_day
from service.rules import facts as rules
from service.rules.limits import Edition
from service.rules.quantities import QUANTITIES

_version = SectionVersion.__table__  # type: ignore[attr-defined]
_visit = VisitRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]
_latest = Latest.__table__  # type: ignore[attr-defined]
_concession = Concession.__table__  # type: ignore[attr-defined]

Version = namedtuple("Version", [column.name for column in _version.c])  # type: ignore[misc]
"""A row of `section_version`."""

_ConcessionRow = namedtuple("_ConcessionRow", [column.name for column in _concession.c])  # type: ignore[misc]

_WET = frozenset(name for name, quantity in QUANTITIES.items() if quantity.wetness_matters)


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
class Found:
    """What was read, by section: every visit, after the day judged too; readings up to it, in no order."""

    visits: Mapping[str, list[rules.Visit]]
    readings: Mapping[str, list[rules.Reading]]
    concessions: Mapping[str, list[rules.Concession]]


def historic(editions: Iterable[Edition]) -> tuple[str, ...]:
    """Quantities of which rules need every reading, not only the latest."""
    needed = set(_WET)
    for edition in editions:
        for task in edition.tasks:
            needed.update(task.needs, task.needs_anywhere)
    return tuple(sorted(needed))


@dataclass(frozen=True, slots=True)
class _Statements:
    versions: sa.Select[Any]
    visits: sa.Select[Any]
    newest_readings: sa.CompoundSelect[Any]
    every_reading: sa.Select[Any]
    concessions: sa.Select[Any]


@lru_cache(maxsize=4)
def _statements(dialect: str, *, as_known: bool) -> _Statements:
    depot = sa.bindparam("depot", type_=sa.Text)
    ends, known_at = sa.bindparam("ends", type_=UtcDateTime), sa.bindparam("known_at", type_=UtcDateTime)

    def of_sections(table: sa.Table) -> sa.ColumnElement[bool]:
        return sa.and_(table.c.depot == depot, among(table.c.section, "names", dialect))

    versions = sa.select(_version).where(of_sections(_version))
    visits = sa.select(*VISIT_COLUMNS).select_from(WITH_VOID).where(of_sections(_visit))
    every = sa.select(*READING_COLUMNS).where(of_sections(_reading), _reading.c.visited_at < ends)
    concessions = sa.select(_concession).where(of_sections(_concession))
    if as_known:
        versions = versions.where(_version.c.recorded_at <= known_at)
        visits = visits.where(_visit.c.received_at <= known_at)
        received = sa.and_(_visit.c.depot == _reading.c.depot, _visit.c.visit == _reading.c.visit)
        every = every.where(sa.exists().where(received, _visit.c.received_at <= known_at))
        concessions = concessions.where(_concession.c.granted_at <= known_at)
    of_history = among(_reading.c.quantity, "historic", dialect)
    newest = sa.select(*LATEST_COLUMNS).where(
        of_sections(_latest), sa.not_(among(_latest.c.quantity, "historic", dialect))
    )
    return _Statements(
        versions.order_by(_version.c.section, _version.c.version),
        visits.order_by(_visit.c.section, _visit.c.visited_at, _visit.c.visit),
        sa.union_all(newest, every.where(of_history)),
        every,
        concessions.order_by(_concession.c.concession),
    )


def _of(connection: Connection, moment: Moment, names: Sequence[str]) -> tuple[_Statements, dict[str, Any]]:
    statements = _statements(connection.dialect.name, as_known=moment.known_at is not None)
    return statements, {"depot": moment.depot, "names": list(names), "known_at": moment.known_at}


def ask_versions(connection: Connection, moment: Moment, names: Sequence[str]) -> Asked:
    """For the records of sections; `versions_of` takes the rows."""
    statements, values = _of(connection, moment, names)
    if moment.known_at is None:
        del values["known_at"]
    return Asked(statements.versions, values)


def versions_of(rows: Iterable[tuple[Any, ...]]) -> dict[str, list[Any]]:
    """Versions by section, oldest first."""
    found: dict[str, list[Any]] = defaultdict(list)
    for row in rows:
        version: Any = Version._make(row)
        found[version.section].append(version)
    return found


def ask(
    connection: Connection,
    moment: Moment,
    names: Sequence[str],
    history: Sequence[str],
    *,
    every: bool = False,
) -> tuple[Asked, Asked, Asked]:
    """For visits, readings and concessions; `found` takes their rows. `every`: all readings, not `latest`."""
    statements, values = _of(connection, moment, names)
    ends = end_of_day(moment.as_of, moment.time_zone)
    timed = {**values, "ends": ends}
    if moment.known_at is None:
        del values["known_at"], timed["known_at"]
    if moment.present and not every:
        readings = Asked(statements.newest_readings, {**timed, "historic": list(history)})
    else:
        readings = Asked(statements.every_reading, timed)
    return Asked(statements.visits, values), readings, Asked(statements.concessions, values)


def found(moment: Moment, rows: Sequence[Sequence[tuple[Any, ...]]]) -> Found | None:
    """What the rows of `ask` say; None if a reading of `latest` was taken after the day judged.

    Then a handheld ahead of midnight has the last word there, and all readings have to be asked for.
    """
    visit_rows, reading_rows, concession_rows = rows
    zone, known_at = ZoneInfo(moment.time_zone), moment.known_at
    ends = end_of_day(moment.as_of, moment.time_zone)
    visits: dict[str, list[rules.Visit]] = defaultdict(list)
    for section, *columns, voided_at in visit_rows:
        voided = voided_at is not None and (known_at is None or voided_at <= known_at)
        visits[section].append(visit_of(zone, *columns, voided=voided))
    readings: dict[str, list[rules.Reading]] = defaultdict(list)
    for section, visited_at, *columns in reading_rows:
        if visited_at >= ends:
            return None
        readings[section].append(reading_of(*columns))
    concessions: dict[str, list[rules.Concession]] = defaultdict(list)
    for row in concession_rows:
        concession: Any = _ConcessionRow._make(row)
        concessions[concession.section].append(concession_of(concession, known_at))
    return Found(visits, readings, concessions)


def find(connection: Connection, moment: Moment, names: Sequence[str], history: Sequence[str]) -> Found:
    """Visits, readings and concessions of the named sections."""
    what = found(moment, several.run(connection, *ask(connection, moment, names, history)))
    if what is None:
        what = found(moment, several.run(connection, *ask(connection, moment, names, history, every=True)))
        assert what is not None
    return what
