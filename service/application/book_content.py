"""What an edition of a limit book says, as JSON, and the rule objects it becomes.

The same models read a request, a bundled file and the stored text, so they are used on the wire as they
are. Units end here: bounds and margins reach the rules in base units. Whether a book is consistent is
judged in `rules.limits`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING, Annotated, Any, Literal, TypeVar

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, StringConstraints

from service.rules import quantities
from service.rules.limits import (
    Applicability,
    BookFault,
    Bound,
    Combination,
    Limit,
    Shortened,
    Task,
    YearlyWindow,
)
from service.rules.words import CircuitKind, Hazard, Place, RelativeTo, Sleepers, Traction, Work

Word = Annotated[str, StringConstraints(pattern=r"^[a-z][a-z0-9_]{0,39}$")]
RelayType = Annotated[str, StringConstraints(pattern=r"^[^\x00-\x1f\x7f]{1,80}$")]
Name = Annotated[str, StringConstraints(pattern=r"^[A-Za-z0-9._()-]{1,40}$")]
Text = Annotated[str, StringConstraints(min_length=1, max_length=500, pattern=r"^[^\x00-\x1f\x7f]*$")]
TestPoint = Annotated[
    str, StringConstraints(pattern=r"^(feed_end|relay_end|middle|legs|leg:[A-Za-z0-9._()-]{1,40})$")
]
Duration = Annotated[str, StringConstraints(pattern=r"^P[0-9YMWD]{2,20}$")]
DayOfYear = Annotated[str, StringConstraints(pattern=r"^(0[1-9]|1[0-2])-(0[1-9]|[12][0-9]|3[01])$")]
Standing = Literal["read", "second_hand", "memory", "practice", "computed"]
MOST = 500
"""The most that a list in a book may hold."""

T = TypeVar("T")
if TYPE_CHECKING:
    Several = tuple[T, ...]
else:  # null and absent say the same as an empty list, which is what is kept
    _List = Annotated[tuple[T, ...], Field(max_length=MOST)]
    Several = Annotated[_List | None, AfterValidator(lambda given: given or ())]


class Part(BaseModel):
    """A part of a book; what it does not name is refused."""

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, frozen=True)


class Sourced(Part):
    """What every statement of a book carries: where it is from, and whether that was looked up."""

    clause: Text
    source: Text
    confirmed: bool
    standing: Standing


class BookApplies(Part):
    """To which sections something applies; null means whatever the section has."""

    circuit_kinds: tuple[CircuitKind, ...] | None = Field(None, min_length=1)
    tractions: tuple[Traction, ...] | None = Field(None, min_length=1)
    return_rails: tuple[Annotated[int, Field(ge=0, le=2)], ...] | None = Field(None, min_length=1)
    places: tuple[Place, ...] | None = Field(None, min_length=1)
    sleepers: tuple[Sleepers, ...] | None = Field(None, min_length=1)
    relay_types: tuple[RelayType, ...] | None = Field(None, min_length=1)
    receivers: tuple[Annotated[int, Field(ge=1, le=20)], ...] | None = Field(None, min_length=1)
    choke: bool | None = None
    points: bool | None = None
    length_from_m: float | None = Field(None, ge=0)
    length_below_m: float | None = Field(None, ge=0)
    catenary_from_a: float | None = Field(None, ge=0)
    catenary_below_a: float | None = Field(None, ge=0)

    def rule(self) -> Applicability:
        """The rule object."""
        stated: dict[str, Any] = {
            name: frozenset(value) if isinstance(value, tuple) else value
            for name in type(self).model_fields
            if (value := getattr(self, name)) is not None
        }
        return Applicability(**stated)


class BookBound(Part):
    """One side of a limit: `value` in the limit's unit (a factor where the limit is relative)."""

    value: float
    hazard: Hazard
    near_margin: float | None = None


class BookLimit(Sourced):
    """One limit. `unit` is a UCUM code of the quantity; of a relative limit, the near margins'."""

    limit: Word
    title: Text | None = None
    quantity: Word
    unit: Annotated[str, StringConstraints(min_length=1, max_length=20)]
    test_points: tuple[TestPoint, ...] | None = None
    relative_to: RelativeTo | None = None
    minimum: BookBound | None = None
    maximum: BookBound | None = None
    ballast: Literal["dry"] | None = None
    shunt_ohm: float | None = Field(None, ge=0)
    applies: BookApplies | None = None

    def rule(self) -> Limit:
        """The rule object, in the quantity's base unit; its unit must be a known one."""
        return Limit(
            limit=self.limit,
            quantity=self.quantity,
            minimum=self._bound(self.minimum),
            maximum=self._bound(self.maximum),
            clause=self.clause,
            source=self.source,
            confirmed=self.confirmed,
            standing=self.standing,
            test_points=self.test_points,
            relative_to=self.relative_to,
            ballast_dry=self.ballast == "dry",
            shunt_ohm=self.shunt_ohm,
            applies=_applicability(self.applies),
            title=self.title,
        )

    def _bound(self, bound: BookBound | None) -> Bound | None:
        if bound is None:
            return None
        value, margin = bound.value, bound.near_margin
        if self.relative_to is None:
            value = quantities.to_base(value, self.unit)
        return Bound(value, bound.hazard, None if margin is None else quantities.to_base(margin, self.unit))


