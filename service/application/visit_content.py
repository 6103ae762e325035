"""What a visit says: as posted, its digest, its checks that need no database, its wire form.

Storing and judging are in `visits`.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from operator import attrgetter, itemgetter
from typing import Any

from service.errors import Fault
from service.records.engine import digest_of
from service.records.journal import canonical, instant_text
from service.rules.quantities import QUANTITIES, UNITS, base_unit, to_base
from service.rules.words import Comparison, Source

DIGEST_TAG = "shuntbook-visit-1"
AHEAD = timedelta(seconds=300)
"""How far a handheld's clock may run ahead before its visit is refused."""

EARLIEST = datetime(1900, 1, 1, tzinfo=UTC)
"""A visit before it has a clock that was never set; nothing measured then could be judged. Our choice."""

TEST_POINT = re.compile(r"feed_end|relay_end|middle|leg:[A-Za-z0-9._()-]{1,40}")


@dataclass(frozen=True, slots=True)
class ReadingDraft:
    """A reading as given; `value` in `unit`."""

    quantity: str
    test_point: str
    stage: str
    comparison: str
    value: float
    unit: str
    instrument: str | None = None
    shunt_ohm: float | None = None
    source: str | None = None


def whole(value: float) -> float:
    """A whole number as an integer, as JSON (RFC 8785) writes it: 700 for 700.0."""
    return int(value) if value.is_integer() and abs(value) < 2**53 else value


@dataclass(frozen=True, slots=True)
class TaskDraft:
    """What the technician says of one task."""

    task: str
    done: str
    reason: str | None = None


@dataclass(frozen=True, slots=True)
class Draft:
    """A visit as posted, parsed; members the client left out are None or empty."""

    visit: str
    section: str
    visited_at: datetime
    device: str | None = None
    tester: str | None = None
    ballast: str | None = None
    ballast_state: str | None = None
    rail: str | None = None
    air_temperature_c: float | None = None
    tasks: tuple[TaskDraft, ...] = ()
    work_done: tuple[str, ...] = ()
    condition_left: str | None = None
    remarks: str | None = None
    replaces: str | None = None
    pack: str | None = None
    readings: tuple[ReadingDraft, ...] = ()


_CONDITIONS = ("ballast", "ballast_state", "rail", "air_temperature_c")
_PLAIN = ("device", "tester", "condition_left", "remarks", "replaces", "pack")
_READING = (
    "quantity",
    "test_point",
    "stage",
    "comparison",
    "value",
    "unit",
    "instrument",
    "shunt_ohm",
    "source",
)


def _stated(values: Mapping[str, Any]) -> dict[str, Any]:
    return {name: value for name, value in values.items() if value is not None}


def digest(draft: Draft) -> str:
    """SHA-256 over the version tag and what the visit states, in RFC 8785 form.

    Members equal to their default are left out, so a member added later changes no old digest; times
    are UTC; readings, tasks and work are sorted by what makes each the only one of its visit. Nothing
    the server adds is in it.
    """
    stated: dict[str, Any] = _stated({name: getattr(draft, name) for name in _PLAIN})
    stated.update(visit=draft.visit, section=draft.section, visited_at=instant_text(draft.visited_at))
    conditions = _stated({name: getattr(draft, name) for name in _CONDITIONS})
    if conditions:
        stated["conditions"] = conditions
    tasks = [_stated({"task": t.task, "done": t.done, "reason": t.reason}) for t in draft.tasks]
    readings = [_stated({name: getattr(reading, name) for name in _READING}) for reading in draft.readings]
    for reading in readings:
        if reading["comparison"] == Comparison.EQ:
            del reading["comparison"]
    if tasks:
        stated["tasks"] = sorted(tasks, key=itemgetter("task"))
    if readings:
        stated["readings"] = sorted(readings, key=itemgetter("quantity", "test_point", "stage"))
    if draft.work_done:
        stated["work_done"] = sorted(draft.work_done)
    return digest_of(f"{DIGEST_TAG}\n{canonical(stated)}")


