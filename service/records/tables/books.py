"""Limit books and their editions. They belong to the service, not to a depot.

An edition's content is kept as one canonical JSON text: it is read whole, never queried into.
"""

from __future__ import annotations

from datetime import date, datetime

from sqlmodel import Field, SQLModel

from service.records.columns import one_of
from service.records.tables.base import instant, key
from service.rules.words import EditionState


class LimitBook(SQLModel, table=True):
    __tablename__ = "limit_book"

    book: str = key()
    title: str
    created_at: datetime = instant()


class BookEdition(SQLModel, table=True):
    """`content` never changes once issued; `digest` is its SHA-256."""

    __tablename__ = "edition"
    __table_args__ = (one_of("state", EditionState),)

    book: str = Field(primary_key=True, foreign_key="limit_book.book")
    edition: str = key()
    state: str
    content: str
    digest: str
    version: int
    drafted_at: datetime = instant()
    drafted_by: str
    """Every holder who drafted or edited it, joined by newlines: none of them may issue it."""
    effective_on: date | None = None
    issued_at: datetime | None = instant(null=True)
    issued_by: str | None = None
    withdrawn_on: date | None = None
    withdrawn_at: datetime | None = instant(null=True)
    withdrawn_by: str | None = None
