"""Which limits and tasks apply to a section on a day: from which clause or concession, and why.

Whether they are met is a status; what an edition says is in `books`.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date, datetime

from sqlalchemy.engine import Connection

from service.application import facts, status
from service.application.facts import Moment
from service.errors import NotFoundError
from service.records.unit_of_work import local_day
from service.rules import proof
from service.rules.bounds import resolve
from service.rules.evidence import Evidence
from service.rules.facts import Concession, SectionFacts, SectionRecord
from service.rules.limits import Applicability, Applying, Edition, Limit, Task, applying, in_force
from service.rules.status import live
from service.rules.verdicts import Reason


@dataclass(frozen=True, slots=True)
class PointBounds:
    """A limit in figures at one test point (None: judged from the register), in the base unit."""

    test_point: str | None
    min: float | None
    near_min: float | None
    near_max: float | None
    max: float | None
    reason: Reason | None
    """Why there are no figures, where a relative limit has nothing to be relative to."""


@dataclass(frozen=True, slots=True)
class Because:
    """An attribute that something depends on, and what the register says of it; None if nothing."""

    attribute: str
    value: str | float | bool | None


@dataclass(frozen=True, slots=True)
class AppliedLimit:
    """A limit that concerns the section. `missing` names what the register has to say first."""

    limit: Limit
    bounds: tuple[PointBounds, ...]
    because: tuple[Because, ...]
    missing: str | None
    concessions: tuple[Concession, ...]


@dataclass(frozen=True, slots=True)
class AppliedTask:
    """A task that concerns the section."""

    task: Task
    because: tuple[Because, ...]
    missing: str | None
    concessions: tuple[Concession, ...]


@dataclass(frozen=True, slots=True)
class SectionLimits:
    """All that applies to a section on a day. `edition` None: none is in force, or it names no book."""

    record: SectionRecord
    as_of: date
    book: str | None
    edition: Edition | None
    limits: tuple[AppliedLimit, ...]
    tasks: tuple[AppliedTask, ...]


def of_section(
    connection: Connection, depot: str, section: str, now: datetime, as_of: date | None = None
) -> SectionLimits:
    """What applies to a section on a day, which may lie ahead; by default the depot's today.

    Raises NotFoundError for an unknown section, or one without a record on the day.
    """
    row = status.depot_row(connection, depot)
    today = local_day(now, row.time_zone)
    day = as_of or today
    moment = Moment(depot, row.time_zone, day, None, present=day == today)
    found = next(iter(facts.gather(connection, moment, [section])), None)
    if found is None:
        raise NotFoundError("There is no such section in this depot on that day.")
    edition = in_force(found.editions, day)
    applies = Applying((), ()) if edition is None else applying(edition, found.facts.record)
    live_now = [concession for concession in found.facts.concessions if live(concession, day)]
    return SectionLimits(
        record=found.facts.record,
        as_of=day,
        book=found.book,
        edition=edition,
        limits=tuple(_limits(applies, found.facts, live_now, day)),
        tasks=tuple(
            AppliedTask(
                task,
                tuple(_because(task.applies, found.facts.record)),
                missing,
                tuple(concession for concession in live_now if concession.task == task.task),
            )
            for task, missing in applies.tasks
        ),
    )


def _limits(
    applies: Applying, facts: SectionFacts, live_now: Sequence[Concession], day: date
) -> Iterator[AppliedLimit]:
    evidence = Evidence(facts, day)
    for limit, missing in applies.limits:
        yield AppliedLimit(
            limit,
            tuple(_bounds(limit, facts.record, evidence)),
            tuple(_because(limit.applies, facts.record)),
            missing,
            tuple(concession for concession in live_now if concession.limit == limit.limit),
        )


def _bounds(limit: Limit, record: SectionRecord, evidence: Evidence) -> Iterator[PointBounds]:
    required = record.required_test_points
    points = required if limit.test_points is None else proof.named(limit.test_points, required)
    if limit.test_points == ():
        figures = resolve(limit, None)
        yield PointBounds(None, figures.min, figures.near_min, figures.near_max, figures.max, None)
    for point in points:
        figures, reason = proof.bounds_at(limit, point, evidence)
        yield PointBounds(point, figures.min, figures.near_min, figures.near_max, figures.max, reason)


def _because(applies: Applicability, record: SectionRecord) -> Iterator[Because]:
    points = None if record.points_ends is None else record.points_ends > 0
    lengths = (applies.length_from_m, applies.length_below_m)
    currents = (applies.catenary_from_a, applies.catenary_below_a)
    asked: tuple[tuple[str, object, str | float | bool | None], ...] = (
        ("circuit_kind", applies.circuit_kinds, record.circuit_kind),
        ("traction", applies.tractions, record.traction),
        ("return_rails", applies.return_rails, record.return_rails),
        ("place", applies.places, record.place),
        ("sleepers", applies.sleepers, record.sleepers),
        ("relay_type", applies.relay_types, record.relay_type),
        ("receivers", applies.receivers, record.receivers),
        ("choke", applies.choke, record.choke),
        ("points", applies.points, points),
        ("length_m", None if lengths == (None, None) else lengths, record.length_m),
        ("catenary_current_a", None if currents == (None, None) else currents, record.catenary_current_a),
    )
    for attribute, wanted, value in asked:
        if wanted is not None:
            yield Because(attribute, value)
