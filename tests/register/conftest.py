"""A migrated database with one depot, whose clock the test moves."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace
from datetime import UTC, date, datetime, timedelta
from typing import Any

import pytest

from service.application import depots, sections
from service.application.context import Service
from service.application.section_content import Content
from service.records.engine import Database
from service.records.unit_of_work import Actor
from service.rules.words import CircuitKind, SectionState, Traction

ENGINEER = Actor("engineer-1", "R. Marlowe")
OTHER = Actor("engineer-2", "J. Abara")


@dataclass
class Depot:
    """A depot under test."""

    service: Service
    clock: list[datetime]
    depot: str = "ashby"
    ids: Iterator[int] = field(default_factory=lambda: iter(range(1, 10**6)))

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


@pytest.fixture
def depot(database_url: str) -> Iterator[Depot]:
    clock = [datetime(2026, 3, 2, 12, tzinfo=UTC)]
    ids = iter(range(1, 10**6))
    database = Database(database_url, 5)
    service = Service(database, lambda: clock[0], lambda: f"00000000-0000-7000-8000-{next(ids):012d}")
    found = Depot(service, clock)
    with service.unit_of_work(ENGINEER) as tx:
        for name in ("ashby", "birchfield"):
            depots.create(tx, name, depots.Terms(f"{name} depot", "UTC", "monday", 4))
    yield found
    database.close()
