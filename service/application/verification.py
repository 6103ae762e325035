"""Whether what is kept is what was recorded: journal chains, and stored visits against the journal.

Shows tampering and damage; it repairs nothing. `latest` and `status`, which are derived, are not looked at.
"""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import visit_content, visit_records
from service.application.fact_rows import WITH_VOID
from service.application.visit_content import ReadingDraft
from service.records import journal
from service.records.engine import digest_of
from service.records.journal import canonical
from service.records.tables import Depot, JournalHead, JournalLine, ReadingRow, VisitRow, VoidRow
from service.rules.quantities import to_base

_depot = Depot.__table__  # type: ignore[attr-defined]
_head = JournalHead.__table__  # type: ignore[attr-defined]
_line = JournalLine.__table__  # type: ignore[attr-defined]
_visit = VisitRow.__table__  # type: ignore[attr-defined]
_void = VoidRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]

CHUNK = 500
"""Visits read together."""


@dataclass(frozen=True, slots=True)
class Mismatch:
    """A stored visit that is not what was recorded, and why."""

    depot: str
    visit: str
    reason: str


def broken_chains(connection: Connection) -> Iterator[journal.Break]:
    """The first broken line of every chain that has one."""
    for stream in _chains(connection):
        if not _is_text(stream):
            named = stream.encode(errors="replace").decode()
            yield journal.Break(named, 1, "there is no depot of this name, whose bytes are no text")
        elif (found := journal.verify(connection, stream)) is not None:
            yield found


def _chains(connection: Connection) -> list[str]:
    """Every chain there must be, and any other of which there is a head or a line."""
    query = sa.union(sa.select(_depot.c.depot), sa.select(_head.c.depot), sa.select(_line.c.depot).distinct())
    with journal.any_bytes(connection):
        return sorted({journal.SERVICE, *connection.execute(query).scalars()})


def _is_text(name: str) -> bool:
    try:
        name.encode()
    except UnicodeEncodeError:
        return False
    return True


def mismatched_visits(connection: Connection) -> Iterator[Mismatch]:
    """Stored visits that differ from their digest or from the journal, that are missing or too many."""
    for depot in filter(_is_text, _chains(connection)):
        recorded = _recorded(connection, depot)
        for row, readings in _stored(connection, depot):
            reason = _reason(row, readings, recorded.pop(row.visit, None))
            if reason is not None:
                yield Mismatch(depot, row.visit, reason)
        for visit in sorted(recorded):
            yield Mismatch(depot, visit, "the journal records it, but it is not stored")


@dataclass(frozen=True, slots=True)
class _Recorded:
    """What the journal says of a visit: who sent it, its digest, and the digest of all that it says."""

    holder: str
    digest: str
    content: str


def _recorded(connection: Connection, depot: str) -> dict[str, _Recorded]:
    """visit → what the newest line says of it, and who is the actor of the first."""
    found: dict[str, _Recorded] = {}
    for line in journal.lines(connection, depot, subject_kind="visit"):
        name = line["subject_name"]
        holder = found[name].holder if name in found else json.loads(line["actor"])["holder"]
        found[name] = _Recorded(holder, json.loads(line["content"])["digest"], digest_of(line["content"]))
    return found


def _stored(connection: Connection, depot: str) -> Iterator[tuple[Row[Any], Sequence[Row[Any]]]]:
    """Each stored visit with its readings."""
    query = (
        sa.select(_visit, _void.c.voided_at, _void.c.voided_by, _void.c.why)
        .select_from(WITH_VOID)
        .where(_visit.c.depot == depot, _visit.c.visit > sa.bindparam("after"))
        .order_by(_visit.c.visit)
        .limit(CHUNK)
    )
    order = (_reading.c.visit, _reading.c.quantity, _reading.c.test_point, _reading.c.stage)
    after = ""
    while rows := connection.execute(query, {"after": after}).all():
        after = rows[-1].visit
        wanted = sa.select(_reading).where(
            _reading.c.depot == depot, _reading.c.visit.in_([row.visit for row in rows])
        )
        readings: dict[str, list[Row[Any]]] = defaultdict(list)
        for reading in connection.execute(wanted.order_by(*order)):
            readings[reading.visit].append(reading)
        for row in rows:
            yield row, readings[row.visit]


def _reason(row: Row[Any], readings: Sequence[Row[Any]], recorded: _Recorded | None) -> str | None:
    if recorded is None:
        return "it is stored, but the journal does not record it"
    given = tuple(_given(reading) for reading in readings)
    if row.digest != visit_content.digest(visit_records.draft_of(row, given)):
        return "what is stored does not match its digest"
    if row.digest != recorded.digest:
        return "its digest is not the one the journal records"
    content = canonical(visit_records.wire_row(row, given))
    if (row.holder, digest_of(content)) != (recorded.holder, recorded.content):
        return "what is stored of it is not what the journal records"
    if not all(_sound(reading, row) for reading in readings):
        return "a reading is judged by other values than were given"
    return None


def _sound(reading: Row[Any], visit: Row[Any]) -> bool:
    """What is judged is what was given: the value in the base unit, and the visit's section and instant."""
    judged = (reading.value, reading.section, reading.visited_at)
    given = (to_base(reading.value_given, reading.unit_given), visit.section, visit.visited_at)
    return bool(judged == given)


def _given(row: Row[tuple[object, ...]]) -> ReadingDraft:
    return ReadingDraft(
        row.quantity,
        row.test_point,
        row.stage,
        row.comparison,
        row.value_given,
        row.unit_given,
        row.instrument,
        row.shunt_ohm,
        row.source,
    )
