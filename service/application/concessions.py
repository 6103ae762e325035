"""Concessions: permission, until a date, to work outside one limit or to defer one interval.

Granted once by a second person and perhaps ended early; never changed. How one shows in a verdict is
a matter of the rules.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields
from datetime import date, datetime
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import books, sections, status
from service.application.section_content import TEST_POINT, json_value
from service.errors import ConflictError, Fault, NotAcceptableError, NotFoundError
from service.records import journal
from service.records.journal import instant_text
from service.records.tables import Concession as ConcessionRow
from service.records.unit_of_work import Transaction, local_day
from service.rules.limits import Edition, Limit, in_force
from service.rules.words import Hazard

_concession = ConcessionRow.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Content:
    """What is asked for. Exactly one of `limit` and `task`; allowed values in the base unit.

    `approved_by` may be stated, but is the holder of the key that grants it.
    """

    section: str
    limit: str | None
    task: str | None
    test_point: str | None
    allowed_min: float | None
    allowed_max: float | None
    conditions: str
    protection: str | None
    asked_by: str
    approved_by: str | None
    from_on: date
    until_on: date


@dataclass(frozen=True, slots=True)
class Concession:
    """A concession as granted and, once ended, how."""

    depot: str
    concession: str
    version: int
    content: Content
    granted_at: datetime
    granted_by: str
    ended_on: date | None
    ended_at: datetime | None
    ended_by: str | None
    ended_why: str | None

    def document(self) -> dict[str, Any]:
        """The concession as plain JSON, as journal and wire show it."""
        said: dict[str, Any] = json_value(self.content)
        names = {"depot": self.depot, "concession": self.concession, "version": self.version}
        return (
            names
            | said
            | {
                "granted_at": instant_text(self.granted_at),
                "granted_by": self.granted_by,
                "ended_on": json_value(self.ended_on),
                "ended_at": None if self.ended_at is None else instant_text(self.ended_at),
                "ended_by": self.ended_by,
                "ended_why": self.ended_why,
            }
        )


_PLAIN = tuple(field.name for field in fields(Content) if field.name != "limit")
_FACTS = ("granted_at", "granted_by", "ended_on", "ended_at", "ended_by", "ended_why")


def get(connection: Connection, depot: str, concession: str) -> Concession:
    """One concession; NotFoundError if the depot has none of this id."""
    query = sa.select(_concession).where(_concession.c.depot == depot)
    row = connection.execute(query.where(_concession.c.concession == concession)).one_or_none()
    if row is None:
        raise NotFoundError("There is no such concession in this depot.")
    return _of_row(row)


def page(connection: Connection, depot: str, *, after: str | None, most: int) -> list[Concession]:
    """Up to `most` concessions by id from beyond `after`, ended ones among them."""
    query = sa.select(_concession).where(_concession.c.depot == depot).order_by(_concession.c.concession)
    if after is not None:
        query = query.where(_concession.c.concession > after)
    return [_of_row(row) for row in connection.execute(query.limit(most))]


def grant(tx: Transaction, depot: str, concession: str, content: Content) -> tuple[Concession, bool]:
    """Grant a concession, once for its id; whether it is new.

    Raises
    ------
    ConflictError
        If the id was used for another one, or this one is stored with other content.
    NotAcceptableError
        If it does not name an existing limit or task, two people, and what protects meanwhile.
    """
    row = tx.lock_depot(depot)
    if not tx.lock_sections(depot, [content.section]):
        fault = Fault("unknown_section", "the depot has no section of this name", "/section")
        raise NotAcceptableError("The section is not known in this depot.", (fault,))
    stored = _stored(tx.connection, depot, concession, content)
    if stored is not None:
        return stored, False
    edition = _edition(tx.connection, depot, content, local_day(tx.now, row.time_zone))
    found = tuple(_faults(content, edition, tx.actor.holder))
    if found:
        raise NotAcceptableError("The concession cannot be granted like this; nothing was written.", found)
    values = {name: getattr(content, name) for name in _PLAIN}
    values |= {"limit_name": content.limit, "approved_by": tx.actor.holder, "version": 1}
    values |= {"granted_at": tx.now, "granted_by": tx.actor.holder}
    names = {"depot": depot, "concession": concession}
    try:
        tx.connection.execute(sa.insert(_concession).values(names | values))
    except sa.exc.IntegrityError as error:
        raise ConflictError("This id was used for another concession.") from error
    granted = get(tx.connection, depot, concession)
    _judge(tx, row, granted, "concession_granted")
    return granted, True


def end(tx: Transaction, depot: str, concession: str, why: str) -> Concession:
    """End a concession today, before its time. Ending it once more changes nothing.

    Raises
    ------
    NotFoundError
        If the depot has none of this id.
    ConflictError
        If it has run out already.
    """
    row = tx.lock_depot(depot)
    tx.lock_sections(depot, [get(tx.connection, depot, concession).content.section])
    stored = get(tx.connection, depot, concession)
    if stored.ended_on is not None:
        return stored
    today = local_day(tx.now, row.time_zone)
    if stored.content.until_on < today:
        raise ConflictError("The concession has run out already.")
    ended = {"ended_on": today, "ended_at": tx.now, "ended_by": tx.actor.holder, "ended_why": why}
    this = sa.and_(_concession.c.depot == depot, _concession.c.concession == concession)
    tx.connection.execute(sa.update(_concession).where(this).values(ended | {"version": stored.version + 1}))
    kept = get(tx.connection, depot, concession)
    _judge(tx, row, kept, "concession_ended")
    return kept


def _judge(tx: Transaction, depot_row: Row[Any], kept: Concession, action: str) -> None:
    section = kept.content.section
    entry = journal.Entry(action, "concession", kept.concession, (section,), kept.document())
    status.rejudge_and_append(tx, depot_row, [section], [entry])


def _stored(connection: Connection, depot: str, concession: str, content: Content) -> Concession | None:
    try:
        stored = get(connection, depot, concession)
    except NotFoundError:
        return None
    given = json_value(content) | {"approved_by": content.approved_by or stored.content.approved_by}
    if given != json_value(stored.content):
        raise ConflictError("A granted concession is not changed: end it, and grant another under a new id.")
    return stored


def _edition(connection: Connection, depot: str, content: Content, today: date) -> Edition | None:
    """The edition of the section's book that will judge when the concession begins, or judges now."""
    book = sections.get(connection, depot, content.section).content.book
    if book is None:
        return None
    editions = books.editions(connection, book)
    return in_force(editions, content.from_on) or in_force(editions, today)


