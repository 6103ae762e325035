"""Sections with their versions, concessions, and the projected status.

A version is never changed. As of a day, the record is the highest version that holds from that day
or earlier.
"""

from __future__ import annotations

from datetime import date, datetime

from sqlalchemy import CheckConstraint, Index, Integer, UniqueConstraint
from sqlmodel import Field, SQLModel

from service.records.columns import one_of, within_depot
from service.records.tables.base import instant, key, name
from service.rules.words import (
    Bonding,
    CircuitKind,
    Compliance,
    Hazard,
    Place,
    SectionState,
    Sleepers,
    Traction,
)


class Section(SQLModel, table=True):
    """The name, and which version is the newest. Locked by whoever writes what it is judged by."""

    __tablename__ = "section"
    __table_args__ = (
        within_depot(of="depot"),
        UniqueConstraint("depot", "folded"),
    )

    depot: str = key()
    section: str = key()
    folded: str = name()
    """The name without regard to case: unique in its depot."""
    version: int
    created_at: datetime = instant()


class SectionVersion(SQLModel, table=True):
    """One version of a section's record. JSON text: test points, adjacent, equipment, layout."""

    __tablename__ = "section_version"
    __table_args__ = (
        within_depot("section", of="section"),
        one_of("state", SectionState),
        one_of("circuit_kind", CircuitKind),
        one_of("traction", Traction),
        one_of("place", Place),
        one_of("sleepers", Sleepers),
        one_of("bonding", Bonding),
        CheckConstraint("return_rails BETWEEN 0 AND 2", name="return_rails_range"),
        Index("ix_section_version_book", "depot", "book"),
    )

    depot: str = key()
    section: str = key()
    version: int = Field(primary_key=True, sa_type=Integer)
    valid_from_on: date
    recorded_at: datetime = instant()
    recorded_by: str
    title: str | None = None
    state: str
    line_name: str | None = name(null=True)
    from_km: float | None = None
    to_km: float | None = None
    length_m: float | None = None
    circuit_kind: str
    traction: str
    return_rails: int | None = None
    place: str | None = None
    sleepers: str | None = None
    commissioned_on: date | None = None
    book: str | None = Field(default=None, foreign_key="limit_book.book", nullable=True)
    required_test_points: str
    points_ends: int | None = None
    insulated_joints: int | None = None
    bonding: str | None = None
    longest_parallel_m: float | None = None
    bonds_duplicated: bool | None = None
    interrupter_required: bool | None = None
    interrupter_fitted: bool | None = None
    train_frequency: str | None = None
    adjacent: str
    equipment: str | None = None
    layout: str | None = None
    succeeds: str | None = name(null=True)
    asset_reference: str | None = name(null=True)


class Concession(SQLModel, table=True):
    """Permission, until a date, to work outside one limit or to defer one interval."""

    __tablename__ = "concession"
    __table_args__ = (
        within_depot("section", of="section"),
        CheckConstraint("(limit_name IS NULL) <> (task IS NULL)", name="limit_or_task"),
        CheckConstraint("asked_by <> approved_by", name="two_people"),
        Index("ix_concession_section", "depot", "section"),
    )

    depot: str = key()
    concession: str = key()
    section: str = name()
    limit_name: str | None = name(null=True)
    task: str | None = name(null=True)
    test_point: str | None = name(null=True)
    allowed_min: float | None = None
    allowed_max: float | None = None
    conditions: str
    protection: str | None = None
    asked_by: str
    approved_by: str
    from_on: date
    until_on: date
    granted_at: datetime = instant()
    granted_by: str
    ended_on: date | None = None
    ended_at: datetime | None = instant(null=True)
    ended_by: str | None = None
    ended_why: str | None = None
    version: int


class Status(SQLModel, table=True):
    """What lists filter by: a section judged for a depot day, true until `holds_until` unless
    something is written. Its verdicts are judged anew when somebody asks for them."""

    __tablename__ = "status"
    __table_args__ = (
        within_depot("section", of="section"),
        one_of("compliance", Compliance),
        one_of("worst_hazard", Hazard),
        Index("ix_status_compliance", "depot", "compliance", "section"),
        Index("ix_status_overdue", "depot", "overdue", "section"),
        Index("ix_status_worst_hazard", "depot", "worst_hazard", "section"),
        Index("ix_status_holds_until", "depot", "holds_until"),
    )

    depot: str = key()
    section: str = key()
    as_of: date
    compliance: str | None = name(null=True)
    overdue: bool
    worst_hazard: str | None = name(null=True)
    next_due_on: date | None = None
    holds_until: date | None = None
    sequence: int
