"""From rows of the tables to the facts that rules judge, one function a kind of row.

On the path of every audit, so columns are taken by position. Gathering the rows is in `facts`.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from datetime import date, datetime
from functools import lru_cache
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Row

from service.records.tables import Latest, ReadingRow, VisitRow, VoidRow
from service.rules import facts as rules
from service.rules.words import (
    Ballast,
    CalibrationResult,
    Comparison,
    ConditionLeft,
    Rail,
    Source,
    Stage,
    TaskDone,
    Work,
)

_visit = VisitRow.__table__  # type: ignore[attr-defined]
_void = VoidRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]
_latest = Latest.__table__  # type: ignore[attr-defined]

WITH_VOID = _visit.outerjoin(_void, sa.and_(_void.c.depot == _visit.c.depot, _void.c.visit == _visit.c.visit))
"""Every visit with its void, if it has one."""

_VISIT = ("visit", "visited_at", "ballast", "rail", "tasks", "work_done", "condition_left", "replaces")
VISIT_COLUMNS = (_visit.c.section, *(_visit.c[name] for name in _VISIT), _void.c.voided_at)
"""What `visit_of` takes, after the section; `voided_at` last."""

_JUDGED = ("comparison", "instrument", "shunt_ohm", "source", "doubtful")
_READING = ("section", "visited_at", "visit", "quantity", "test_point")
READING_COLUMNS = tuple(_reading.c[name] for name in (*_READING, "stage", "value", *_JUDGED))
"""What `reading_of` takes, after section and instant."""

LATEST_COLUMNS = (
    *(_latest.c[name] for name in _READING),
    sa.case((_latest.c.as_left.is_(None), "as_found"), else_="as_left").label("stage"),
    sa.func.coalesce(_latest.c.as_left, _latest.c.as_found).label("value"),
    *(_latest.c[name] for name in _JUDGED),
)
"""The reading that is judged, in the columns of `READING_COLUMNS`."""

_STAGES = {word.value: word for word in Stage}
_COMPARISONS = {word.value: word for word in Comparison}
_SOURCES: dict[str | None, Source | None] = {None: None, **{word.value: word for word in Source}}
_BALLASTS: dict[str | None, Ballast | None] = {None: None, **{word.value: word for word in Ballast}}
_RAILS: dict[str | None, Rail | None] = {None: None, **{word.value: word for word in Rail}}
_LEFT: dict[str | None, ConditionLeft | None] = {None: None, **{word.value: word for word in ConditionLeft}}


@lru_cache(maxsize=4096)
def _tasks(text: str) -> tuple[rules.TaskClaim, ...]:
    return tuple(rules.TaskClaim(item["task"], TaskDone(item["done"])) for item in json.loads(text))


@lru_cache(maxsize=4096)
def _work(text: str) -> frozenset[Work]:
    return frozenset(Work(word) for word in json.loads(text))


def visit_of(
    zone: ZoneInfo,
    visit: str,
    visited_at: datetime,
    ballast: str | None,
    rail: str | None,
    tasks: str,
    work_done: str,
    condition_left: str | None,
    replaces: str | None,
    *,
    voided: bool,
) -> rules.Visit:
    """A visit; `tasks` and `work_done` are JSON text."""
    return rules.Visit(
        visit,
        visited_at,
        visited_at.astimezone(zone).date(),
        _BALLASTS[ballast],
        _RAILS[rail],
        _tasks(tasks),
        _work(work_done),
        _LEFT[condition_left],
        replaces,
        voided,
    )


def reading_of(
    visit: str,
    quantity: str,
    test_point: str,
    stage: str,
    value: float,
    comparison: str,
    instrument: str | None,
    shunt_ohm: float | None,
    source: str | None,
    doubtful: str | None,
) -> rules.Reading:
    """A reading, in the base unit."""
    return rules.Reading(
        visit,
        quantity,
        test_point,
        _STAGES[stage],
        _COMPARISONS[comparison],
        value,
        instrument,
        shunt_ohm,
        _SOURCES[source],
        doubtful,
    )


def calibration_of(row: Row[Any]) -> rules.Calibration:
    """The rule object of a row of `calibration`; its resolution is kept in the base unit."""
    step = {} if row.resolution is None else {row.resolution_unit: row.resolution}
    return rules.Calibration(row.calibrated_on, row.due_on, CalibrationResult(row.result), step)


def concession_of(row: Any, known_at: datetime | None) -> rules.Concession:
    """The rule object of a row of `concession`; an end not yet known has not happened."""
    known = row.ended_at is not None and (known_at is None or row.ended_at <= known_at)
    return rules.Concession(
        concession=row.concession,
        limit=row.limit_name,
        task=row.task,
        test_point=row.test_point,
        allowed_min=row.allowed_min,
        allowed_max=row.allowed_max,
        from_on=row.from_on,
        until_on=row.until_on,
        ended_on=row.ended_on if known else None,
    )


def version_on(versions: Sequence[Any], day: date) -> Any:
    """The record in force on a day: the highest version that holds from then or earlier, or None."""
    return next((row for row in reversed(versions) if row.valid_from_on <= day), None)


def returned_on(versions: Sequence[Any], day: date) -> date | None:
    """The last day up to `day` on which the section came back from out of use."""
    if all(row.state != "out_of_use" for row in versions):
        return None
    returned, before = None, None
    for start in sorted({row.valid_from_on for row in versions if row.valid_from_on <= day}):
        row = version_on(versions, start)
        if before == "out_of_use" and row.state == "in_use":
            returned = start
        before = row.state
    return returned
