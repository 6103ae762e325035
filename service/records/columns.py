"""Column types and constraint helpers shared by the tables.

Times are UTC instants on both databases; names compare bytewise on both. No table is declared here.
"""

from __future__ import annotations

from collections.abc import Iterable
from datetime import UTC, datetime
from enum import StrEnum
from typing import Any

from sqlalchemy import CheckConstraint, DateTime, Dialect, ForeignKeyConstraint, Text
from sqlalchemy.types import TypeDecorator, TypeEngine


class UtcDateTime(TypeDecorator[datetime]):
    """An aware UTC instant; SQLite, which hands zones back stripped, gets naive UTC."""

    impl = DateTime
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        return dialect.type_descriptor(DateTime(timezone=dialect.name != "sqlite"))

    def process_bind_param(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        if value is None:
            return None
        utc = value.astimezone(UTC)
        return utc.replace(tzinfo=None) if dialect.name == "sqlite" else utc

    def process_result_value(self, value: datetime | None, dialect: Dialect) -> datetime | None:
        if value is None:
            return None
        return value.replace(tzinfo=UTC) if value.tzinfo is None else value.astimezone(UTC)


class Name(TypeDecorator[str]):
    """Text ordered and compared by bytes, whatever the database's locale."""

    impl = Text
    cache_ok = True

    def load_dialect_impl(self, dialect: Dialect) -> TypeEngine[Any]:
        if dialect.name == "postgresql":
            return dialect.type_descriptor(Text(collation="C"))
        return dialect.type_descriptor(Text())


def one_of(column: str, words: type[StrEnum] | Iterable[str]) -> CheckConstraint:
    """A CHECK that `column` is null or one of `words`."""
    quoted = ", ".join(f"'{word}'" for word in words)
    return CheckConstraint(f"{column} IN ({quoted})", name=f"{column}_known")


def within_depot(*columns: str, of: str, names: tuple[str, ...] | None = None) -> ForeignKeyConstraint:
    """A composite foreign key that cannot leave the depot."""
    targets = names or columns
    return ForeignKeyConstraint(
        ["depot", *columns], [f"{of}.depot", *(f"{of}.{target}" for target in targets)]
    )
