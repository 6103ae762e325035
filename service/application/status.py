"""A section's status: judged from its facts, its summary kept for lists.

`status` rows hold what lists filter by; verdicts are judged when asked for. Every write that can
change a status goes through `rejudge_and_append`.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application.context import Service
from service.application.fact_queries import Found, Moment
from service.application.facts import Register, assemble, gather
from service.errors import Fault, NotAcceptableError, NotFoundError
from service.records import bulk, journal
from service.records.tables import Depot, Section
from service.records.tables import Status as StatusRow
from service.records.unit_of_work import Actor, Transaction, local_day
from service.rules.facts import SectionFacts
from service.rules.status import Status, judge

_depot = Depot.__table__  # type: ignore[attr-defined]
_section = Section.__table__  # type: ignore[attr-defined]
_status = StatusRow.__table__  # type: ignore[attr-defined]

CLOCK = Actor("clock", "shuntbook")
"""Who rolls statuses when only time has passed."""

_KEPT = ("as_of", "compliance", "overdue", "worst_hazard", "next_due_on", "holds_until", "sequence")
_UPSERT = "ON CONFLICT (depot, section) DO UPDATE SET " + ", ".join(f"{c} = excluded.{c}" for c in _KEPT)


def judge_found(
    connection: Connection, moment: Moment, sections: Sequence[str], known: Register, found: Found
) -> Iterator[tuple[SectionFacts, Status]]:
    """As `judge_sections`, of what was read already."""
    for one in assemble(connection, moment, sections, known, found):
        yield one.facts, judge(one.facts, one.book, one.editions, moment.as_of)


@dataclass(frozen=True, slots=True)
class Judged:
    """A status with the facts it rests on and where the journal stood."""

    status: Status
    facts: SectionFacts
    known_at: datetime | None
    sequence: int


def depot_row(connection: Connection, depot: str) -> Row[Any]:
    """The depot's row; NotFoundError if there is none."""
    row = connection.execute(sa.select(_depot).where(_depot.c.depot == depot)).one_or_none()
    if row is None:
        raise NotFoundError("There is no such depot.")
    return row


def present(row: Row[Any], now: datetime) -> Moment:
    """A depot as it is now."""
    return Moment(row.depot, row.time_zone, local_day(now, row.time_zone), None, present=True)


def judge_sections(
    connection: Connection, moment: Moment, sections: Sequence[str] | None
) -> Iterator[tuple[SectionFacts, Status]]:
    """Facts and status of sections (None: all of the depot), in order of name."""
    for found in gather(connection, moment, sections):
        yield found.facts, judge(found.facts, found.book, found.editions, moment.as_of)


def summaries(depot: str, statuses: Iterable[Status]) -> bulk.Rows:
    """The rows of `status` that keep the summaries of statuses, but for their sequence."""
    return bulk.Rows(_status, [_summary_row(depot, status) for status in statuses], _UPSERT)


def _summary_row(depot: str, status: Status) -> dict[str, Any]:
    return {
        "depot": depot,
        "section": status.section,
        "as_of": status.as_of,
        "compliance": status.compliance,
        "overdue": status.overdue,
        "worst_hazard": status.worst_hazard,
        "next_due_on": status.next_due_on,
        "holds_until": status.holds_until,
    }


def rejudge_and_append(
    tx: Transaction, row: Row[Any], sections: Sequence[str] | None, entries: Sequence[journal.Entry]
) -> int:
    """Judge sections anew (None: all of the depot), append `entries`, keep the statuses.

    The journal head is taken last, so the summaries are stored with its sequence after it. Returns the
    sequence of the last line. With no entries the statuses keep the sequence of the head.
    """
    judged = judge_sections(tx.connection, present(row, tx.now), sections)
    kept = summaries(row.depot, (status for _, status in judged))
    if entries:
        return tx.write(row.depot, (), entries, kept)
    sequence, _ = journal.head(tx.connection, row.depot)
    rows = [{**each, "sequence": sequence} for each in kept.rows]
    bulk.insert(tx.connection, kept.table, rows, kept.conflict)
    return sequence


def roll_due(service: Service, depot: str) -> None:
    """Judge anew the sections whose kept status time alone has changed. Writes no journal line."""
    now = service.clock()
    with service.read() as connection:
        row = depot_row(connection, depot)
        today = local_day(now, row.time_zone)
        if not _stale(connection, depot, today):
            return
    with service.unit_of_work(CLOCK) as tx:
        row = tx.lock_depot(depot)
        stale = _stale(tx.connection, depot, present(row, tx.now).as_of)
        tx.lock_sections(depot, stale)
        if stale:
            rejudge_and_append(tx, row, stale, ())


def _stale(connection: Connection, depot: str, today: date) -> list[str]:
    query = sa.select(_status.c.section).where(_status.c.depot == depot, _status.c.holds_until < today)
    return list(connection.execute(query.order_by(_status.c.section)).scalars())


def of_section(
    connection: Connection,
    depot: str,
    section: str,
    now: datetime,
    as_of: date | None = None,
    known_at: datetime | None = None,
) -> Judged:
    """The status of one section as of a day (default: the depot's today), as known at an instant.

    Read in a snapshot. Raises NotFoundError for an unknown section or one without a record on the day,
    NotAcceptableError for a day or an instant in the future.
    """
    row = depot_row(connection, depot)
    today = local_day(now, row.time_zone)
    if as_of is not None and as_of > today:
        fault = Fault("future", "a status can be judged up to the depot's today", parameter="as_of")
        raise NotAcceptableError("The day asked for is in the future.", (fault,))
    if known_at is not None and known_at > now:
        fault = Fault("future", "nothing is known of the future", parameter="as_known_at")
        raise NotAcceptableError("The instant asked for is in the future.", (fault,))
    day = as_of or today
    moment = Moment(depot, row.time_zone, day, known_at, present=day == today and known_at is None)
    sequence, _ = journal.head(connection, depot)
    for facts, status in judge_sections(connection, moment, [section]):
        return Judged(status, facts, known_at, sequence)
    raise NotFoundError("There is no such section in this depot on that day.")