def wire(draft: Draft) -> dict[str, Any]:
    """The members a visit was posted with, as answers and the journal echo them.

    Readings and work stand in an order of their own: theirs as sent says nothing and is not kept.
    """
    readings = sorted(draft.readings, key=attrgetter("quantity", "test_point", "stage"))
    return {
        "visit": draft.visit,
        "section": draft.section,
        "visited_at": instant_text(draft.visited_at),
        "device": draft.device,
        "tester": draft.tester,
        "conditions": {name: getattr(draft, name) for name in _CONDITIONS},
        "tasks": [{"task": t.task, "done": t.done, "reason": t.reason} for t in draft.tasks],
        "work_done": sorted(draft.work_done),
        "condition_left": draft.condition_left,
        "remarks": draft.remarks,
        "replaces": draft.replaces,
        "pack": draft.pack,
        "readings": [{name: getattr(reading, name) for name in _READING} for reading in readings],
    }


def faults(draft: Draft, now: datetime) -> list[Fault]:
    """Everything wrong with a visit that can be told without the records."""
    found: list[Fault] = []
    if draft.visited_at > now + AHEAD:
        reason = f"lies in the future: the server's time is {instant_text(now)}"
        found.append(Fault("in_the_future", reason, "/visited_at"))
    if draft.visited_at < EARLIEST:
        found.append(Fault("before_any_record", f"lies before {EARLIEST.date()}", "/visited_at"))
    if draft.replaces == draft.visit:
        found.append(Fault("replaces_itself", "a visit cannot replace itself", "/replaces"))
    found.extend(_repeated("tasks", "task", [task.task for task in draft.tasks]))
    found.extend(_repeated("work_done", "work", list(draft.work_done)))
    keys = [(reading.quantity, reading.test_point, reading.stage) for reading in draft.readings]
    found.extend(_repeated("readings", "quantity at this test point and stage", keys))
    for index, reading in enumerate(draft.readings):
        found.extend(_reading_faults(reading, f"/readings/{index}"))
    return found


def _repeated(member: str, what: str, keys: list[Any]) -> Iterator[Fault]:
    seen = set()
    for index, key in enumerate(keys):
        if key in seen:
            yield Fault("repeated", f"the same {what} stands twice in this visit", f"/{member}/{index}")
        seen.add(key)


def _reading_faults(reading: ReadingDraft, at: str) -> Iterator[Fault]:
    quantity = QUANTITIES.get(reading.quantity)
    if quantity is None:
        yield Fault(
            "unknown_quantity", "this service knows no such quantity: see /v1/quantities", f"{at}/quantity"
        )
        return
    if quantity.from_register:
        yield Fault("not_a_reading", "comes from the section's record, not from a reading", f"{at}/quantity")
    if not TEST_POINT.fullmatch(reading.test_point):
        reason = "a test point is feed_end, relay_end, middle or leg:<name>"
        yield Fault("unknown_test_point", reason, f"{at}/test_point")
    yield from _shunt_faults(reading, quantity.needs_shunt, at)
    if reading.unit not in UNITS:
        yield Fault("unknown_unit", "not a unit of this service: see /v1/quantities", f"{at}/unit")
    elif base_unit(reading.unit) != quantity.unit:
        yield Fault(
            "wrong_unit", f"{reading.quantity} is given in {quantity.unit} or a multiple of it", f"{at}/unit"
        )
    elif not quantity.lowest <= to_base(reading.value, reading.unit) <= quantity.highest:
        reason = (
            f"{reading.quantity} lies between {quantity.lowest:g} and {quantity.highest:g} {quantity.unit}"
        )
        yield Fault("absurd_value", reason, f"{at}/value")


def _shunt_faults(reading: ReadingDraft, needs_shunt: bool, at: str) -> Iterator[Fault]:
    if not needs_shunt:
        for member in ("shunt_ohm", "source"):
            if getattr(reading, member) is not None:
                yield Fault("not_a_residual", "only goes with a residual reading", f"{at}/{member}")
        return
    if reading.source is None:
        yield Fault(
            "missing", "a residual reading says whether a shunt or a train was on the track", f"{at}/source"
        )
    elif reading.source == Source.SHUNT and reading.shunt_ohm is None:
        yield Fault("missing", "a residual under a shunt names the shunt's resistance", f"{at}/shunt_ohm")
    elif reading.source == Source.TRAIN and reading.shunt_ohm is not None:
        yield Fault("not_a_shunt", "a train has no stated resistance", f"{at}/shunt_ohm")
    if reading.shunt_ohm is not None and not 0 <= reading.shunt_ohm <= 1000:
        yield Fault("absurd_value", "a test shunt lies between 0 and 1000 Ohm", f"{at}/shunt_ohm")
