"""What is judged: the facts of one section as frozen values, gathered elsewhere.

Every time here is a UTC instant (`…_at`) or a day in the depot's time zone (`…_on`). No rule lives
here; `readings`, `verdicts` and `status` work on these.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date, datetime

from service.rules.words import (
    Ballast,
    Bonding,
    CalibrationResult,
    CircuitKind,
    Comparison,
    ConditionLeft,
    Place,
    Rail,
    SectionState,
    Separation,
    Sleepers,
    Source,
    Stage,
    TaskDone,
    Traction,
    Work,
)


@dataclass(frozen=True, slots=True)
class Adjacent:
    """One boundary of a section. `polarity` is polarity, phase or frequency, as text."""

    boundary: str
    neighbour: str | None
    separation: Separation
    polarity: str | None
    neighbour_polarity: str | None = None
    """What the neighbour's own record says at this boundary; None where it says nothing."""


@dataclass(frozen=True, slots=True)
class EquipmentItem:
    """A serial-numbered item that a task may run with (`relay`, `feed`, …)."""

    serial: str | None
    fitted_on: date | None
    tested_on: date | None
    """Last bench test or overhaul before fitting."""


@dataclass(frozen=True, slots=True)
class SectionRecord:
    """The version of a section in force on the day judged; None where the register is silent."""

    section: str
    version: int
    state: SectionState
    commissioned_on: date | None
    circuit_kind: CircuitKind
    traction: Traction
    return_rails: int | None = None
    place: Place | None = None
    sleepers: Sleepers | None = None
    length_m: float | None = None
    required_test_points: tuple[str, ...] = ()
    points_ends: int | None = None
    insulated_joints: int | None = None
    bonding: Bonding | None = None
    longest_parallel_m: float | None = None
    bonds_duplicated: bool | None = None
    interrupter_required: bool | None = None
    interrupter_fitted: bool | None = None
    relay_type: str | None = None
    relay_pick_up_v: float | None = None
    """Register's own figure of the fitted relay: bench test before fitting, else type data."""
    relay_drop_away_v: float | None = None
    relay_pick_up_a: float | None = None
    relay_drop_away_a: float | None = None
    receivers: int | None = None
    choke: bool | None = None
    catenary_current_a: float | None = None
    items: Mapping[str, EquipmentItem] = field(default_factory=dict)
    set_up: Mapping[tuple[str, str], float] = field(default_factory=dict)
    """(quantity, test point) → set-up value in the base unit."""
    adjacent: tuple[Adjacent, ...] = ()
    returned_on: date | None = None
    """The last day it came back from out of use."""


@dataclass(frozen=True, slots=True)
class TaskClaim:
    """What a visit says of one task; `done` only counts if its readings are there."""

    task: str
    done: TaskDone


@dataclass(frozen=True, slots=True)
class Visit:
    """A visit without its readings."""

    visit: str
    visited_at: datetime
    visited_on: date
    ballast: Ballast | None = None
    rail: Rail | None = None
    tasks: tuple[TaskClaim, ...] = ()
    work: frozenset[Work] = frozenset()
    condition_left: ConditionLeft | None = None
    replaces: str | None = None
    voided: bool = False


@dataclass(slots=True, unsafe_hash=True)
class Reading:
    """One reading, in the base unit.

    Never assigned to. Not declared frozen only because a frozen one takes ten times as long to build,
    and an audit builds millions.
    """

    visit: str
    quantity: str
    test_point: str
    stage: Stage
    comparison: Comparison
    value: float
    instrument: str | None = None
    shunt_ohm: float | None = None
    source: Source | None = None
    doubtful: str | None = None
    """Reason code given when the visit was received; None if nothing speaks against it."""


@dataclass(frozen=True, slots=True)
class Calibration:
    """One calibration of an instrument; `step` is the resolution in base units, e.g. 0.1 Ω."""

    calibrated_on: date
    due_on: date
    result: CalibrationResult
    step: Mapping[str, float] = field(default_factory=dict)
    """base unit → step of a stepped box in that unit; empty for a meter."""


@dataclass(frozen=True, slots=True)
class Instrument:
    """An instrument with all its calibrations, in order of `calibrated_on`."""

    instrument: str
    calibrations: tuple[Calibration, ...]


@dataclass(frozen=True, slots=True)
class Concession:
    """A granted permission. Exactly one of `limit` and `task` is set.

    `allowed_min`/`allowed_max` are in the base unit of the limit's quantity; a task's is deferred
    to `until_on`. `ended_on` is the day it was ended early.
    """

    concession: str
    limit: str | None
    task: str | None
    test_point: str | None
    allowed_min: float | None
    allowed_max: float | None
    from_on: date
    until_on: date
    ended_on: date | None = None


@dataclass(frozen=True, slots=True)
class SectionFacts:
    """All that one section is judged by, as of a day and as known at an instant.

    `visits` holds every visit up to the day, counting or not, oldest first by (visited_at, visit).
    `readings` holds at least: of each (quantity, test point) those of the newest counting visit that
    has it; for quantities where wetness matters and those that tasks need, all of them.
    """

    record: SectionRecord
    visits: tuple[Visit, ...]
    readings: tuple[Reading, ...]
    instruments: Mapping[str, Instrument]
    concessions: tuple[Concession, ...]
    next_version_on: date | None = None
    """First day after the one judged on which another version of the record begins."""
