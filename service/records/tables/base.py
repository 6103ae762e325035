"""The naming of constraints, and how columns are declared in the tables beside this file.

No table is declared here.
"""

from __future__ import annotations

from typing import Any

from sqlmodel import Field, SQLModel

from service.records.columns import Name, UtcDateTime

SQLModel.metadata.naming_convention = {
    "ix": "ix_%(table_name)s_%(column_0_N_name)s",
    "uq": "uq_%(table_name)s_%(column_0_N_name)s",
    "ck": "ck_%(table_name)s_%(constraint_name)s",
    "fk": "fk_%(table_name)s_%(column_0_N_name)s",
    "pk": "pk_%(table_name)s",
}


def key() -> Any:
    """A text column of the primary key."""
    return Field(primary_key=True, sa_type=Name)


def name(*, null: bool = False, unique: bool = False) -> Any:
    """A text column compared bytewise."""
    if null:
        return Field(default=None, sa_type=Name, nullable=True)
    return Field(sa_type=Name, unique=unique)


def instant(*, null: bool = False) -> Any:
    """A UTC instant."""
    if null:
        return Field(default=None, sa_type=UtcDateTime, nullable=True)
    return Field(sa_type=UtcDateTime)
