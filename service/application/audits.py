"""Audits: a depot judged as of a date, once, whoever asks; which are due; and what is printed from one.

An audit is computed in a read snapshot (`audit_survey`) and takes the locks only to write
(`audit_keeping`). What it found of each section not in order is kept as it was shown.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from dateutil.relativedelta import FR, MO, SA, SU, TH, TU, WE, relativedelta
from sqlalchemy.engine import Connection, Row

from service.application import audit_keeping, audit_survey
from service.application.answers import day, instant
from service.application.audit_survey import Survey
from service.application.context import Service
from service.application.facts import Moment
from service.application.status import depot_row
from service.errors import ConflictError, Fault, NotAcceptableError, NotFoundError
from service.records import journal
from service.records.tables import Audit, AuditRow, Depot
from service.records.unit_of_work import Actor, Transaction, local_day

_audit = Audit.__table__  # type: ignore[attr-defined]
_row = AuditRow.__table__  # type: ignore[attr-defined]
_depot = Depot.__table__  # type: ignore[attr-defined]

WEEKDAYS = (MO, TU, WE, TH, FR, SA, SU)

CAUTION = (
    "Advice from records, not an authority to work or to run trains: the railway's own rules and a "
    "competent, licensed person decide. What was not measured is not shown to be safe."
)
"""Stands at the head of every weekly list."""


def run(service: Service, actor: Actor, depot: str, as_of: date | None = None) -> Row[Any]:
    """Audit a depot as of a date (default: its today) and return the audit's row.

    The same date again gives the stored audit. Raises NotAcceptableError for a date in the future,
    ConflictError for one before the last audit's.
    """
    now = service.clock()
    with service.read(snapshot=True) as connection:
        row = depot_row(connection, depot)
        today = local_day(now, row.time_zone)
        on = as_of or today
        stored = _stored_or_refused(connection, depot, on, today)
        if stored is not None:
            return stored
        moment = Moment(depot, row.time_zone, on, None, present=on == today)
        survey = audit_survey.survey(connection, moment, now)
    with service.unit_of_work(actor) as tx:
        tx.lock_depot(depot, exclusive=True)
        stored = _stored_or_refused(tx.connection, depot, on, today)
        return _keep(tx, survey, now) if stored is None else stored


def _keep(tx: Transaction, survey: Survey, started_at: datetime) -> Row[Any]:
    depot, on = survey.moment.depot, survey.moment.as_of
    kept = audit_keeping.keep(tx, survey, started_at)
    row = get(tx.connection, depot, on)
    content = {**wire(row), "opened": kept.opened, "seen": kept.seen, "cleared": kept.cleared}
    tx.append(depot, [*kept.lines, journal.Entry("audit_finished", "audit", on.isoformat(), (), content)])
    return row


def _stored_or_refused(connection: Connection, depot: str, on: date, today: date) -> Row[Any] | None:
    if on > today:
        fault = Fault("future", "an audit is as of the depot's today or an earlier day", "/as_of")
        raise NotAcceptableError("An audit cannot be as of a day in the future.", (fault,))
    query = sa.select(_audit).where(_audit.c.depot == depot, _audit.c.audit == on)
    stored = connection.execute(query).one_or_none()
    if stored is None:
        last = connection.execute(
            sa.select(sa.func.max(_audit.c.audit)).where(_audit.c.depot == depot)
        ).scalar()
        if last is not None and on < last:
            raise ConflictError(
                "A later audit is stored: audits go forward, since findings persist from one to the next.",
                (Fault("before_last_audit", "lies before the last audit", "/as_of"),),
                kind="before-last-audit",
            )
    return stored


def wire(row: Row[Any]) -> dict[str, Any]:
    """An audit as answers and the journal show it."""
    return {
        "depot": row.depot,
        "audit": day(row.audit),
        "state": "finished",
        "started_at": instant(row.started_at),
        "finished_at": instant(row.finished_at),
        "started_by": row.started_by,
        "known_at": instant(row.known_at),
        "sequence": row.sequence,
        "digest": row.digest,
        "editions": json.loads(row.editions),
        "sections_judged": row.sections_judged,
        "sections_not_judged": row.sections_not_judged,
        "counts": json.loads(row.counts),
        "caution": CAUTION,
    }


def get(connection: Connection, depot: str, on: date | None) -> Row[Any]:
    """An audit's row; the latest for None. NotFoundError if there is none."""
    query = sa.select(_audit).where(_audit.c.depot == depot)
    query = query.where(_audit.c.audit == on) if on is not None else query.order_by(_audit.c.audit.desc())
    row = connection.execute(query.limit(1)).one_or_none()
    if row is None:
        raise NotFoundError("This depot has no such audit.")
    return row


def page(connection: Connection, depot: str, after: date | None, most: int) -> list[Row[Any]]:
    """Audits in order of date, from `after` on, at most `most`."""
    query = sa.select(_audit).where(_audit.c.depot == depot)
    if after is not None:
        query = query.where(_audit.c.audit > after)
    return list(connection.execute(query.order_by(_audit.c.audit).limit(most)))


@dataclass(frozen=True, slots=True)
class WeeklyList:
    """What a weekly list shows: its head, and its sections in order, each with its findings."""

    depot: str
    title: str
    time_zone: str
    audit: dict[str, Any]
    sections: list[dict[str, Any]]


def weekly_list(connection: Connection, depot: str, on: date | None) -> WeeklyList:
    """The list of one audit (the latest for None), as it was printed then."""
    row = get(connection, depot, on)
    where = (_row.c.depot == depot, _row.c.audit == row.audit)
    contents = connection.execute(sa.select(_row.c.content).where(*where).order_by(_row.c.position)).scalars()
    owner = depot_row(connection, depot)
    return WeeklyList(depot, owner.title, owner.time_zone, wire(row), [json.loads(text) for text in contents])


def due(connection: Connection, now: datetime) -> list[tuple[str, date]]:
    """Depots whose weekly hour has passed without its audit, with the day it is due as of."""
    newest = sa.select(_audit.c.depot, sa.func.max(_audit.c.audit).label("on")).group_by(_audit.c.depot)
    last: dict[str, date] = {row.depot: row.on for row in connection.execute(newest)}
    found = []
    for row in connection.execute(sa.select(_depot).order_by(_depot.c.depot)):
        on = last_audit_day(now, row.time_zone, row.audit_weekday, row.audit_hour)
        began = local_day(row.created_at, row.time_zone)
        if on >= began and (row.depot not in last or last[row.depot] < on):
            found.append((row.depot, on))
    return found


def last_audit_day(now: datetime, time_zone: str, weekday: int, hour: int) -> date:
    """The local day of the latest weekly hour that is not after `now`. Weekday 0 is Monday."""
    local = now.astimezone(ZoneInfo(time_zone))
    hours = relativedelta(weekday=WEEKDAYS[weekday](-1), hour=hour, minute=0, second=0, microsecond=0)
    at = local + hours
    return (at if at <= local else local - relativedelta(days=1) + hours).date()
