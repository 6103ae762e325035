"""Sections of the register and their versions: create, edit, read one.

A version is never changed. Lists are in `section_lists`, whole files in `sections_import`; what a
record may say is in `section_content`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from dataclasses import replace as with_changes
from datetime import date, datetime
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import section_content, status
from service.application.section_content import Content, json_value
from service.errors import ConflictError, Fault, NotAcceptableError, NotFoundError, StaleError
from service.records import journal
from service.records.tables import LimitBook, Section, SectionVersion
from service.records.tables import Status as StatusRow
from service.records.unit_of_work import Transaction, local_day
from service.rules.words import SectionState

_section = Section.__table__  # type: ignore[attr-defined]
_version = SectionVersion.__table__  # type: ignore[attr-defined]
_status = StatusRow.__table__  # type: ignore[attr-defined]
_book = LimitBook.__table__  # type: ignore[attr-defined]

NEXT_STATES: Mapping[SectionState, frozenset[SectionState]] = {
    SectionState.PLANNED: frozenset(SectionState),
    SectionState.IN_USE: frozenset(SectionState) - {SectionState.PLANNED},
    SectionState.OUT_OF_USE: frozenset(SectionState) - {SectionState.PLANNED},
    SectionState.RECOVERED: frozenset({SectionState.RECOVERED}),
}
"""Recovered is final, and what was once in use is no longer planned."""


@dataclass(frozen=True, slots=True)
class Recorded:
    """One version of a section. `sequence` is the journal's when its record or status last changed."""

    depot: str
    section: str
    version: int
    recorded_at: datetime
    recorded_by: str
    sequence: int
    content: Content

    def document(self) -> dict[str, Any]:
        """The record as plain JSON, as journal and wire show it; without `sequence`."""
        said: dict[str, Any] = json_value(self.content)
        return {"depot": self.depot, "section": self.section, "version": self.version} | said


def of_row(row: Row[Any], sequence: int) -> Recorded:
    """The record in a row of `section_version`."""
    content = section_content.of_row(row)
    return Recorded(row.depot, row.section, row.version, row.recorded_at, row.recorded_by, sequence, content)


newest = (
    sa.select(_version, sa.func.coalesce(_status.c.sequence, 0).label("sequence"))
    .join_from(
        _section,
        _version,
        sa.and_(
            _version.c.depot == _section.c.depot,
            _version.c.section == _section.c.section,
            _version.c.version == _section.c.version,
        ),
    )
    .outerjoin(_status, sa.and_(_status.c.depot == _section.c.depot, _status.c.section == _section.c.section))
)
"""The newest version of sections, which is the one that holds: none is recorded before its day."""


def get(connection: Connection, depot: str, section: str) -> Recorded:
    """A section's present record.

    Raises
    ------
    NotFoundError
        If the depot has no such section.
    """
    query = newest.where(_section.c.depot == depot, _section.c.section == section)
    row = connection.execute(query).one_or_none()
    if row is None:
        raise NotFoundError("There is no such section in this depot.")
    return of_row(row, row.sequence)


def versions(
    connection: Connection, depot: str, section: str, *, after: int | None, most: int
) -> list[Recorded]:
    """Up to `most` versions of a section beyond version `after`, oldest first.

    Raises
    ------
    NotFoundError
        If the depot has no such section.
    """
    sequence = get(connection, depot, section).sequence
    query = sa.select(_version).where(_version.c.depot == depot, _version.c.section == section)
    if after is not None:
        query = query.where(_version.c.version > after)
    rows = connection.execute(query.order_by(_version.c.version).limit(most))
    return [of_row(row, sequence) for row in rows]


def create(tx: Transaction, depot: str, section: str, content: Content) -> Recorded:
    """Record a new section.

    Raises
    ------
    NotAcceptableError
        If the content contradicts itself or names what does not exist.
    ConflictError
        If the depot has, or ever had, a section of this name in any case.
    """
    row = tx.lock_depot(depot)
    today = local_day(tx.now, row.time_zone)
    content = dated(content, today)
    refuse(section, content, known_to(tx.connection, depot, [content]), None, today)
    moved = locked_neighbours(tx, depot, None, content)
    try:
        tx.connection.execute(sa.insert(_section).values(section_row(tx, depot, section)))
    except sa.exc.IntegrityError as error:
        fault = Fault("name_taken", "names are unique without regard to case and never reused", "/section")
        raise ConflictError("The depot has a section of this name already.", (fault,)) from error
    return _store(tx, row, section, 1, content, moved, "section_created")


def edit(tx: Transaction, depot: str, section: str, version: int, content: Content) -> Recorded:
    """Record the next version of a section, whose newest is `version`.

    Content that says what is stored already stores nothing.

    Raises
    ------
    NotFoundError
        If the depot has no such section.
    StaleError
        If `version` is not the newest.
    NotAcceptableError
        If the content contradicts itself or what is stored, or names what does not exist.
    """
    row = tx.lock_depot(depot)
    stored = get(tx.connection, depot, section)
    moved = locked_neighbours(tx, depot, stored, content)
    if version != stored.version or get(tx.connection, depot, section).version != version:
        raise StaleError("The section was changed since it was read.")
    today = local_day(tx.now, row.time_zone)
    if unchanged(stored.content, content):
        return stored
    content = dated(content, today)
    refuse(section, content, known_to(tx.connection, depot, [content]), stored.content, today)
    newer = sa.update(_section).where(_section.c.depot == depot, _section.c.section == section)
    tx.connection.execute(newer.values(version=version + 1))
    return _store(tx, row, section, version + 1, content, moved, "section_changed")


