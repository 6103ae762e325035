"""Visits as they are kept: one, or a page of them, in their wire form; and which of them count.

Storing them is in `visits`.
"""

from __future__ import annotations

import json
from collections import defaultdict
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import visit_content
from service.application.fact_rows import VISIT_COLUMNS, WITH_VOID, visit_of
from service.application.visit_content import Draft, ReadingDraft, TaskDraft, whole
from service.errors import NotFoundError
from service.records import latest
from service.records.journal import instant_text
from service.records.tables import ReadingRow, Section, VisitRow, VoidRow
from service.rules import readings

_visit = VisitRow.__table__  # type: ignore[attr-defined]
_void = VoidRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]
_section = Section.__table__  # type: ignore[attr-defined]


def require_section(connection: Connection, depot: str, section: str) -> None:
    """NotFoundError if the depot has no such section."""
    query = sa.select(_section.c.section).where(_section.c.depot == depot, _section.c.section == section)
    if connection.execute(query).first() is None:
        raise NotFoundError("This depot has no such section.")


def derive_latest(connection: Connection, depot: str, section: str) -> None:
    """Derive `latest` of a section again, after a void or a replacement."""
    query = (
        sa.select(*VISIT_COLUMNS)
        .select_from(WITH_VOID)
        .where(_visit.c.depot == depot, _visit.c.section == section)
        .order_by(_visit.c.visited_at, _visit.c.visit)
    )
    utc = ZoneInfo("UTC")
    found = [
        visit_of(utc, *columns, voided=voided_at is not None)
        for _, *columns, voided_at in connection.execute(query)
    ]
    latest.derive(connection, depot, section, [visit.visit for visit in readings.counting(found)])


def get(connection: Connection, depot: str, visit: str) -> dict[str, Any]:
    """One visit in its wire form; NotFoundError if the depot has none of that id."""
    found = _wire_rows(connection, sa.and_(_visit.c.depot == depot, _visit.c.visit == visit))
    if not found:
        raise NotFoundError("This depot has no such visit.")
    return found[0]


def page(
    connection: Connection,
    depot: str,
    *,
    section: str | None,
    received_after: datetime | None,
    after: tuple[datetime, str] | None,
    most: int,
) -> list[dict[str, Any]]:
    """Visits in order of receipt, from `after` on (received_at, visit), at most `most`."""
    where = [_visit.c.depot == depot]
    if section is not None:
        where.append(_visit.c.section == section)
    if received_after is not None:
        where.append(_visit.c.received_at > received_after)
    if after is not None:
        at = sa.bindparam("after_at", after[0], type_=_visit.c.received_at.type)
        where.append(
            sa.or_(_visit.c.received_at > at, sa.and_(_visit.c.received_at == at, _visit.c.visit > after[1]))
        )
    return _wire_rows(connection, sa.and_(*where), most)


def _wire_rows(
    connection: Connection, where: sa.ColumnElement[bool], most: int | None = None
) -> list[dict[str, Any]]:
    query = (
        sa.select(_visit, _void.c.voided_at, _void.c.voided_by, _void.c.why)
        .select_from(WITH_VOID)
        .where(where)
        .order_by(_visit.c.received_at, _visit.c.visit)
        .limit(most)
    )
    rows = connection.execute(query).all()
    if not rows:
        return []
    found: dict[str, list[ReadingDraft]] = defaultdict(list)
    wanted = sa.select(_reading).where(
        _reading.c.depot == rows[0].depot, _reading.c.visit.in_([row.visit for row in rows])
    )
    order = (_reading.c.visit, _reading.c.quantity, _reading.c.test_point, _reading.c.stage)
    for row in connection.execute(wanted.order_by(*order)):
        found[row.visit].append(
            ReadingDraft(
                row.quantity,
                row.test_point,
                row.stage,
                row.comparison,
                whole(row.value_given),
                row.unit_given,
                row.instrument,
                None if row.shunt_ohm is None else whole(row.shunt_ohm),
                row.source,
            )
        )
    return [wire_row(row, tuple(found[row.visit])) for row in rows]


def draft_of(row: Row[Any], given: tuple[ReadingDraft, ...]) -> Draft:
    """The draft a stored visit was made of (readings in stored order)."""
    tasks = tuple(TaskDraft(item["task"], item["done"], item["reason"]) for item in json.loads(row.tasks))
    plain = {name: getattr(row, name) for name in ("visit", "section", "visited_at")}
    members = ("device", "tester", "ballast", "ballast_state", "rail", "air_temperature_c", "condition_left")
    plain |= {name: getattr(row, name) for name in (*members, "remarks", "replaces", "pack")}
    return Draft(**plain, tasks=tasks, work_done=tuple(json.loads(row.work_done)), readings=given)


def wire_row(row: Row[Any], given: tuple[ReadingDraft, ...]) -> dict[str, Any]:
    """A visit in its wire form, from its row joined with its void and its readings as given."""
    voided = None
    if row.voided_at is not None:
        voided = {"voided_at": instant_text(row.voided_at), "voided_by": row.voided_by, "why": row.why}
    return {
        **visit_content.wire(draft_of(row, given)),
        "received_at": instant_text(row.received_at),
        "clock_offset_s": row.clock_offset_s,
        "received_by": row.received_by,
        "digest": row.digest,
        "voided": voided,
    }
