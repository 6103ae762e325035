"""A small depot to live through: a limit book, a shunt box, track circuits, visits that read a drop shunt.

All names in it are invented.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, timedelta
from itertools import count
from typing import Any

import sqlalchemy as sa

from service.app import make_service
from service.application import audits, depots, editions, instruments, sections, visits
from service.application.context import Service
from service.application.section_content import Content
from service.application.visit_content import Draft, ReadingDraft, TaskDraft
from service.records.unit_of_work import Actor
from service.rules.words import CalibrationResult, CircuitKind, SectionState, Traction
from service.settings import Settings
from support import limit_books
from support.api import TERMS, Clock

FIELD = Actor("field-1", "T. Marlow")
ENGINEER = Actor("engineer-1", "R. Ashdown")

BOX = instruments.Content(
    "shunt_box",
    None,
    "S-1",
    (
        instruments.Calibration(
            date(2026, 1, 5), date(2027, 1, 5), CalibrationResult.PASS, resolution=0.1, resolution_unit="Ohm"
        ),
    ),
)


def visit_id(number: int) -> str:
    """An invented UUIDv7."""
    return f"0197c0de-0000-7000-8000-{number:012d}"


@dataclass
class World:
    """The depot `harrow`, on Monday 2 November 2026 at 09:00 UTC; its weekly hour is Monday 05:00 London."""

    service: Service
    clock: Clock
    depot: str = "harrow"
    ids: Iterator[int] = field(default_factory=lambda: count(1))

    def write(self, action: Any, *arguments: Any, actor: Actor = ENGINEER, **words: Any) -> Any:
        """Run an application function on the depot in a unit of work of its own."""
        with self.service.unit_of_work(actor) as tx:
            return action(tx, self.depot, *arguments, **words)

    def read(self, action: Any, *arguments: Any, **words: Any) -> Any:
        with self.service.read(snapshot=True) as connection:
            return action(connection, self.depot, *arguments, **words)

    def section(self, name: str, **changes: Any) -> None:
        content: dict[str, Any] = {
            "state": SectionState.IN_USE,
            "circuit_kind": CircuitKind.DC,
            "traction": Traction.NONE,
            "required_test_points": ("relay_end",),
            "commissioned_on": date(2026, 10, 1),
            "book": "house",
        }
        self.write(sections.create, name, Content(**(content | changes)))

    def draft(self, section: str, ohm: float | None = 0.8, stage: str = "as_left", **given: Any) -> Draft:
        """A visit now that read a drop shunt at the relay end (None: nothing)."""
        reading = ReadingDraft("drop_shunt", "relay_end", stage, "eq", ohm or 0.0, "Ohm", "SB")
        values: dict[str, Any] = {
            "visit": visit_id(next(self.ids)),
            "section": section,
            "visited_at": self.clock.now,
            "ballast": "dry",
            "readings": () if ohm is None else (reading,),
            "tasks": () if ohm is None else (TaskDraft("shunt_test", "done"),),
        }
        return Draft(**(values | given))

    def post(self, *drafts: Draft, actor: Actor = FIELD) -> list[visits.Outcome]:
        found: list[visits.Outcome] = self.write(visits.post, drafts, None, actor=actor)
        return found

    def visit(self, section: str, ohm: float | None = 0.8, stage: str = "as_left", **given: Any) -> str:
        """Store a visit; its id."""
        (outcome,) = self.post(self.draft(section, ohm, stage, **given))
        assert outcome.outcome == "stored", outcome
        assert outcome.visit is not None
        return outcome.visit

    def audit(self, on: date | None = None, actor: Actor = ENGINEER) -> dict[str, Any]:
        return audits.wire(audits.run(self.service, actor, self.depot, on))

    def weekly(self, on: date | None = None) -> list[dict[str, Any]]:
        """The sections of a weekly list, in order."""
        found: list[dict[str, Any]] = self.read(audits.weekly_list, on).sections
        return found

    @contextmanager
    def undone(self) -> Iterator[sa.Connection]:
        """A transaction of which nothing is kept, to tamper in."""
        with self.service.database.engine.connect() as plain:
            connection = plain.execution_options(shuntbook_writes=True)
            with connection.begin() as transaction:
                yield connection
                transaction.rollback()

    def week(self) -> None:
        self.clock.move(days=7)


@contextmanager
def lived_in(database_url: str, threads: int = 8) -> Iterator[World]:
    """The depot on a migrated database, without a track circuit yet."""
    clock = Clock(datetime(2026, 10, 1, 9, tzinfo=UTC))
    service = make_service(Settings(database_url=database_url, threads=threads), clock)
    try:
        yield furnished(service, clock)
    finally:
        service.database.close()


def furnished(service: Service, clock: Clock, others: Sequence[str] = ()) -> World:
    """Give an empty, migrated database what every world has."""
    world = World(service, clock)
    clock.now = datetime(2026, 10, 1, 9, tzinfo=UTC)
    with service.unit_of_work(ENGINEER) as tx:
        for name in (world.depot, *others):
            depots.create(tx, name, TERMS)
    draft = limit_books.draft_of(limit_books.edition(tasks=[limit_books.task()]))
    with service.unit_of_work(limit_books.DRAFTER) as tx:
        editions.draft(tx, draft)
    with service.unit_of_work(limit_books.ISSUER) as tx:
        editions.issue(tx, "house", "1", clock.now.date() + timedelta(days=1), expected=1)
    world.write(instruments.put, "SB", None, BOX)
    clock.now = datetime(2026, 11, 2, 9, tzinfo=UTC)
    return world
