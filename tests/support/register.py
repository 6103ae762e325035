"""A depot under test, whose clock the test moves, and a plain section to vary."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime, timedelta
from typing import Any

import sqlalchemy as sa

from service.application import editions, sections
from service.application.context import Service
from service.application.section_content import Content
from service.records import journal
from service.records.tables import Status as StatusRow
from service.records.unit_of_work import Actor
from service.rules.words import CircuitKind, SectionState, Traction
from support import limit_books

ENGINEER = Actor("engineer-1", "R. Marlowe")
OTHER = Actor("engineer-2", "J. Abara")


@dataclass
class Depot:
    """A depot under test."""

    service: Service
    clock: list[datetime]
    depot: str = "ashby"

    @property
    def today(self) -> date:
        return self.clock[0].date()

    def on(self, day: date) -> None:
        """Move the clock to noon of a day."""
        self.clock[0] = datetime(day.year, day.month, day.day, 12, tzinfo=UTC)

    def later(self, **span: float) -> None:
        self.clock[0] += timedelta(**span)

    def write(self, action: Callable[..., Any], *arguments: Any, actor: Actor = ENGINEER) -> Any:
        """Run an application function in a unit of work of its own."""
        with self.service.unit_of_work(actor) as tx:
            return action(tx, self.depot, *arguments)

    def read(self, action: Callable[..., Any], *arguments: Any, **words: Any) -> Any:
        with self.service.read(snapshot=True) as connection:
            return action(connection, self.depot, *arguments, **words)

    def section(self, name: str, **changes: Any) -> sections.Recorded:
        """Record a section with what `plain` says, but for the changes."""
        recorded: sections.Recorded = self.write(sections.create, name, plain(**changes))
        return recorded


def plain(**changes: Any) -> Content:
    """A DC section in use, with two test points and nothing else stated."""
    content = Content(
        state=SectionState.IN_USE,
        circuit_kind=CircuitKind.DC,
        traction=Traction.NONE,
        required_test_points=("feed_end", "relay_end"),
    )
    return replace(content, **changes)


def lines(depot: Depot) -> list[dict[str, Any]]:
    """The depot's journal."""
    with depot.service.read(snapshot=True) as connection:
        return list(journal.lines(connection, depot.depot))


def kept_status(depot: Depot, section: str) -> sa.Row[Any]:
    """The row of `status`."""
    table = StatusRow.__table__
    query = sa.select(table).where(table.c.depot == depot.depot, table.c.section == section)
    with depot.service.read() as connection:
        return connection.execute(query).one()


def in_a_book(depot: Depot, combinations: Sequence[dict[str, Any]] = ()) -> str:
    """The name of a book in force today, with one limit and one task; the clock moves on by two days."""
    permitted = [combination | limit_books.SOURCE for combination in combinations]
    draft = limit_books.draft_of(limit_books.edition(tasks=[limit_books.task()], combinations=permitted))
    with depot.service.unit_of_work(limit_books.DRAFTER) as tx:
        editions.draft(tx, draft)
    with depot.service.unit_of_work(limit_books.ISSUER) as tx:
        editions.issue(tx, draft.book, draft.edition, depot.today + timedelta(days=2), expected=1)
    depot.later(days=2)
    return draft.book
