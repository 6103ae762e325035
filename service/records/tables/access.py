"""Depots and access keys.

Keys belong to the service; a depot is the first column of every other table.
"""

from __future__ import annotations

from datetime import datetime

from sqlalchemy import CheckConstraint
from sqlmodel import Field, SQLModel

from service.records.tables.base import instant, key, name


class Depot(SQLModel, table=True):
    """Who answers for the sections. `audit_weekday` 0 is Monday."""

    __tablename__ = "depot"
    __table_args__ = (
        CheckConstraint("audit_weekday BETWEEN 0 AND 6", name="audit_weekday_range"),
        CheckConstraint("audit_hour BETWEEN 0 AND 23", name="audit_hour_range"),
    )

    depot: str = key()
    title: str
    time_zone: str
    audit_weekday: int
    audit_hour: int
    version: int
    epoch: int
    """Counts the changes that can move many sections: what is kept in memory of them is good for one."""
    created_at: datetime = instant()


class AccessKey(SQLModel, table=True):
    """A key is kept as its SHA-256 only. `depot` null: good for all depots."""

    __tablename__ = "access_key"

    label: str = key()
    digest: str = name(unique=True)
    holder: str
    scopes: str
    """Space-separated, sorted."""
    depot: str | None = Field(default=None, foreign_key="depot.depot", nullable=True)
    device: str | None = name(null=True)
    created_at: datetime = instant()
    expires_at: datetime | None = instant(null=True)
    revoked_at: datetime | None = instant(null=True)
    last_used_at: datetime | None = instant(null=True)
