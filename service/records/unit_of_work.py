"""One write transaction with its actor and clock, and the locks in their one order.

The depot first, then section rows in order, the journal head last. What is judged is read in
statements after those that lock: a read inside the locking statement can be stale.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.errors import NotFoundError
from service.records import bulk, journal, several
from service.records.bulk import Rows
from service.records.engine import Database
from service.records.tables import Depot, Section

_depot = Depot.__table__  # type: ignore[attr-defined]
_section = Section.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Actor:
    """Who does it: the key's label and its holder, and the device the key is bound to."""

    key: str
    holder: str
    device: str | None = None

    def as_json(self) -> dict[str, Any]:
        return {"key": self.key, "holder": self.holder}


@dataclass(slots=True)
class Transaction:
    """A unit of work under way. `now` is one instant for all of it."""

    connection: Connection
    actor: Actor
    now: datetime
    new_id: Callable[[], str]
    memory: dict[str, Any]
    """The database's: depot → what is kept of it for one epoch."""

    def lock_depot(self, depot: str, *, exclusive: bool = False) -> Row[Any]:
        """Lock a depot, shared for what touches one section, exclusive for what can move many."""
        if exclusive:
            moved = sa.update(_depot).where(_depot.c.depot == depot).values(epoch=_depot.c.epoch + 1)
            row = self.connection.execute(moved.returning(_depot)).one_or_none()
        else:
            query = sa.select(_depot).where(_depot.c.depot == depot).with_for_update(read=True)
            row = self.connection.execute(query).one_or_none()
        if row is None:
            raise NotFoundError("There is no such depot.")
        return row

    def lock_sections(self, depot: str, sections: Sequence[str]) -> dict[str, int]:
        """Lock section rows in order of name; name → newest version. Unknown names are left out."""
        rows = self.connection.execute(
            sa.select(_section.c.section, _section.c.version)
            .where(_section.c.depot == depot, _section.c.section.in_(sorted(set(sections))))
            .order_by(_section.c.section)
            .with_for_update()
        )
        return {row.section: row.version for row in rows}

    def write(
        self, depot: str, rows: Sequence[Rows], entries: Sequence[journal.Entry], projected: Rows
    ) -> int:
        """Insert rows, append entries, and upsert what is projected with the sequence of the last line.

        At least one entry. On PostgreSQL all of it is one round trip. Returns the sequence.
        """
        filled = [each for each in rows if each.rows]
        if self.connection.dialect.name != "postgresql":
            bulk.insert_all(self.connection, *filled)
            sequence = self.append(depot, entries)
            sequenced = [{**row, "sequence": sequence} for row in projected.rows]
            bulk.insert(self.connection, projected.table, sequenced, projected.conflict)
            return sequence
        first = [bulk.asked(filled)] if filled else []
        last = [bulk.asked([projected], stream=depot)] if projected.rows else []
        line = journal.asked(depot, entries, self.actor.as_json(), self.now)
        results = several.run(self.connection, *first, line, *last)
        return int(results[len(first)][0][0])

    def append(self, depot: str, entries: Sequence[journal.Entry]) -> int:
        """Take the journal head and append; the sequence of the last line. Last lock of all."""
        return journal.append(self.connection, depot, entries, self.actor.as_json(), self.now)


def local_day(instant: datetime, time_zone: str) -> date:
    """The calendar day of an instant in a depot's zone."""
    return instant.astimezone(ZoneInfo(time_zone)).date()


def end_of_day(day: date, time_zone: str) -> datetime:
    """The first instant after a local day, in UTC."""
    following = day + timedelta(days=1)
    return datetime(following.year, following.month, following.day, tzinfo=ZoneInfo(time_zone)).astimezone(
        UTC
    )


@contextmanager
def unit_of_work(
    database: Database, actor: Actor, now: datetime, new_id: Callable[[], str]
) -> Iterator[Transaction]:
    """Acquire, work, commit in one thread; anything raised rolls all of it back."""
    with database.write() as connection:
        yield Transaction(connection, actor, now, new_id, database.memory)
