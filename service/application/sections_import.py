"""Record a whole file of sections: all of it or nothing, every bad line named.

A line whose section is new creates it; one that says something else than the register edits it, if it
names the newest version; one that says what is stored changes nothing. What a file is, is in `sections_csv`.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from datetime import date, datetime
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import sections, status
from service.application.section_content import Content
from service.application.sections import Known, Recorded
from service.application.sections_csv import at
from service.errors import Fault, NotAcceptableError
from service.records import bulk, journal
from service.records.tables import Section, SectionVersion
from service.records.unit_of_work import Transaction, local_day

_section = Section.__table__  # type: ignore[attr-defined]
_version = SectionVersion.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Item:
    """One line of a file. `version` is the one it was made from, None for a new section."""

    line: int
    section: str
    version: int | None
    content: Content


@dataclass(frozen=True, slots=True)
class File:
    """A file's sections. `missing` are the columns it lacks: then it can only bring new ones."""

    items: tuple[Item, ...]
    missing: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Outcome:
    """What an import did, or would do. `sequence` is the journal's after it, None if nothing is written."""

    created: int
    changed: int
    unchanged: int
    sequence: int | None


@dataclass(frozen=True, slots=True)
class _Change:
    item: Item
    stored: Recorded | None


def rehearse(connection: Connection, depot: str, file: File, now: datetime) -> Outcome:
    """Say what `run` would do, or raise what it would. Read in a snapshot."""
    row = status.depot_row(connection, depot)
    changes = _plan(connection, depot, file, local_day(now, row.time_zone))
    return _outcome(file, changes, None)


def run(tx: Transaction, depot: str, file: File) -> Outcome:
    """Record every line.

    Raises
    ------
    NotAcceptableError
        Naming every bad line with its column.
    """
    row = tx.lock_depot(depot, exclusive=True)
    today = local_day(tx.now, row.time_zone)
    changes = _plan(tx.connection, depot, file, today)
    if not changes:
        return _outcome(file, changes, None)
    return _outcome(file, changes, _write(tx, row, changes, today))


def _outcome(file: File, changes: Sequence[_Change], sequence: int | None) -> Outcome:
    created = sum(1 for change in changes if change.stored is None)
    return Outcome(created, len(changes) - created, len(file.items) - len(changes), sequence)


def _plan(connection: Connection, depot: str, file: File, today: date) -> list[_Change]:
    """The lines that change something; raises if one cannot be taken."""
    stored = _stored(connection, depot)
    known = sections.known_to(connection, depot, [item.content for item in file.items])
    known = replace(known, sections=known.sections | {item.section for item in file.items})
    folded = {name.casefold(): name for name in stored}
    changes: list[_Change] = []
    found: list[Fault] = []
    lines: dict[str, int] = {}
    for item in file.items:
        fold = item.section.casefold()
        first = lines.setdefault(fold, item.line)
        if first != item.line:
            reason = f"this section is on line {first} already"
            found.append(Fault("duplicate", reason, line=item.line, column="section"))
            continue
        change = _Change(item, stored.get(folded.get(fold, "")))
        same = stored.get(item.section)
        if same is not None and sections.unchanged(same.content, item.content):
            continue
        changes.append(change)
        found += [at(fault, item.line) for fault in _faults(change, known, file.missing, today)]
    if found:
        raise NotAcceptableError("The file cannot be imported; nothing was written.", tuple(found))
    return changes


def _faults(change: _Change, known: Known, missing: Sequence[str], today: date) -> Iterator[Fault]:
    item, stored = change.item, change.stored
    if stored is None:
        if item.version is not None:
            yield Fault("unknown_section", "there is no such section; a new one has no version", "/version")
    elif stored.section != item.section:
        reason = "names are unique without regard to case; the depot has this one in another"
        yield Fault("name_taken", reason, "/section")
    elif item.version != stored.version:
        reason = f"the depot has this section in version {stored.version}: export it again"
        yield Fault("stale", reason, "/version")
    elif missing:
        reason = f"a section that exists is edited with every column; {missing[0]} is missing"
        yield Fault("column_missing", reason, "/section")
    content = stored.content if stored is not None else None
    yield from sections.faults(item.section, item.content, known, content, today)


def _stored(connection: Connection, depot: str) -> dict[str, Recorded]:
    rows = connection.execute(sections.newest.where(_section.c.depot == depot))
    return {row.section: sections.of_row(row, row.sequence) for row in rows}


def _write(tx: Transaction, depot_row: Row[Any], changes: Sequence[_Change], today: date) -> int:
    depot = depot_row.depot
    kept = [
        Recorded(
            depot,
            change.item.section,
            1 if change.stored is None else change.stored.version + 1,
            tx.now,
            tx.actor.holder,
            0,
            sections.dated(change.item.content, today),
        )
        for change in changes
    ]
    new = [sections.section_row(tx, depot, one.section) for one in kept if one.version == 1]
    bulk.insert(tx.connection, _section, new)
    newer = [{"at": one.section, "to": one.version} for one in kept if one.version > 1]
    if newer:
        same = sa.and_(_section.c.depot == depot, _section.c.section == sa.bindparam("at"))
        tx.connection.execute(sa.update(_section).where(same).values(version=sa.bindparam("to")), newer)
    bulk.insert(tx.connection, _version, [sections.version_row(one) for one in kept])
    moved = _moved(tx.connection, depot, changes)
    entries = [
        journal.Entry(
            "section_created" if one.version == 1 else "section_changed",
            "section",
            one.section,
            tuple(sorted({one.section, *moved[one.section]})),
            one.document(),
        )
        for one in kept
    ]
    touched = sorted({name for entry in entries for name in entry.sections or ()})
    return status.rejudge_and_append(tx, depot_row, touched, entries)


def _moved(connection: Connection, depot: str, changes: Sequence[_Change]) -> dict[str, set[str]]:
    """Section → the existing neighbours towards which it says something else than before."""
    towards = {
        change.item.section: sections.towards_changed(
            change.stored.content if change.stored is not None else None, change.item.content
        )
        for change in changes
    }
    if not any(towards.values()):
        return towards
    query = sa.select(_section.c.section).where(_section.c.depot == depot)
    existing = frozenset(connection.execute(query).scalars())
    return {name: set(neighbours & existing) for name, neighbours in towards.items()}
