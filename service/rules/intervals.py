"""When a task was last done, when it is due, and what it is on a day.

Calendar arithmetic from the last local date, never step by step. What a visit must hold for a task to
be done is judged here; whether its readings are inside any limit is not.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from functools import lru_cache
from typing import NamedTuple

from dateutil.relativedelta import relativedelta

from service.rules.editions import Task, YearlyWindow
from service.rules.evidence import Evidence
from service.rules.facts import Concession, EquipmentItem, Visit
from service.rules.words import Reason, TaskDone, TaskState

DURATION = re.compile(r"P(?=\d)(?:(\d{1,3})Y)?(?:(\d{1,4})M)?(?:(\d{1,4})W)?(?:(\d{1,5})D)?", re.ASCII)
"""ISO 8601 durations in whole years, months, weeks and days."""


@dataclass(frozen=True, slots=True)
class TaskStatus:
    """One task of one section. `days_overdue` is not kept: see `days_overdue(…)`.

    `last_done_on` may be the bench test of an item before it was fitted; `visit` is None then.
    `due_on` is None where nothing is owed, or where nothing says since when it is.
    """

    task: str
    state: TaskState
    interval: str | None
    clause: str
    last_done_on: date | None
    visit: str | None
    due_on: date | None
    grace_until_on: date | None
    concession: str | None
    reasons: tuple[Reason, ...] = ()


@lru_cache(maxsize=1 << 14)
def add(day: date, duration: str) -> date:
    """`day` plus an ISO 8601 duration such as P3M, P4Y or P14D.

    A day that the month lacks becomes its last (ISO 8601 leaves this open; as `dateutil` has it),
    and one beyond the year 9999 the last there is.

    Raises
    ------
    ValueError
        If `duration` is not one in years, months, weeks and days.

    >>> add(date(2024, 1, 31), "P3M"), add(date(2024, 2, 29), "P1Y")
    (datetime.date(2024, 4, 30), datetime.date(2025, 2, 28))
    """
    found = DURATION.fullmatch(duration)
    if found is None:
        raise ValueError(f"not a duration in years, months, weeks and days: {duration}")
    years, months, weeks, days = (int(part or 0) for part in found.groups())
    try:
        return day + relativedelta(years=years, months=months, weeks=weeks, days=days)
    except (OverflowError, ValueError):
        return date.max


def days_overdue(task: TaskStatus, as_of: date) -> int:
    """How many days a task is overdue, counted from the last day of its grace; 0 if it is not."""
    if task.state is not TaskState.OVERDUE or task.grace_until_on is None:
        return 0
    return (as_of - task.grace_until_on).days


class _Done(NamedTuple):
    """What the visits say of a task: the visit that did it and its place, and why a newer one did not."""

    visit: Visit | None
    place: int
    shortfall: tuple[Reason, ...]


def task_status(
    task: Task,
    missing: str | None,
    evidence: Evidence,
    concessions: Mapping[str, Sequence[Concession]],
) -> TaskStatus:
    """What a task that applies is on the evidence's day; `concessions` are the live ones by task.

    `missing` is the attribute without which it cannot be said that the task applies: it is owed
    all the same, with that reason.
    """
    item = evidence.record.items.get(task.item) if task.item is not None else None
    done = _last_done(task, item, evidence)
    last, visit = (None, None) if done.visit is None else (done.visit.visited_on, done.visit.visit)
    if item is not None and item.tested_on is not None and (last is None or item.tested_on > last):
        last, visit = item.tested_on, None
    interval = _interval(task, evidence)
    since = last or (item.fitted_on if item is not None else None) or evidence.record.commissioned_on
    regular = _regular(task, interval, since, last is not None)
    worked_on = _first_work_since(task, done.place, evidence)
    due_on = min((day for day in (regular, worked_on) if day is not None), default=None)
    at_once = due_on is None and (interval is not None or task.window is not None)
    grace_until_on, deferral = _grace(task, due_on, concessions.get(task.task, ()))
    if due_on is None or grace_until_on is None:
        state = _undated(task, interval, at_once, bool(done.shortfall))
    else:
        state = _dated(evidence.as_of, due_on, grace_until_on, last, bool(done.shortfall))
    unnamed = task.item if task.item is not None and (item is None or item.serial is None) else None
    lacks = (missing, f"serial of the {unnamed}" if unnamed else None, "commissioned_on" if at_once else None)
    reasons = tuple(Reason("attribute_missing", f"the register does not say: {one}") for one in lacks if one)
    return TaskStatus(
        task.task,
        state,
        interval,
        task.clause,
        last,
        visit,
        due_on,
        grace_until_on,
        deferral,
        (*reasons, *done.shortfall),
    )


def _grace(
    task: Task, due_on: date | None, concessions: Sequence[Concession]
) -> tuple[date | None, str | None]:
    """The last day on which a due task is not overdue, and the concession that put it off, if one did."""
    if due_on is None:
        return None, None
    until_on = due_on if task.grace is None else add(due_on, task.grace)
    deferral = None
    for concession in concessions:
        if concession.until_on > until_on:
            until_on, deferral = concession.until_on, concession.concession
    return until_on, deferral


def _dated(as_of: date, due_on: date, grace_until_on: date, last: date | None, incomplete: bool) -> TaskState:
    if as_of > grace_until_on:
        return TaskState.OVERDUE
    if as_of >= due_on:
        return TaskState.DUE
    if last is None:
        return TaskState.NEVER_DONE
    return TaskState.INCOMPLETE if incomplete else TaskState.CURRENT


def _undated(task: Task, interval: str | None, at_once: bool, incomplete: bool) -> TaskState:
    if at_once:
        return TaskState.DUE
    if interval is None and task.window is None and not task.after_work:
        return TaskState.NO_INTERVAL
    return TaskState.INCOMPLETE if incomplete else TaskState.CURRENT


def _last_done(task: Task, item: EquipmentItem | None, evidence: Evidence) -> _Done:
    """The newest visit that did the task; a claim on an item before it was fitted is not of this item."""
    shortfall: tuple[Reason, ...] | None = None
    fitted_on = item.fitted_on if item is not None else None
    for place, claim in reversed(evidence.claims.get(task.task, ())):
        visit = evidence.visits[place]
        if claim is TaskDone.NOT_DONE:
            continue
        if fitted_on is not None and visit.visited_on < fitted_on:
            break
        lacking = _shortfall(task, place, claim, evidence)
        if not lacking:
            return _Done(visit, place, shortfall or ())
        if shortfall is None:
            shortfall = lacking
    return _Done(None, -1, shortfall or ())


def _shortfall(task: Task, place: int, claim: TaskDone, evidence: Evidence) -> tuple[Reason, ...]:
    """Why a visit that says that it did the task did not do it; empty if it did."""
    if claim is TaskDone.PARTLY:
        return (Reason("partly", "done in part only"),)
    if task.window is not None and not _inside(task.window, evidence.visits[place].visited_on):
        return (Reason("outside_window", "done outside the yearly window"),)
    points = evidence.record.required_test_points
    if task.needs and not points:
        return (Reason("attribute_missing", "the register does not say: required_test_points"),)
    wanted: list[tuple[str, tuple[str, ...]]] = [
        (quantity, (point,)) for quantity in task.needs for point in points
    ]
    wanted += [(quantity, tuple(evidence.points.get(quantity, ()))) for quantity in task.needs_anywhere]
    reasons = []
    for quantity, anywhere in wanted:
        reason = _unread(quantity, anywhere, place, evidence)
        if reason is not None:
            reasons.append(reason)
    return tuple(dict.fromkeys(reasons))


def _unread(quantity: str, points: tuple[str, ...], place: int, evidence: Evidence) -> Reason | None:
    """Why a visit does not hold a reading of the quantity, at one of the points, that can be relied on."""
    reason = None
    for point in points:
        for order, reading in reversed(evidence.series.get((quantity, point), ())):
            if order // 2 == place:
                reason = evidence.trust(order, reading)
                if reason is None:
                    return None
    if reason is not None:
        return reason
    return Reason(
        "not_measured", f"{quantity} was not read at {points[0] if len(points) == 1 else 'any test point'}"
    )


def _interval(task: Task, evidence: Evidence) -> str | None:
    """The interval that runs: the shorter one while the last result may be under its value."""
    shortened = task.shortened
    if shortened is None:
        return task.interval
    for point in evidence.points.get(shortened.quantity, ()):
        order, reading = evidence.series[shortened.quantity, point][-1]
        if evidence.span(order, reading)[0] < shortened.under:
            return shortened.interval
    return task.interval


def _regular(task: Task, interval: str | None, since: date | None, done: bool) -> date | None:
    if since is None:
        return None
    if task.window is not None:
        return _window_end(task.window, since, done)
    return add(since, interval) if interval is not None else None


def _inside(window: YearlyWindow, day: date) -> bool:
    return window.first <= (day.month, day.day) <= window.last


def _window_end(window: YearlyWindow, since: date, done: bool) -> date:
    """The last day of the first window not over by `since`, nor holding it if it was `done` then."""
    year = since.year
    if (done and _inside(window, since)) or (since.month, since.day) > window.last:
        year += 1
    month, day = window.last
    return date(year, month, 1) + relativedelta(day=day)


def _first_work_since(task: Task, place: int, evidence: Evidence) -> date | None:
    """The day of the first work after the visit at `place` that makes the task due at once."""
    if task.after_work:
        for visit in evidence.visits[place + 1 :]:
            if not task.after_work.isdisjoint(visit.work):
                return visit.visited_on
    return None
