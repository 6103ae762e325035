"""The journal: a chain of lines for each depot, and one for the service itself (`_service`).

Lines are only ever appended; `records.journal` says how they are chained.
"""

from __future__ import annotations

from sqlalchemy import Index
from sqlmodel import Field, SQLModel

from service.records.tables.base import key, name


class JournalHead(SQLModel, table=True):
    """Where a depot's chain ends."""

    __tablename__ = "journal_head"

    depot: str = key()
    sequence: int
    digest: str


class JournalLine(SQLModel, table=True):
    """One change. `recorded_at` is text since it is hashed as written; `actor`, `sections`
    and `content` are canonical JSON text, `section` the only one concerned if it is one."""

    __tablename__ = "journal"
    __table_args__ = (
        Index("ix_journal_section", "depot", "section", "sequence"),
        Index("ix_journal_subject_kind", "depot", "subject_kind", "sequence"),
    )

    depot: str = key()
    sequence: int = Field(primary_key=True)
    recorded_at: str
    actor: str
    action: str
    subject_kind: str = name()
    subject_name: str = name()
    section: str | None = name(null=True)
    sections: str
    content: str
    previous_digest: str
    digest: str
