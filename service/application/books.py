"""Limit books as they are read: editions as rule objects for judging, and as records to show.

Drafting, issuing and withdrawing are in `editions`; what an edition may say is in `book_content`.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import date, datetime
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application.book_content import Content
from service.errors import NotFoundError
from service.records.journal import instant_text
from service.records.tables import BookEdition, LimitBook
from service.rules.limits import Edition
from service.rules.words import EditionState

_edition = BookEdition.__table__  # type: ignore[attr-defined]
_book = LimitBook.__table__  # type: ignore[attr-defined]

_heads = sa.select(*(column for column in _edition.c if column.name != "content"))
Key = tuple[str, str, str, date | None, date | None, str]
_kept: dict[Key, Edition] = {}
"""Editions that were issued: few, and never changed. The same object each time, since an edition keeps
what was worked out for the sections it applies to."""


def edition_of(
    book: str,
    edition: str,
    state: str,
    effective_on: date | None,
    withdrawn_on: date | None,
    digest: str,
    content_text: str,
) -> Edition:
    """The rule object of an edition, by its digest; an issued one is made once."""
    key = (book, edition, state, effective_on, withdrawn_on, digest)
    found = _kept.get(key)
    if found is not None:
        return found
    rules = Content.model_validate_json(content_text).rules()
    made = Edition(
        book=book,
        edition=edition,
        state=EditionState(state),
        effective_on=effective_on,
        withdrawn_on=withdrawn_on,
        digest=digest,
        limits=rules.limits,
        tasks=rules.tasks,
        combinations=rules.combinations,
        title=rules.title,
        dry_ballast_ohm_km=rules.dry_ballast_ohm_km,
    )
    return made if made.state is EditionState.DRAFT else _kept.setdefault(key, made)


def editions(connection: Connection, book: str, *, known_at: datetime | None = None) -> tuple[Edition, ...]:
    """All issued or withdrawn editions of a book, by effective day; as known at an instant, if given."""
    return editions_of_books(connection, [book], known_at)[book]


def editions_of_books(
    connection: Connection, books: Iterable[str], known_at: datetime | None = None
) -> dict[str, tuple[Edition, ...]]:
    """As `editions`, for several books; every name asked for is a key."""
    wanted = sorted(set(books))
    rows = connection.execute(
        _heads.where(_edition.c.book.in_(wanted), _edition.c.state != EditionState.DRAFT.value)
        .where(sa.true() if known_at is None else _edition.c.issued_at <= known_at)
        .order_by(_edition.c.book, _edition.c.effective_on, _edition.c.edition)
    ).all()
    keys = [_key(row, known_at) for row in rows]
    texts = _contents(connection, [key for key in keys if key not in _kept])
    found: dict[str, list[Edition]] = {book: [] for book in wanted}
    for key in keys:
        found[key[0]].append(edition_of(*key, texts.get(key[:2], "")))
    return {book: tuple(several) for book, several in found.items()}


def rule_of(connection: Connection, book: str, edition: str) -> Edition | None:
    """The rule object of one edition in any state; None if there is none of that name."""
    row = connection.execute(
        sa.select(_edition).where(_edition.c.book == book, _edition.c.edition == edition)
    ).one_or_none()
    return None if row is None else edition_of(*_key(row, None), row.content)


def _key(row: Row[Any], known_at: datetime | None) -> Key:
    """What makes an edition's rule object; a withdrawal not yet known leaves it issued."""
    if known_at is not None and row.withdrawn_at is not None and row.withdrawn_at > known_at:
        return (row.book, row.edition, EditionState.ISSUED.value, row.effective_on, None, row.digest)
    return (row.book, row.edition, row.state, row.effective_on, row.withdrawn_on, row.digest)


def _contents(connection: Connection, keys: list[Key]) -> dict[tuple[str, str], str]:
    """(book, edition) → content, of editions that were not made before."""
    if not keys:
        return {}
    names = sa.tuple_(_edition.c.book, _edition.c.edition).in_([key[:2] for key in keys])
    found = connection.execute(
        sa.select(_edition.c.book, _edition.c.edition, _edition.c.content).where(names)
    )
    return {(row.book, row.edition): row.content for row in found}


@dataclass(frozen=True, slots=True)
class EditionRecord:
    """An edition as kept; `content` None where it was not asked for."""

    book: str
    edition: str
    state: EditionState
    version: int
    digest: str
    drafted_at: datetime
    drafted_by: tuple[str, ...]
    effective_on: date | None
    issued_at: datetime | None
    issued_by: str | None
    withdrawn_on: date | None
    withdrawn_at: datetime | None
    withdrawn_by: str | None
    content: Content | None = None


@dataclass(frozen=True, slots=True)
class BookRecord:
    """A book with its editions, by when they were drafted; without their content."""

    book: str
    title: str
    created_at: datetime
    editions: tuple[EditionRecord, ...]


def record_of(row: Row[Any]) -> EditionRecord:
    """The record of a row of the edition table, whole or without its content."""
    return EditionRecord(
        book=row.book,
        edition=row.edition,
        state=EditionState(row.state),
        version=row.version,
        digest=row.digest,
        drafted_at=row.drafted_at,
        drafted_by=tuple(row.drafted_by.split("\n")),
        effective_on=row.effective_on,
        issued_at=row.issued_at,
        issued_by=row.issued_by,
        withdrawn_on=row.withdrawn_on,
        withdrawn_at=row.withdrawn_at,
        withdrawn_by=row.withdrawn_by,
        content=Content.model_validate_json(row.content) if "content" in row._fields else None,
    )


def get(connection: Connection, book: str, edition: str) -> EditionRecord:
    """One edition with its content; NotFoundError if there is none of that name."""
    row = connection.execute(
        sa.select(_edition).where(_edition.c.book == book, _edition.c.edition == edition)
    ).one_or_none()
    if row is None:
        raise NotFoundError("There is no such edition of a limit book.")
    return record_of(row)


def page(connection: Connection, *, after: str | None, most: int) -> tuple[BookRecord, ...]:
    """Up to `most` books by name from beyond `after`, each with its editions."""
    query = sa.select(_book).order_by(_book.c.book).limit(most)
    if after is not None:
        query = query.where(_book.c.book > after)
    rows = connection.execute(query).all()
    several: dict[str, list[EditionRecord]] = {row.book: [] for row in rows}
    heads = _heads.where(_edition.c.book.in_(several)).order_by(_edition.c.drafted_at, _edition.c.edition)
    for head in connection.execute(heads):
        several[head.book].append(record_of(head))
    return tuple(BookRecord(row.book, row.title, row.created_at, tuple(several[row.book])) for row in rows)


def wire(record: EditionRecord) -> dict[str, Any]:
    """An edition as its answers and its journal lines show it, ready for JSON."""
    content = {} if record.content is None else record.content.model_dump(mode="json")
    return {
        "book": record.book,
        "edition": record.edition,
        "state": record.state.value,
        "version": record.version,
        "digest": record.digest,
        "drafted_at": instant_text(record.drafted_at),
        "drafted_by": list(record.drafted_by),
        "effective_on": _text(record.effective_on),
        "issued_at": None if record.issued_at is None else instant_text(record.issued_at),
        "issued_by": record.issued_by,
        "withdrawn_on": _text(record.withdrawn_on),
        "withdrawn_at": None if record.withdrawn_at is None else instant_text(record.withdrawn_at),
        "withdrawn_by": record.withdrawn_by,
        **content,
    }


def _text(day: date | None) -> str | None:
    return None if day is None else day.isoformat()
