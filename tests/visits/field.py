"""A depot whose technicians visit it: a limit book, a shunt box, two meters, two track circuits.

Visits are built as the JSON that a handheld sends. All names are invented.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, timedelta
from itertools import count
from typing import Any

import httpx
import sqlalchemy as sa

from service.api.schemas.visits import VisitSent
from service.application import depots, editions, instruments, sections, status, visits
from service.application.context import Service
from service.application.instruments import Calibration
from service.application.section_content import Content
from service.records.engine import Database
from service.records.tables import Latest
from service.records.tables import Status as StatusRow
from service.records.unit_of_work import Actor
from service.rules.verdicts import Verdict
from service.rules.words import CalibrationResult, CircuitKind, SectionState, Traction
from support import limit_books
from support.api import Api, Clock

TECHNICIAN = Actor("handheld-7", "T. Marlow")
SECOND = Actor("handheld-8", "J. Abara")
ENGINEER = Actor("engineer-1", "R. Ashdown")

RECORDED_ON = date(2026, 1, 1)
NOW = datetime(2026, 6, 15, 9, tzinfo=UTC)
POINTS = ("feed_end", "relay_end")

EXCITATION = limit_books.limit(
    limit="excitation",
    quantity="relay_voltage",
    unit="V",
    test_points=["relay_end"],
    minimum={"value": 1.75, "hazard": "right_side", "near_margin": 0.1},
    maximum={"value": 4.2, "hazard": "wrong_side", "near_margin": 0.1},
)
TASKS = [
    limit_books.task(),
    limit_books.task(task="after_adjusting", interval=None, needs=["drop_shunt"], after_work=["adjusted"]),
]


def visit_id(number: int) -> str:
    """An invented UUIDv7."""
    return f"0197c0de-0000-7000-8000-{number:012d}"


def reading(quantity: str, value: float, test_point: str = "relay_end", **changes: Any) -> dict[str, Any]:
    """A reading as JSON: ohms with the box, volts with the meter, as left."""
    ohms = quantity in ("drop_shunt", "pick_up_shunt")
    plain = {
        "quantity": quantity,
        "test_point": test_point,
        "stage": "as_left",
        "value": value,
        "unit": "Ohm" if ohms else "V",
        "instrument": "SB-22" if ohms else "VM-3",
    }
    return plain | changes


def drops(value: float, *points: str, **changes: Any) -> list[dict[str, Any]]:
    """Drop shunts at both required test points, or at those named."""
    return [reading("drop_shunt", value, point, **changes) for point in points or POINTS]


def visit(number: int, at: datetime, *readings: dict[str, Any], **changes: Any) -> dict[str, Any]:
    """A visit to TV114 in dry ballast, as JSON."""
    plain = {
        "visit": visit_id(number),
        "section": "TV114",
        "visited_at": at.isoformat(),
        "conditions": {"ballast": "dry"},
        "readings": list(readings),
    }
    return plain | changes


def wetness(ballast: str | None) -> dict[str, Any]:
    return {"conditions": {"ballast": ballast}}


def draft_of(body: dict[str, Any]) -> Any:
    """The draft that the route would make of it."""
    return VisitSent.model_validate_json(json.dumps(body)).draft()


@dataclass
class Field:
    """The depot `ashby` of a service whose clock the test moves."""

    service: Service
    clock: Clock
    depot: str = "ashby"

    def write(self, action: Any, *arguments: Any, actor: Actor = ENGINEER, **words: Any) -> Any:
        with self.service.unit_of_work(actor) as tx:
            return action(tx, self.depot, *arguments, **words)

    def read(self, action: Any, *arguments: Any, **words: Any) -> Any:
        with self.service.read(snapshot=True) as connection:
            return action(connection, self.depot, *arguments, **words)

    def post(
        self, *bodies: dict[str, Any], actor: Actor = TECHNICIAN, offset: int | None = None
    ) -> list[visits.Outcome]:
        """Post a batch; its outcomes."""
        found: list[visits.Outcome] = self.write(
            visits.post, [draft_of(body) for body in bodies], offset, actor=actor
        )
        return found

    def store(self, *bodies: dict[str, Any], actor: Actor = TECHNICIAN) -> None:
        """Post each by itself; all must be stored."""
        for body in bodies:
            (outcome,) = self.post(body, actor=actor)
            assert outcome.outcome == "stored", outcome.problem and outcome.problem.faults

    def void(self, number: int, actor: Actor = SECOND) -> None:
        self.write(visits.void, visit_id(number), "read at another track circuit", actor=actor)

    def judged(
        self, as_of: date | None = None, known_at: datetime | None = None, section: str = "TV114"
    ) -> status.Judged:
        found: status.Judged = self.read(status.of_section, section, self.clock(), as_of, known_at)
        return found

    def verdict(
        self, quantity: str = "drop_shunt", test_point: str = "relay_end", as_of: date | None = None
    ) -> Verdict:
        (found,) = [
            one
            for one in self.judged(as_of).status.verdicts
            if (one.quantity, one.test_point) == (quantity, test_point)
        ]
        return found

    def latest(self) -> list[Any]:
        """The rows of `latest`, without the depot's name."""
        table = Latest.__table__
        query = sa.select(*(c for c in table.c if c.name != "depot")).where(table.c.depot == self.depot)
        with self.service.read() as connection:
            order = (table.c.section, table.c.quantity, table.c.test_point)
            return [tuple(row) for row in connection.execute(query.order_by(*order))]

    def kept(self, section: str = "TV114") -> dict[str, Any]:
        """The row of `status`, without the depot's name and the sequence."""
        table = StatusRow.__table__
        query = sa.select(table).where(table.c.depot == self.depot, table.c.section == section)
        with self.service.read() as connection:
            row = dict(connection.execute(query).mappings().one())
        del row["depot"], row["sequence"]
        return row

    def section(self, name: str, **changes: Any) -> None:
        content: dict[str, Any] = {
            "state": SectionState.IN_USE,
            "circuit_kind": CircuitKind.DC,
            "traction": Traction.NONE,
            "required_test_points": POINTS,
            "commissioned_on": RECORDED_ON,
            "valid_from_on": RECORDED_ON,
            "book": "house",
        }
        self.write(sections.create, name, Content(**(content | changes)))