def _faults(content: Content, edition: Edition | None, holder: str) -> Iterator[Fault]:
    if content.approved_by not in (None, holder):
        reason = "a concession is approved by the holder of the key that grants it"
        yield Fault("other_approver", reason, "/approved_by")
    if content.asked_by.strip().casefold() == holder.strip().casefold():
        yield Fault("same_person", "who asks for a concession does not approve it", "/asked_by")
    if content.until_on < content.from_on:
        yield Fault("out_of_order", "it ends before it begins", "/until_on")
    if (content.limit is None) == (content.task is None):
        yield Fault("limit_or_task", "name either a limit or a task", "/limit")
    elif edition is None:
        yield Fault("no_edition_in_force", "no limit book judges the section then", "/section")
    elif content.task is not None:
        yield from _task_faults(content, edition)
    else:
        yield from _limit_faults(content, edition)


def _task_faults(content: Content, edition: Edition) -> Iterator[Fault]:
    if all(task.task != content.task for task in edition.tasks):
        yield Fault("unknown_task", "the section's limit book has no task of this name", "/task")
    for member in ("test_point", "allowed_min", "allowed_max"):
        if getattr(content, member) is not None:
            yield Fault("not_of_a_task", "belongs to a limit, not to a task", f"/{member}")


def _limit_faults(content: Content, edition: Edition) -> Iterator[Fault]:
    if content.test_point is not None and TEST_POINT.match(content.test_point) is None:
        yield Fault("unknown_test_point", "feed_end, relay_end, middle or leg:<name>", "/test_point")
    limit = next((limit for limit in edition.limits if limit.limit == content.limit), None)
    if limit is None:
        yield Fault("unknown_limit", "the section's limit book has no limit of this name", "/limit")
        return
    if content.allowed_min is None and content.allowed_max is None:
        yield Fault("none_given", "say which value is allowed instead", "/allowed_min")
    yield from _relaxation_faults(content, limit)


def _relaxation_faults(content: Content, limit: Limit) -> Iterator[Fault]:
    """Each allowed value must relax a bound the limit has; relaxing a wrong-side one needs protection."""
    wrong_side = False
    for member, bound, sign in (("allowed_min", limit.minimum, 1), ("allowed_max", limit.maximum, -1)):
        allowed = getattr(content, member)
        if allowed is None:
            continue
        if bound is None:
            yield Fault("no_such_bound", "the limit has no bound on this side", f"/{member}")
            continue
        wrong_side = wrong_side or bound.hazard is Hazard.WRONG_SIDE
        if limit.relative_to is None and sign * (allowed - bound.value) >= 0:
            yield Fault("no_relaxation", "allows no more than the limit does", f"/{member}")
    if wrong_side and not (content.protection or "").strip():
        reason = "outside a wrong-side limit a train may not be detected: say what protects meanwhile"
        yield Fault("protection_missing", reason, "/protection")


def _of_row(row: Row[Any]) -> Concession:
    values = {name: getattr(row, name) for name in _PLAIN}
    content = Content(limit=row.limit_name, **values)
    facts = {name: getattr(row, name) for name in _FACTS}
    return Concession(row.depot, row.concession, row.version, content, **facts)
