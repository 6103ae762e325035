"""The register as a list: every filter a client may set, a page at a time, each row with its status.

Statuses are taken as kept; whoever asks first rolls those whose day has passed (`status.roll_due`).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import date
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import sections
from service.application.sections import Recorded
from service.records.tables import Section, SectionVersion
from service.records.tables import Status as StatusRow
from service.rules.words import CircuitKind, Compliance, Hazard, SectionState, Traction

_section = Section.__table__  # type: ignore[attr-defined]
_version = SectionVersion.__table__  # type: ignore[attr-defined]
_status = StatusRow.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Filters:
    """What a list is narrowed to; None: whatever it is. `due_before`: something falls due before that day."""

    circuit_kind: CircuitKind | None = None
    traction: Traction | None = None
    line_name: str | None = None
    state: SectionState | None = None
    compliance: Compliance | None = None
    overdue: bool | None = None
    hazard: Hazard | None = None
    due_before: date | None = None
    asset_reference: str | None = None


@dataclass(frozen=True, slots=True)
class Summary:
    """A section's status in short. `compliance` None: not judged (planned, out of use, recovered)."""

    compliance: Compliance | None
    overdue: bool
    worst_hazard: Hazard | None
    next_due_on: date | None
    holds_until: date | None
    sequence: int


@dataclass(frozen=True, slots=True)
class Listed:
    """One row of the list."""

    section: Recorded
    status: Summary


_SUMMARY = (
    _status.c.compliance,
    _status.c.overdue,
    _status.c.worst_hazard,
    _status.c.next_due_on,
    _status.c.holds_until,
    _status.c.sequence,
)


def page(
    connection: Connection, depot: str, filters: Filters, *, after: str | None, most: int
) -> list[Listed]:
    """Up to `most` sections by name from beyond `after`."""
    query = _query(depot, filters).limit(most)
    if after is not None:
        query = query.where(_status.c.section > after)
    return [_listed(row) for row in connection.execute(query)]


def every(connection: Connection, depot: str, filters: Filters) -> Iterator[Listed]:
    """All sections by name, streamed. Read in a snapshot."""
    for row in connection.execute(_query(depot, filters), execution_options={"yield_per": 1000}):
        yield _listed(row)


def _query(depot: str, filters: Filters) -> sa.Select[Any]:
    """Ordered and bounded by the status's own key: its indexes are what narrow a list."""
    conditions = [
        (_version.c.circuit_kind, filters.circuit_kind),
        (_version.c.traction, filters.traction),
        (_version.c.line_name, filters.line_name),
        (_version.c.state, filters.state),
        (_version.c.asset_reference, filters.asset_reference),
        (_status.c.compliance, filters.compliance),
        (_status.c.overdue, filters.overdue),
        (_status.c.worst_hazard, filters.hazard),
    ]
    query = (
        sa.select(_version, *_SUMMARY)
        .join_from(
            _status,
            _section,
            sa.and_(_section.c.depot == _status.c.depot, _section.c.section == _status.c.section),
        )
        .join(
            _version,
            sa.and_(
                _version.c.depot == _section.c.depot,
                _version.c.section == _section.c.section,
                _version.c.version == _section.c.version,
            ),
        )
        .where(_status.c.depot == depot)
        .where(*(column == wanted for column, wanted in conditions if wanted is not None))
        .order_by(_status.c.section)
    )
    return query if filters.due_before is None else query.where(_status.c.next_due_on < filters.due_before)


def _listed(row: Row[Any]) -> Listed:
    return Listed(
        sections.of_row(row, row.sequence),
        Summary(
            compliance=None if row.compliance is None else Compliance(row.compliance),
            overdue=row.overdue,
            worst_hazard=None if row.worst_hazard is None else Hazard(row.worst_hazard),
            next_due_on=row.next_due_on,
            holds_until=row.holds_until,
            sequence=row.sequence,
        ),
    )
