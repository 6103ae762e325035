"""Depots: who answers for the sections, in which time zone, and when their weekly audit is due.

What a depot's people record is elsewhere, a noun a module.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Connection, RowMapping

from service.application import status
from service.errors import ConflictError, Fault, NotAcceptableError, NotFoundError, StaleError
from service.records import journal
from service.records.tables import Depot as DepotTable
from service.records.tables import JournalHead
from service.records.unit_of_work import Transaction

WEEKDAYS = ("monday", "tuesday", "wednesday", "thursday", "friday", "saturday", "sunday")

_depot = DepotTable.__table__  # type: ignore[attr-defined]
_head = JournalHead.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Terms:
    """What of a depot can be edited. `time_zone` is a name of the IANA database."""

    title: str
    time_zone: str
    audit_weekday: str
    audit_hour: int


@dataclass(frozen=True, slots=True)
class Depot:
    """A depot as it is kept; `sequence` is the journal's."""

    depot: str
    title: str
    time_zone: str
    audit_weekday: str
    audit_hour: int
    version: int
    created_at: datetime
    sequence: int


@dataclass(frozen=True, slots=True)
class Pulse:
    """Whether anything changed: the journal's sequence, and the zone that says which day it is."""

    sequence: int
    time_zone: str


def pulse(connection: Connection, depot: str) -> Pulse:
    """The one row that a conditional GET is answered from; NotFoundError if there is no such depot."""
    query = sa.select(_head.c.sequence, _depot.c.time_zone).join_from(
        _depot, _head, _head.c.depot == _depot.c.depot
    )
    row = connection.execute(query.where(_depot.c.depot == depot)).one_or_none()
    if row is None:
        raise NotFoundError("There is no such depot.")
    return Pulse(row.sequence, row.time_zone)


def create(tx: Transaction, depot: str, terms: Terms) -> Depot:
    """Open a depot and its journal.

    Raises
    ------
    NotAcceptableError
        If the name is reserved or the time zone unknown.
    ConflictError
        If there is a depot of this name, or one that differs in case only.
    """
    if depot.startswith(("_", ".")):
        fault = Fault("reserved", "names of depots begin with neither _ nor .", pointer="/depot")
        raise NotAcceptableError("The name is reserved.", (fault,))
    _check(terms)
    same = sa.select(_depot.c.depot).where(sa.func.lower(_depot.c.depot) == depot.lower())
    if tx.connection.execute(same).first() is not None:
        raise ConflictError("There is already a depot of this name.")
    values = {"depot": depot, "version": 1, "epoch": 0, "created_at": tx.now} | _columns(terms)
    tx.connection.execute(sa.insert(_depot).values(values))
    journal.open_stream(tx.connection, depot)
    created = Depot(depot, version=1, created_at=tx.now, sequence=1, **_members(terms))
    tx.append(depot, [journal.Entry("depot_created", "depot", depot, (), content(created))])
    return created


def edit(tx: Transaction, depot: str, version: int, terms: Terms) -> Depot:
    """Change a depot; a new time zone moves its days, so every section is judged again.

    Raises
    ------
    StaleError
        If the depot is no longer at `version`.
    """
    _check(terms)
    row = tx.lock_depot(depot, exclusive=True)
    if row.version != version:
        raise StaleError("The depot was changed since you read it.")
    moved = row.time_zone != terms.time_zone
    values = {"version": version + 1} | _columns(terms)
    tx.connection.execute(sa.update(_depot).where(_depot.c.depot == depot).values(values))
    now_row = tx.lock_depot(depot, exclusive=True)
    sequence = journal.head(tx.connection, depot)[0] + 1
    edited = Depot(
        depot, version=version + 1, created_at=row.created_at, sequence=sequence, **_members(terms)
    )
    entry = journal.Entry("depot_edited", "depot", depot, None if moved else (), content(edited))
    if moved:
        status.rejudge_and_append(tx, now_row, None, [entry])
    else:
        tx.append(depot, [entry])
    return edited


def get(connection: Connection, depot: str) -> Depot:
    """One depot; NotFoundError if there is none of this name."""
    row = connection.execute(_selected().where(_depot.c.depot == depot)).mappings().one_or_none()
    if row is None:
        raise NotFoundError("There is no such depot.")
    return _of(row)


def listed(connection: Connection, *, only: str | None, after: str | None, most: int) -> list[Depot]:
    """Depots in order of name; `only` for a key that is bound to one."""
    query = _selected().order_by(_depot.c.depot).limit(most)
    if only is not None:
        query = query.where(_depot.c.depot == only)
    if after is not None:
        query = query.where(_depot.c.depot > after)
    return [_of(row) for row in connection.execute(query).mappings()]


def content(depot: Depot) -> dict[str, Any]:
    """The depot as the wire shows it, without the journal's own sequence."""
    return {
        "depot": depot.depot,
        "title": depot.title,
        "time_zone": depot.time_zone,
        "audit_weekday": depot.audit_weekday,
        "audit_hour": depot.audit_hour,
        "version": depot.version,
        "created_at": journal.instant_text(depot.created_at),
    }


def _check(terms: Terms) -> None:
    try:
        ZoneInfo(terms.time_zone)
    except (OSError, ValueError):  # ZoneInfoNotFoundError is a KeyError; folders and bad paths are these
        known = False
    except KeyError:
        known = False
    else:
        known = True
    if not known:
        fault = Fault("unknown_time_zone", "is no time zone of the IANA database", pointer="/time_zone")
        raise NotAcceptableError("The time zone is not known.", (fault,))


def _columns(terms: Terms) -> dict[str, Any]:
    return _members(terms) | {"audit_weekday": WEEKDAYS.index(terms.audit_weekday)}


def _members(terms: Terms) -> dict[str, Any]:
    return {
        "title": terms.title,
        "time_zone": terms.time_zone,
        "audit_weekday": terms.audit_weekday,
        "audit_hour": terms.audit_hour,
    }


def _selected() -> sa.Select[Any]:
    return sa.select(_depot, _head.c.sequence).join(_head, _head.c.depot == _depot.c.depot)


def _of(row: RowMapping) -> Depot:
    return Depot(
        depot=row["depot"],
        title=row["title"],
        time_zone=row["time_zone"],
        audit_weekday=WEEKDAYS[row["audit_weekday"]],
        audit_hour=row["audit_hour"],
        version=row["version"],
        created_at=row["created_at"],
        sequence=row["sequence"],
    )
