"""What applies to one track circuit, on the wire: limits and tasks, each with its clause and why.

Whether they are met is on the wire in `status`.
"""

from __future__ import annotations

from datetime import date
from typing import Any

from pydantic import ConfigDict

from service.api.schemas.base import Answer
from service.api.schemas.status import ReasonAnswer
from service.application.section_limits import AppliedLimit, AppliedTask, Because, SectionLimits
from service.rules.facts import Concession
from service.rules.limits import Bound, Combination
from service.rules.quantities import QUANTITIES
from service.rules.words import CircuitKind, Hazard, RelativeTo, Traction, Work

_SOURCE = {"clause": "H 2.1", "source": "house rule, invented", "confirmed": True, "standing": "practice"}
_WHY = {"because": [{"attribute": "circuit_kind", "value": "dc"}], "missing": None, "concessions": []}
EXAMPLE: dict[str, Any] = {
    "depot": "harrow-vale",
    "section": "TV114",
    "section_version": 3,
    "as_of": "2026-12-01",
    "book": "harrow-vale-house",
    "edition": "1",
    "digest": "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08",
    "limits": [
        {
            "limit": "drop_shunt",
            "title": "Drop shunt",
            "quantity": "drop_shunt",
            "unit": "Ohm",
            "relative_to": None,
            "minimum": {"value": 0.5, "hazard": "wrong_side", "near_margin": 0.1},
            "maximum": None,
            "ballast": None,
            "shunt_ohm": None,
            "test_points": [
                {
                    "test_point": "relay_end",
                    "min": 0.5,
                    "near_min": 0.6,
                    "near_max": None,
                    "max": None,
                    "reason": None,
                }
            ],
            **_WHY,
            **_SOURCE,
        }
    ],
    "tasks": [
        {
            "task": "shunt_test",
            "title": "Shunt test",
            "interval": "P3M",
            "grace": "P14D",
            "window": None,
            "needs": ["drop_shunt"],
            "needs_anywhere": [],
            "shortened": None,
            "after_work": ["adjusted"],
            "item": None,
            **_WHY,
            **_SOURCE,
        }
    ],
    "combinations": [{"circuit_kind": "dc", "traction": "none", "return_rails": None, **_SOURCE}],
}


class SourcedAnswer(Answer):
    """From which clause of which source, and whether that was looked up."""

    clause: str
    source: str
    confirmed: bool
    standing: str


class BecauseAnswer(Answer):
    """An attribute that it depends on, and what the register says; null if the register is silent."""

    attribute: str
    value: str | float | bool | None


class ConcessionInForce(Answer):
    """A concession that is live on the day; values in the base unit."""

    concession: str
    test_point: str | None
    allowed_min: float | None
    allowed_max: float | None
    from_on: date
    until_on: date


class BoundAnswer(Answer):
    """One side of a limit: in the base unit, or a factor of a relative limit."""

    value: float
    hazard: Hazard
    near_margin: float | None


class PointBoundsAnswer(Answer):
    """A limit in figures at one test point, in the base unit; null test point: from the register."""

    test_point: str | None
    min: float | None
    near_min: float | None
    near_max: float | None
    max: float | None
    reason: ReasonAnswer | None


class AppliedLimitAnswer(SourcedAnswer):
    """A limit that applies. `missing` names what the register has to say before it can be judged."""

    limit: str
    title: str | None
    quantity: str
    unit: str
    relative_to: RelativeTo | None
    minimum: BoundAnswer | None
    maximum: BoundAnswer | None
    ballast: str | None
    shunt_ohm: float | None
    test_points: list[PointBoundsAnswer]
    because: list[BecauseAnswer]
    missing: str | None
    concessions: list[ConcessionInForce]


class WindowAnswer(Answer):
    """Once a year from the first to the last day, as month and day."""

    first: str
    last: str


class ShortenedAnswer(Answer):
    """A shorter interval while a result is under a value in the base unit."""

    quantity: str
    unit: str
    under: float
    interval: str


class AppliedTaskAnswer(SourcedAnswer):
    """A task that is owed."""

    task: str
    title: str | None
    interval: str | None
    grace: str | None
    window: WindowAnswer | None
    needs: list[str]
    needs_anywhere: list[str]
    shortened: ShortenedAnswer | None
    after_work: list[Work]
    item: str | None
    because: list[BecauseAnswer]
    missing: str | None
    concessions: list[ConcessionInForce]


