"""Whether what is kept is what was recorded: journal chains, and stored visits against their digests.

Shows tampering and damage; it repairs nothing.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import dataclass
from itertools import groupby

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import feed, visit_content, visit_records
from service.application.visit_content import ReadingDraft
from service.records import journal
from service.records.tables import ReadingRow, VisitRow

_visit = VisitRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Mismatch:
    """A stored visit that is not what was recorded, and why."""

    depot: str
    visit: str
    reason: str


def broken_chains(connection: Connection) -> Iterator[journal.Break]:
    """The first broken line of every chain that has one."""
    for stream in feed.streams(connection):
        if (found := journal.verify(connection, stream)) is not None:
            yield found


def mismatched_visits(connection: Connection) -> Iterator[Mismatch]:
    """Stored visits that differ from their own digest or from the journal's, that are missing or too many."""
    for depot in feed.streams(connection):
        stored = _recomputed(connection, depot)
        recorded = _recorded(connection, depot)
        for visit in sorted(stored.keys() | recorded.keys()):
            reason = _reason(stored.get(visit), recorded.get(visit))
            if reason is not None:
                yield Mismatch(depot, visit, reason)


def _reason(stored: tuple[str, str] | None, recorded: str | None) -> str | None:
    """`stored` is (digest kept, digest of what is kept)."""
    if stored is None:
        return "the journal records it, but it is not stored"
    kept, computed = stored
    if recorded is None:
        return "it is stored, but the journal does not record it"
    if kept != computed:
        return "what is stored does not match its digest"
    if kept != recorded:
        return "its digest is not the one the journal records"
    return None


def _recorded(connection: Connection, depot: str) -> dict[str, str]:
    """visit → digest, by the journal."""
    found = {}
    for line in journal.lines(connection, depot, subject_kind="visit"):
        found[line["subject_name"]] = json.loads(line["content"])["digest"]
    return found


def _recomputed(connection: Connection, depot: str) -> dict[str, tuple[str, str]]:
    """visit → (digest kept, digest of what is kept)."""
    visits = sa.select(_visit).where(_visit.c.depot == depot)
    readings = sa.select(_reading).where(_reading.c.depot == depot).order_by(_reading.c.visit)
    given = {
        visit: tuple(_given(row) for row in rows)
        for visit, rows in groupby(connection.execute(readings), key=lambda row: str(row.visit))
    }
    return {
        row.visit: (
            row.digest,
            visit_content.digest(visit_records.draft_of(row, given.get(row.visit, ()))),
        )
        for row in connection.execute(visits)
    }


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
