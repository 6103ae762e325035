"""What is done to editions of limit books: drafted, edited, issued by a second holder, withdrawn.

An issued edition never changes; what it says and until when it holds is decided for later days only.
Reading them is in `books`.
"""

from __future__ import annotations

from collections.abc import Iterable
from datetime import date, datetime, timedelta
from importlib import resources
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Row
from sqlalchemy.exc import IntegrityError

from service.application import books, status
from service.application.book_content import Content, Draft, unit_faults
from service.application.books import EditionRecord
from service.errors import ConflictError, Fault, NotAcceptableError, NotFoundError, StaleError
from service.records import bulk, journal
from service.records.engine import digest_of
from service.records.tables import BookEdition, Depot, LimitBook, SectionVersion
from service.records.unit_of_work import Transaction
from service.rules import limits
from service.rules.limits import BookFault
from service.rules.words import EditionState

_edition = BookEdition.__table__  # type: ignore[attr-defined]
_book = LimitBook.__table__  # type: ignore[attr-defined]
_depot = Depot.__table__  # type: ignore[attr-defined]
_version = SectionVersion.__table__  # type: ignore[attr-defined]

EARLIEST_ZONE = timedelta(hours=14)
"""Where a day begins first; a day later than that zone's today is later than every depot's."""


def draft(tx: Transaction, new: Draft) -> EditionRecord:
    """Keep a new edition as a draft, and its book if there is none of that name yet.

    Raises NotAcceptableError naming every fault of the content, ConflictError if the edition is there.
    """
    content = new.content()
    text = checked(new.book, new.edition, content)
    bulk.insert(
        tx.connection,
        _book,
        [{"book": new.book, "title": new.title, "created_at": tx.now}],
        "ON CONFLICT DO NOTHING",
    )
    values = {
        "book": new.book,
        "edition": new.edition,
        "state": EditionState.DRAFT.value,
        "content": text,
        "digest": digest_of(text),
        "version": 1,
        "drafted_at": tx.now,
        "drafted_by": tx.actor.holder,
    }
    try:
        tx.connection.execute(sa.insert(_edition).values(values))
    except IntegrityError as error:
        raise ConflictError("This book has an edition of that name already.") from error
    return _told(tx, new.book, new.edition, "edition_drafted", ())


def edit(tx: Transaction, book: str, edition: str, content: Content, *, expected: int) -> EditionRecord:
    """Replace what a draft says. Whoever edits it counts among those who drafted it.

    Raises StaleError if `expected` is not its version, ConflictError if it is no draft any more.
    """
    row = _locked(tx, book, edition, expected)
    _must_be(row, EditionState.DRAFT, "Only a draft can be edited: an issued edition never changes.")
    text = checked(book, edition, content)
    holders = row.drafted_by.split("\n")
    if tx.actor.holder not in holders:
        holders.append(tx.actor.holder)
    _update(tx, row, content=text, digest=digest_of(text), drafted_by="\n".join(holders))
    return _told(tx, book, edition, "edition_edited", ())


def issue(tx: Transaction, book: str, edition: str, effective_on: date, *, expected: int) -> EditionRecord:
    """Put a draft in force from a later day on, by a holder who had no part in drafting it.

    Rejudges every depot that uses the book, whose statuses now hold no longer than until the day before.
    """
    depots = _lock_depots(tx)
    row = _locked(tx, book, edition, expected)
    _must_be(row, EditionState.DRAFT, "Only a draft can be issued.")
    if tx.actor.holder in row.drafted_by.split("\n"):
        reason = "the holder of this key drafted or edited it"
        raise ConflictError(
            "Whoever drafted or edited an edition cannot issue it: a second holder does.",
            (Fault("second_holder", reason),),
            kind="second-holder",
        )
    _must_be_later(tx.now, effective_on, "/effective_on")
    taken = sa.select(_edition.c.edition).where(
        _edition.c.book == book, _edition.c.effective_on == effective_on
    )
    if tx.connection.execute(taken).first() is not None:
        fault = Fault("day_taken", "another edition of this book takes effect on that day", "/effective_on")
        raise NotAcceptableError("Two editions cannot take effect on one day.", (fault,))
    checked(book, edition, Content.model_validate_json(row.content))
    _update(
        tx,
        row,
        state=EditionState.ISSUED.value,
        effective_on=effective_on,
        issued_at=tx.now,
        issued_by=tx.actor.holder,
    )
    return _told(tx, book, edition, "edition_issued", depots)