class CombinationAnswer(SourcedAnswer):
    """A circuit kind permitted under a traction."""

    circuit_kind: CircuitKind
    traction: Traction
    return_rails: list[int] | None


class SectionLimitsAnswer(Answer):
    """All that applies to one track circuit on a day. With no combinations, all are permitted."""

    model_config = ConfigDict(json_schema_extra={"examples": [EXAMPLE]})

    depot: str
    section: str
    section_version: int
    as_of: date
    book: str | None
    edition: str | None
    digest: str | None
    limits: list[AppliedLimitAnswer]
    tasks: list[AppliedTaskAnswer]
    combinations: list[CombinationAnswer]


def section_limits_answer(depot: str, found: SectionLimits) -> SectionLimitsAnswer:
    """From the application's value."""
    edition = found.edition
    return SectionLimitsAnswer(
        depot=depot,
        section=found.record.section,
        section_version=found.record.version,
        as_of=found.as_of,
        book=found.book,
        edition=None if edition is None else edition.edition,
        digest=None if edition is None else edition.digest,
        limits=[_limit(applied) for applied in found.limits],
        tasks=[_task(applied) for applied in found.tasks],
        combinations=[] if edition is None else [_combination(one) for one in edition.combinations],
    )


def _limit(applied: AppliedLimit) -> AppliedLimitAnswer:
    limit = applied.limit
    return AppliedLimitAnswer(
        limit=limit.limit,
        title=limit.title,
        quantity=limit.quantity,
        unit=QUANTITIES[limit.quantity].unit,
        relative_to=limit.relative_to,
        minimum=_bound(limit.minimum),
        maximum=_bound(limit.maximum),
        ballast="dry" if limit.ballast_dry else None,
        shunt_ohm=limit.shunt_ohm,
        test_points=[PointBoundsAnswer.model_validate(bounds) for bounds in applied.bounds],
        because=_because(applied.because),
        missing=applied.missing,
        concessions=_concessions(applied.concessions),
        clause=limit.clause,
        source=limit.source,
        confirmed=limit.confirmed,
        standing=limit.standing,
    )


def _task(applied: AppliedTask) -> AppliedTaskAnswer:
    task, short = applied.task, applied.task.shortened
    window = task.window
    return AppliedTaskAnswer(
        task=task.task,
        title=task.title,
        interval=task.interval,
        grace=task.grace,
        window=None
        if window is None
        else WindowAnswer(first="{:02}-{:02}".format(*window.first), last="{:02}-{:02}".format(*window.last)),
        needs=list(task.needs),
        needs_anywhere=list(task.needs_anywhere),
        shortened=None
        if short is None
        else ShortenedAnswer(
            quantity=short.quantity,
            unit=QUANTITIES[short.quantity].unit,
            under=short.under,
            interval=short.interval,
        ),
        after_work=sorted(task.after_work),
        item=task.item,
        because=_because(applied.because),
        missing=applied.missing,
        concessions=_concessions(applied.concessions),
        clause=task.clause,
        source=task.source,
        confirmed=task.confirmed,
        standing=task.standing,
    )


def _combination(one: Combination) -> CombinationAnswer:
    return CombinationAnswer(
        circuit_kind=one.circuit_kind,
        traction=one.traction,
        return_rails=None if one.return_rails is None else sorted(one.return_rails),
        clause=one.clause,
        source=one.source,
        confirmed=one.confirmed,
        standing=one.standing,
    )


def _bound(bound: Bound | None) -> BoundAnswer | None:
    return None if bound is None else BoundAnswer.model_validate(bound)


def _because(several: tuple[Because, ...]) -> list[BecauseAnswer]:
    return [BecauseAnswer.model_validate(one) for one in several]


def _concessions(several: tuple[Concession, ...]) -> list[ConcessionInForce]:
    return [
        ConcessionInForce(
            concession=one.concession,
            test_point=one.test_point,
            allowed_min=one.allowed_min,
            allowed_max=one.allowed_max,
            from_on=one.from_on,
            until_on=one.until_on,
        )
        for one in several
    ]
