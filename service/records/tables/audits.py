"""Audits, their rows, and findings with their responses.

An audit and its rows never change; a finding does, from audit to audit.
"""

from __future__ import annotations

from datetime import date, datetime

from sqlalchemy import Index, text
from sqlmodel import Field, SQLModel

from service.records.columns import one_of, within_depot
from service.records.tables.base import instant, key, name
from service.rules.words import FindingKind, FindingState, Hazard


class Audit(SQLModel, table=True):
    """The depot judged as of a date, once. `sequence` and `digest` are the journal's then."""

    __tablename__ = "audit"
    __table_args__ = (within_depot(of="depot"),)

    depot: str = key()
    audit: date = Field(primary_key=True)
    started_at: datetime = instant()
    finished_at: datetime = instant()
    started_by: str
    known_at: datetime = instant()
    sequence: int
    digest: str
    editions: str
    sections_judged: int
    sections_not_judged: int
    counts: str


class AuditRow(SQLModel, table=True):
    """One section not in order in one audit; `content` is JSON text, as printed on the list."""

    __tablename__ = "audit_row"
    __table_args__ = (
        Index("ix_audit_row_rank", "depot", "audit", "position"),
        within_depot("audit", of="audit"),
        within_depot("section", of="section"),
    )

    depot: str = key()
    audit: date = Field(primary_key=True)
    section: str = key()
    position: int
    content: str


class Finding(SQLModel, table=True):
    """One thing wrong with one section, from audit to audit until cleared.

    `identity` is section, kind, quantity or task, and test point; only one finding of an identity is
    open at a time. `response` is JSON text.
    """

    __tablename__ = "finding"
    __table_args__ = (
        within_depot("section", of="section"),
        one_of("kind", FindingKind),
        one_of("state", FindingState),
        one_of("hazard", Hazard),
        Index(
            "uq_finding_open_identity",
            "depot",
            "identity",
            unique=True,
            sqlite_where=text("state <> 'cleared'"),
            postgresql_where=text("state <> 'cleared'"),
        ),
        Index("ix_finding_section", "depot", "section"),
        Index("ix_finding_state", "depot", "state", "finding"),
    )

    depot: str = key()
    finding: str = key()
    section: str = name()
    identity: str = name()
    kind: str
    quantity: str | None = name(null=True)
    task: str | None = name(null=True)
    test_point: str | None = name(null=True)
    hazard: str | None = None
    state: str = name()
    opened_on: date
    last_seen_on: date
    cleared_on: date | None = None
    first_audit_on: date | None = None
    """The audit that listed it first: `new` then, `open` afterwards."""
    reopens: str | None = name(null=True)
    concession: str | None = name(null=True)
    visit: str | None = name(null=True)
    """The visit a `found_outside` rests on."""
    verdict: str | None = None
    response: str | None = None
    reported_at: datetime | None = instant(null=True)
    version: int
