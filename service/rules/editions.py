"""What a limit book says, as frozen values: limits, tasks, permitted combinations, editions.

Types only. Which of them apply to a section is in `limits`, whether a book is consistent in
`consistency`, what a limit makes of a reading in `bounds` and `verdicts`.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date
from typing import NamedTuple

from service.rules.words import (
    CircuitKind,
    EditionState,
    Hazard,
    Place,
    RelativeTo,
    Sleepers,
    Traction,
    Work,
)


@dataclass(frozen=True, slots=True)
class Bound:
    """One side of a limit.

    `value` is in the quantity's base unit, or a factor where the limit is relative;
    `near_margin` is always in the base unit. A value exactly on the bound is inside.
    """

    value: float
    hazard: Hazard
    near_margin: float | None = None


@dataclass(frozen=True, slots=True)
class Applicability:
    """To which sections something applies; None means whatever the section has.

    Bands are [from, below), either end None for open.
    """

    circuit_kinds: frozenset[CircuitKind] | None = None
    tractions: frozenset[Traction] | None = None
    return_rails: frozenset[int] | None = None
    places: frozenset[Place] | None = None
    sleepers: frozenset[Sleepers] | None = None
    relay_types: frozenset[str] | None = None
    receivers: frozenset[int] | None = None
    choke: bool | None = None
    points: bool | None = None
    """True: only sections with at least one points end; False: only plain line."""
    length_from_m: float | None = None
    length_below_m: float | None = None
    catenary_from_a: float | None = None
    catenary_below_a: float | None = None


class Bounds(NamedTuple):
    """A limit resolved for one base: every figure in the quantity's base unit, None where open.

    `near_min` and `near_max` are where `near` ends and `within` begins.
    """

    min: float | None
    near_min: float | None
    near_max: float | None
    max: float | None
    min_hazard: Hazard | None
    max_hazard: Hazard | None


@dataclass(frozen=True, slots=True)
class Limit:
    """One limit of an edition.

    `test_points` None means all the section's required test points; `legs` in it stands for every
    required `leg:…`. Empty for what is judged from the register. `ballast_dry`: a pass counts only when the
    ballast was at its driest. `shunt_ohm`: the resistance across the rails the limit is stated for.
    """

    limit: str
    quantity: str
    minimum: Bound | None
    maximum: Bound | None
    clause: str
    source: str
    confirmed: bool
    standing: str
    test_points: tuple[str, ...] | None = None
    relative_to: RelativeTo | None = None
    ballast_dry: bool = False
    shunt_ohm: float | None = None
    applies: Applicability = Applicability()
    title: str | None = None
    resolved: dict[float | None, Bounds] = field(default_factory=dict, init=False, repr=False, compare=False)
    """What `bounds.resolve` has worked out so far, by base; no part of the limit."""


@dataclass(frozen=True, slots=True)
class YearlyWindow:
    """A part of every year, as (month, day) of its first and last day, not across New Year."""

    first: tuple[int, int]
    last: tuple[int, int]


@dataclass(frozen=True, slots=True)
class Shortened:
    """A shorter interval that runs while a result is under a value (base unit)."""

    quantity: str
    under: float
    interval: str


@dataclass(frozen=True, slots=True)
class Task:
    """Something to be done at an interval. Durations are ISO 8601 (P3M, P4Y, P14D).

    `needs` are quantities that must be read at every required test point for the task to be done
    (quantities not tied to rails: anywhere in the visit, see `needs_anywhere`).
    `after_work` makes it due at once after such work. `item` names the equipment item whose serial
    the task runs with. `window` replaces the interval: once within each year's window.
    """

    task: str
    clause: str
    source: str
    confirmed: bool
    standing: str
    interval: str | None = None
    grace: str | None = None
    window: YearlyWindow | None = None
    needs: tuple[str, ...] = ()
    needs_anywhere: tuple[str, ...] = ()
    shortened: Shortened | None = None
    after_work: frozenset[Work] = frozenset()
    item: str | None = None
    applies: Applicability = Applicability()
    title: str | None = None


@dataclass(frozen=True, slots=True)
class Combination:
    """A circuit kind permitted under a traction; `return_rails` None means any number."""

    circuit_kind: CircuitKind
    traction: Traction
    return_rails: frozenset[int] | None
    clause: str
    source: str
    confirmed: bool
    standing: str


@dataclass(frozen=True, slots=True)
class Edition:
    """One edition of a limit book. With no combinations, every combination is permitted.

    In force from `effective_on` until the day before `withdrawn_on` or the next issued edition.
    """

    book: str
    edition: str
    state: EditionState
    effective_on: date | None
    withdrawn_on: date | None
    digest: str
    limits: tuple[Limit, ...]
    tasks: tuple[Task, ...]
    combinations: tuple[Combination, ...] = ()
    title: str | None = None
    dry_ballast_ohm_km: float | None = None
    """What the book takes for the driest ballast; None is infinite."""
    profiles: dict[tuple[object, ...], Applying] = field(
        default_factory=dict, init=False, repr=False, compare=False
    )
    """What `limits.applying` has worked out so far, by profile; no part of the edition."""
    length_cuts_m: tuple[float, ...] = field(init=False, repr=False, compare=False)
    catenary_cuts_a: tuple[float, ...] = field(init=False, repr=False, compare=False)
    """Every length and current at which something begins or ceases to apply, ascending."""

    def __post_init__(self) -> None:
        every = [limit.applies for limit in self.limits] + [task.applies for task in self.tasks]
        lengths = {cut for one in every for cut in (one.length_from_m, one.length_below_m)}
        currents = {cut for one in every for cut in (one.catenary_from_a, one.catenary_below_a)}
        object.__setattr__(self, "length_cuts_m", tuple(sorted(cut for cut in lengths if cut is not None)))
        object.__setattr__(self, "catenary_cuts_a", tuple(sorted(cut for cut in currents if cut is not None)))


@dataclass(frozen=True, slots=True)
class BookFault:
    """One fault in a book: where (`("limits", 3, "minimum")`), a code and why."""

    path: tuple[str | int, ...]
    code: str
    reason: str


class Permission(NamedTuple):
    """Whether the circuit kind is permitted under the traction; None where unknown return rails decide.

    `limit` is what the combinations say put as a limit, with the clauses of those that decide.
    """

    permitted: bool | None
    limit: Limit


@dataclass(frozen=True, slots=True)
class Applying:
    """What of an edition concerns one section, each with the attribute that the register lacks.

    `permission` None: the edition names no combinations, so every circuit kind is permitted.
    """

    limits: tuple[tuple[Limit, str | None], ...]
    tasks: tuple[tuple[Task, str | None], ...]
    permission: Permission | None = None