class BookWindow(Part):
    """A part of every year, as month and day of its first and last day."""

    first: DayOfYear
    last: DayOfYear


class BookShortened(Part):
    """A shorter interval while a result is under a value."""

    quantity: Word
    unit: Annotated[str, StringConstraints(min_length=1, max_length=20)]
    under: float
    interval: Duration


class BookTask(Sourced):
    """Something to be done at an interval (ISO 8601 durations of years, months, weeks, days)."""

    task: Word
    title: Text | None = None
    interval: Duration | None = None
    grace: Duration | None = None
    window: BookWindow | None = None
    needs: Several[Word] = ()
    needs_anywhere: Several[Word] = ()
    shortened: BookShortened | None = None
    after_work: Several[Work] = ()
    item: Word | None = None
    applies: BookApplies | None = None

    def rule(self) -> Task:
        """The rule object; the unit of `shortened` must be a known one."""
        short, window = self.shortened, self.window
        days = None if window is None else YearlyWindow(_month_day(window.first), _month_day(window.last))
        return Task(
            task=self.task,
            clause=self.clause,
            source=self.source,
            confirmed=self.confirmed,
            standing=self.standing,
            interval=self.interval,
            grace=self.grace,
            window=days,
            needs=self.needs,
            needs_anywhere=self.needs_anywhere,
            shortened=None
            if short is None
            else Shortened(short.quantity, quantities.to_base(short.under, short.unit), short.interval),
            after_work=frozenset(self.after_work),
            item=self.item,
            applies=_applicability(self.applies),
            title=self.title,
        )


class BookCombination(Sourced):
    """A circuit kind permitted under a traction; `return_rails` null means any number."""

    circuit_kind: CircuitKind
    traction: Traction
    return_rails: tuple[Annotated[int, Field(ge=0, le=2)], ...] | None = Field(None, min_length=1)

    def rule(self) -> Combination:
        """The rule object."""
        return Combination(
            circuit_kind=self.circuit_kind,
            traction=self.traction,
            return_rails=None if self.return_rails is None else frozenset(self.return_rails),
            clause=self.clause,
            source=self.source,
            confirmed=self.confirmed,
            standing=self.standing,
        )


class BookNote(Sourced):
    """A rule in words that no limit, task or combination can carry; shown, never judged."""

    note: Annotated[
        str,
        StringConstraints(min_length=1, max_length=2000, pattern=r"^[^\x00-\x08\x0b\x0c\x0e-\x1f\x7f]*$"),
    ]


class Content(Part):
    """All that an edition says."""

    title: Text
    dry_ballast_ohm_km: float | None = Field(None, gt=0, description="null: infinite")
    limits: Several[BookLimit] = ()
    tasks: Several[BookTask] = ()
    combinations: Several[BookCombination] = ()
    notes: Several[BookNote] = ()

    def rules(self) -> ContentRules:
        """The rule objects; only once `unit_faults` finds nothing."""
        return ContentRules(
            title=self.title,
            dry_ballast_ohm_km=self.dry_ballast_ohm_km,
            limits=tuple(limit.rule() for limit in self.limits),
            tasks=tuple(task.rule() for task in self.tasks),
            combinations=tuple(combination.rule() for combination in self.combinations),
        )


class Draft(Content):
    """A new edition: the body that makes one, and what a bundled file holds."""

    book: Name
    edition: Name

    def content(self) -> Content:
        """What it says, without its names."""
        return Content(**{name: getattr(self, name) for name in Content.model_fields})


@dataclass(frozen=True, slots=True)
class ContentRules:
    """An edition's content as rule objects."""

    title: str
    dry_ballast_ohm_km: float | None
    limits: tuple[Limit, ...]
    tasks: tuple[Task, ...]
    combinations: tuple[Combination, ...]


def unit_faults(content: Content) -> Iterator[BookFault]:
    """What keeps a content from becoming rules: units and days of the year that do not exist or fit."""
    for index, limit in enumerate(content.limits):
        yield from _unit_faults(("limits", index), limit.quantity, limit.unit)
    for index, task in enumerate(content.tasks):
        if task.shortened is not None:
            short = task.shortened
            yield from _unit_faults(("tasks", index, "shortened"), short.quantity, short.unit)
        if task.window is not None:
            for end in ("first", "last"):
                if not _in_every_year(*_month_day(getattr(task.window, end))):
                    path = ("tasks", index, "window", end)
                    yield BookFault(path, "unknown_day", "is not a day of every year")


def _unit_faults(path: tuple[str | int, ...], quantity: str, unit: str) -> Iterator[BookFault]:
    known = quantities.QUANTITIES.get(quantity)
    if known is None:
        yield BookFault((*path, "quantity"), "unknown_quantity", "is not a quantity this service knows")
    if unit not in quantities.UNITS:
        yield BookFault((*path, "unit"), "unknown_unit", "is not a unit this service knows")
    elif known is not None and quantities.base_unit(unit) != known.unit:
        reason = f"is not a unit of {known.quantity}, which is in {known.unit}"
        yield BookFault((*path, "unit"), "wrong_unit", reason)


def _applicability(applies: BookApplies | None) -> Applicability:
    return Applicability() if applies is None else applies.rule()


def _month_day(text: str) -> tuple[int, int]:
    return int(text[:2]), int(text[3:])


def _in_every_year(month: int, day: int) -> bool:
    try:
        date(2001, month, day)
    except ValueError:
        return False
    return True
