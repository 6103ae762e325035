"""A depot under test, whose clock the test moves, and a plain section to vary."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime, timedelta
from typing import Any

from service.application import sections
from service.application.context import Service
from service.application.section_content import Content
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