def withdraw(tx: Transaction, book: str, edition: str, withdrawn_on: date, *, expected: int) -> EditionRecord:
    """Take an issued edition out of force from a later day on; the one before it does not come back."""
    depots = _lock_depots(tx)
    row = _locked(tx, book, edition, expected)
    _must_be(row, EditionState.ISSUED, "Only an issued edition can be withdrawn.")
    _must_be_later(tx.now, withdrawn_on, "/withdrawn_on")
    _update(
        tx,
        row,
        state=EditionState.WITHDRAWN.value,
        withdrawn_on=withdrawn_on,
        withdrawn_at=tx.now,
        withdrawn_by=tx.actor.holder,
    )
    return _told(tx, book, edition, "edition_withdrawn", depots)


def bundled() -> tuple[Draft, ...]:
    """The editions that come with the service, in order of their file names."""
    files = sorted(resources.files("service.books").iterdir(), key=lambda file: file.name)
    texts = [file.read_text("utf-8") for file in files if file.name.endswith(".json")]
    return tuple(Draft.model_validate_json(text) for text in texts)


def load_bundled(tx: Transaction) -> tuple[tuple[str, str], ...]:
    """Draft the bundled editions that are not there yet; (book, edition) of those drafted now."""
    names = sa.select(_edition.c.book, _edition.c.edition)
    known = {(row.book, row.edition) for row in tx.connection.execute(names)}
    missing = [new for new in bundled() if (new.book, new.edition) not in known]
    for new in missing:
        draft(tx, new)
    return tuple((new.book, new.edition) for new in missing)


def checked(book: str, edition: str, content: Content) -> str:
    """The text to keep of a content that is consistent.

    Raises NotAcceptableError naming every fault with its pointer.
    """
    faults: Iterable[BookFault] = tuple(unit_faults(content))
    text = journal.canonical(content.model_dump(mode="json"))
    if not faults:
        made = books.edition_of(book, edition, EditionState.DRAFT.value, None, None, digest_of(text), text)
        faults = limits.faults(made)
    if faults:
        raise NotAcceptableError(
            "The book is not consistent; nothing was stored.",
            tuple(Fault(fault.code, fault.reason, _pointer(fault.path)) for fault in faults),
        )
    return text


def _pointer(path: Iterable[str | int]) -> str:
    """A rule's path as a pointer into the content, where one member goes by another name."""
    return "".join(f"/{'ballast' if part == 'ballast_dry' else part}" for part in path)


def _locked(tx: Transaction, book: str, edition: str, expected: int) -> Row[Any]:
    query = sa.select(_edition).where(_edition.c.book == book, _edition.c.edition == edition)
    row = tx.connection.execute(query.with_for_update()).one_or_none()
    if row is None:
        raise NotFoundError("There is no such edition of a limit book.")
    if row.version != expected:
        raise StaleError("This edition was changed since it was read: read it again.")
    return row


def _must_be(row: Row[Any], state: EditionState, otherwise: str) -> None:
    if row.state != state:
        raise ConflictError(f"{otherwise} This one is {row.state}.")


def _must_be_later(now: datetime, day: date, pointer: str) -> None:
    if day <= (now + EARLIEST_ZONE).date():
        reason = "must be later than today in every time zone, so that no day that has begun is judged anew"
        raise NotAcceptableError("The day is not late enough.", (Fault("not_a_later_day", reason, pointer),))


def _update(tx: Transaction, row: Row[Any], **values: Any) -> None:
    where = (_edition.c.book == row.book, _edition.c.edition == row.edition)
    tx.connection.execute(sa.update(_edition).where(*where).values(version=row.version + 1, **values))


def _lock_depots(tx: Transaction) -> tuple[Row[Any], ...]:
    """Lock every depot, so that none begins to use the book meanwhile."""
    names = tx.connection.execute(sa.select(_depot.c.depot).order_by(_depot.c.depot)).scalars().all()
    return tuple(tx.lock_depot(name, exclusive=True) for name in names)


def _told(tx: Transaction, book: str, edition: str, action: str, depots: Iterable[Row[Any]]) -> EditionRecord:
    """Write what the edition is now to the journal of every depot that uses it and of the service."""
    record = books.get(tx.connection, book, edition)
    content, name = books.wire(record), f"{book}/{edition}"
    using = set(
        tx.connection.execute(sa.select(_version.c.depot).where(_version.c.book == book).distinct()).scalars()
    )
    for row in depots:
        if row.depot in using:
            entry = journal.Entry(action, "edition", name, None, content)
            status.rejudge_and_append(tx, row, None, [entry])
    tx.append(journal.SERVICE, [journal.Entry(action, "edition", name, (), content)])
    return record