def _store(
    tx: Transaction,
    depot_row: Row[Any],
    section: str,
    version: int,
    content: Content,
    moved: list[str],
    action: str,
) -> Recorded:
    depot = depot_row.depot
    stored = Recorded(depot, section, version, tx.now, tx.actor.holder, 0, content)
    tx.connection.execute(sa.insert(_version).values(version_row(stored)))
    touched = sorted({section, *moved})
    entry = journal.Entry(action, "section", section, tuple(touched), stored.document())
    return with_changes(stored, sequence=status.rejudge_and_append(tx, depot_row, touched, [entry]))


def section_row(tx: Transaction, depot: str, section: str) -> dict[str, Any]:
    """The row of a new section."""
    names = {"depot": depot, "section": section, "folded": section.casefold()}
    return names | {"version": 1, "created_at": tx.now}


def version_row(stored: Recorded) -> dict[str, Any]:
    """The row of one version."""
    names = {"depot": stored.depot, "section": stored.section, "version": stored.version}
    when = {"recorded_at": stored.recorded_at, "recorded_by": stored.recorded_by}
    return names | when | section_content.columns(stored.content)


def dated(content: Content, today: date) -> Content:
    """The content with the day it holds from, which is today where none is stated."""
    return with_changes(content, valid_from_on=content.valid_from_on or today)


def unchanged(stored: Content, content: Content) -> bool:
    """Whether content says what is stored, a day not stated being no change."""
    day = content.valid_from_on or stored.valid_from_on
    return bool(json_value(stored) == json_value(with_changes(content, valid_from_on=day)))


@dataclass(frozen=True, slots=True)
class Known:
    """What exists of that which contents name."""

    books: frozenset[str]
    sections: frozenset[str]


def known_to(connection: Connection, depot: str, contents: list[Content]) -> Known:
    """Look up the books and predecessors that contents name."""
    books = {content.book for content in contents if content.book is not None}
    sections = {content.succeeds for content in contents if content.succeeds is not None}
    found_books = connection.execute(sa.select(_book.c.book).where(_book.c.book.in_(books))).scalars()
    query = sa.select(_section.c.section).where(_section.c.depot == depot, _section.c.section.in_(sections))
    return Known(frozenset(found_books), frozenset(connection.execute(query).scalars()))


def refuse(section: str, content: Content, known: Known, stored: Content | None, today: date) -> None:
    """Raise NotAcceptableError if a section's content cannot be recorded after `stored`."""
    found = tuple(faults(section, content, known, stored, today))
    if found:
        raise NotAcceptableError("The section cannot be recorded like this; nothing was written.", found)


def faults(
    section: str, content: Content, known: Known, stored: Content | None, today: date
) -> Iterator[Fault]:
    """What speaks against recording a section's content after `stored`; pointers from the section."""
    yield from section_content.faults(section, content)
    if content.book is not None and content.book not in known.books:
        yield Fault("unknown_book", "there is no limit book of this name", "/book")
    if content.succeeds is not None and content.succeeds not in known.sections:
        yield Fault("unknown_section", "the depot has no section of this name", "/succeeds")
    valid_from_on = content.valid_from_on or today
    if valid_from_on > today:
        yield Fault("in_the_future", "a planned change is recorded on its day", "/valid_from_on")
    started = content.state is not SectionState.PLANNED
    if started and content.commissioned_on is not None and content.commissioned_on > today:
        yield Fault("in_the_future", "only a planned section is commissioned later", "/commissioned_on")
    if stored is None or stored.state is content.state:
        return
    if content.state not in NEXT_STATES[stored.state]:
        yield Fault(
            "final_state", f"a section does not become {content.state} after {stored.state}", "/state"
        )
    if valid_from_on < today and valid_from_on <= (stored.valid_from_on or today):
        reason = "another state holds from a day of its own, after that of the state before"
        yield Fault("state_day", reason, "/valid_from_on")


def locked_neighbours(tx: Transaction, depot: str, stored: Recorded | None, content: Content) -> list[str]:
    """Lock a section and the neighbours that its new boundaries judge anew; the neighbours' names."""
    moved = towards_changed(stored.content if stored else None, content)
    locked = tx.lock_sections(depot, [*moved, *([stored.section] if stored else [])])
    return sorted(moved & locked.keys())


def towards_changed(stored: Content | None, content: Content) -> set[str]:
    """The neighbours towards which a section says something else than before."""
    before, after = _towards(stored), _towards(content)
    return {name for name in before.keys() | after.keys() if before.get(name) != after.get(name)}


def _towards(content: Content | None) -> dict[str, set[tuple[str, str | None]]]:
    found: dict[str, set[tuple[str, str | None]]] = {}
    for one in content.adjacent if content is not None else ():
        if one.neighbour is not None:
            found.setdefault(one.neighbour, set()).add((one.boundary, one.polarity))
    return found
