"""All that posting visits reads, with the locks it takes, in one round trip where it can.

Editions and instruments are remembered for one epoch of the depot: whatever changes them takes the depot's
exclusive lock and begins another. What is made of it is in `visits`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from functools import lru_cache
from typing import Any, NamedTuple

import sqlalchemy as sa

from service.application import books, facts
from service.application.fact_queries import Found, Moment, ask, ask_versions, find, found, versions_of
from service.application.facts import Register
from service.application.visit_content import Draft
from service.errors import NotFoundError
from service.records import several
from service.records.several import Asked, among
from service.records.tables import Depot, Section, VisitRow
from service.records.unit_of_work import Transaction, local_day
from service.rules import facts as rules
from service.rules.limits import Edition

_depot = Depot.__table__  # type: ignore[attr-defined]
_section = Section.__table__  # type: ignore[attr-defined]
_visit = VisitRow.__table__  # type: ignore[attr-defined]


class Known(NamedTuple):
    """A visit already stored that a draft repeats, replaces or is replaced by."""

    visit: str
    section: str
    replaces: str | None
    digest: str
    received_at: datetime
    holder: str
    found_outside: bool
    clock_offset_s: int | None


@dataclass(frozen=True, slots=True)
class Read:
    """What was read under the locks."""

    moment: Moment
    register: Register
    found: Found
    known: Mapping[str, Known]


@dataclass(frozen=True, slots=True)
class _Kept:
    """What is remembered of a depot: true for one epoch."""

    epoch: int
    time_zone: str
    editions: Mapping[str, tuple[Edition, ...]]
    instruments: Mapping[str, rules.Instrument]


def lock_and_read(tx: Transaction, depot: str, drafts: Sequence[Draft]) -> Read:
    """Lock the depot as shared and the drafts' sections, then read.

    Raises NotFoundError if there is no such depot.
    """
    names = sorted({draft.section for draft in drafts})
    kept = tx.memory.get(depot)
    read = None if kept is None else _read(tx, depot, drafts, names, kept)
    if read is None:
        row = tx.lock_depot(depot)
        tx.lock_sections(depot, names)
        read = _read(tx, depot, drafts, names, _remember(tx, row, names))
        assert read is not None
    return read


def _remember(tx: Transaction, row: Any, names: Sequence[str]) -> _Kept:
    """Read anew what is remembered; the depot's row is locked as shared, so its epoch stands."""
    moment = Moment(row.depot, row.time_zone, local_day(tx.now, row.time_zone), None, present=True)
    before = tx.memory.get(row.depot)
    wanted = facts.register(tx.connection, moment, names).editions.keys()
    if before is not None and before.epoch == row.epoch:
        wanted = wanted | before.editions.keys()
    kept = _Kept(
        row.epoch,
        row.time_zone,
        books.editions_of_books(tx.connection, sorted(wanted), None),
        facts.instruments_of(tx.connection, moment, None),
    )
    tx.memory[row.depot] = kept
    return kept


def _read(
    tx: Transaction, depot: str, drafts: Sequence[Draft], names: Sequence[str], kept: _Kept
) -> Read | None:
    """None if what is kept does not hold any more, or not for these sections."""
    moment = Moment(depot, kept.time_zone, local_day(tx.now, kept.time_zone), None, present=True)
    history = Register({}, kept.editions, {}).history
    ids = sorted({draft.visit for draft in drafts})
    named = sorted({*ids, *(draft.replaces for draft in drafts if draft.replaces is not None)})
    statements = _statements(tx.connection.dialect.name)
    depot_rows, _, version_rows, *rows, known_rows = several.run(
        tx.connection,
        Asked(statements.depot, {"depot": depot}),
        Asked(statements.sections, {"depot": depot, "names": list(names)}),
        ask_versions(tx.connection, moment, names),
        *ask(tx.connection, moment, names, history),
        Asked(statements.known, {"depot": depot, "named": named, "ids": ids}),
    )
    if not depot_rows:
        raise NotFoundError("There is no such depot.")
    versions = versions_of(version_rows)
    if depot_rows[0][0] != kept.epoch or facts.books_named(versions) - kept.editions.keys():
        return None
    what = found(moment, rows) or find(tx.connection, moment, names, history)
    register = Register(versions, kept.editions, kept.instruments)
    return Read(moment, register, what, {row[0]: Known(*row) for row in known_rows})


class _Statements(NamedTuple):
    depot: sa.Select[Any]
    sections: sa.Select[Any]
    known: sa.Select[Any]


@lru_cache(maxsize=2)
def _statements(dialect: str) -> _Statements:
    depot = sa.bindparam("depot", type_=sa.Text)
    locked = sa.select(_depot.c.epoch).where(_depot.c.depot == depot).with_for_update(read=True)
    sections = (
        sa.select(_section.c.section)
        .where(_section.c.depot == depot, among(_section.c.section, "names", dialect))
        .order_by(_section.c.section)
        .with_for_update()
    )
    known = sa.select(*(_visit.c[name] for name in Known._fields)).where(
        _visit.c.depot == depot,
        sa.or_(among(_visit.c.visit, "named", dialect), among(_visit.c.replaces, "ids", dialect)),
    )
    return _Statements(locked, sections, known)