def calibrated(on: date, due: date, step: float | None = None, **changes: Any) -> Calibration:
    unit = None if step is None else "Ohm"
    plain = {"result": CalibrationResult.PASS, "resolution": step, "resolution_unit": unit}
    return Calibration(on, due, **(plain | changes))


def instrument(kind: str, *calibrations: Calibration) -> instruments.Content:
    return instruments.Content(kind, None, None, tuple(calibrations))


def issue_book(service: Service, clock: Clock) -> None:
    """Issue the book `house`; the clock moves on to the day on which it comes into force."""
    draft = limit_books.draft_of(limit_books.edition(limits=[limit_books.limit(), EXCITATION], tasks=TASKS))
    with service.unit_of_work(limit_books.DRAFTER) as tx:
        editions.draft(tx, draft)
    with service.unit_of_work(limit_books.ISSUER) as tx:
        editions.issue(tx, draft.book, draft.edition, clock.now.date() + timedelta(days=1), expected=1)
    clock.move(days=1)


def furnish(found: Field, time_zone: str = "UTC") -> Field:
    """Give a service that has the book a depot with instruments and track circuits."""
    with found.service.unit_of_work(ENGINEER) as tx:
        depots.create(tx, found.depot, depots.Terms("An invented depot", time_zone, "monday", 5))
    year = (date(2025, 12, 1), date(2026, 12, 1))
    found.write(instruments.put, "SB-22", None, instrument("shunt_box", calibrated(*year, 0.1)))
    found.write(instruments.put, "VM-3", None, instrument("meter", calibrated(*year)))
    lapsed = calibrated(date(2025, 5, 1), date(2026, 5, 1))
    found.write(instruments.put, "VM-OLD", None, instrument("meter", lapsed))
    for name in ("TV114", "TV115"):
        found.section(name)
    return found


def opened(database_url: str) -> tuple[Service, Clock]:
    """A service on a migrated database; its clock stands on New Year's Day."""
    clock = Clock(datetime(2026, 1, 1, 9, tzinfo=UTC))
    database = Database(database_url, 5)
    return Service(database, clock, lambda: f"00000000-0000-7000-8000-{next(_IDS):012d}"), clock


_IDS = count(1)
"""Shared by all services of a process, since two may be open on one database."""


@dataclass
class Handheld:
    """The served app with the depot in it, and a technician's client."""

    api: Api
    field: Field
    client: httpx.Client = field(init=False)

    def __post_init__(self) -> None:
        self.client = self.api.client("readings", "read", label="handheld-7", holder=TECHNICIAN.holder)

    def post(self, body: Any, client: httpx.Client | None = None, **words: Any) -> httpx.Response:
        """Post one visit."""
        return (client or self.client).post("/v1/depots/ashby/visits", json=body, **words)

    def batch(self, bodies: Any, client: httpx.Client | None = None, **words: Any) -> httpx.Response:
        """Post a JSON array."""
        return (client or self.client).post("/v1/depots/ashby/visits/batch", json=bodies, **words)

    def lines(self, *lines: bytes, **headers: str) -> httpx.Response:
        """Post lines as NDJSON."""
        named = {"Content-Type": "application/x-ndjson"} | headers
        content = b"\n".join(lines)
        return self.client.post("/v1/depots/ashby/visits/batch", content=content, headers=named)

    def get(self, path: str, **words: Any) -> httpx.Response:
        return self.client.get(f"/v1/depots/ashby/{path}", **words)


def places(problem: dict[str, Any]) -> list[tuple[str, str | None]]:
    """Code and pointer of each error of a problem."""
    return [(one["code"], one.get("pointer") or one.get("parameter")) for one in problem["errors"]]


def days_around(*instants: datetime) -> Iterator[date]:
    """Each instant's day with the one before and the one after, in order, each once."""
    days = {at.date() + timedelta(days=by) for at in instants for by in (-1, 0, 1)}
    yield from sorted(days)
