"""Insert many rows, into one table or several, by one statement.

PostgreSQL takes one `INSERT … SELECT` from the rows as JSON, several times faster than a row at a time
and, for the rows a visit has, than arrays; SQLite, without a network in between, an executemany.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from functools import lru_cache
from typing import Any

import sqlalchemy as sa
from sqlalchemy.dialects import postgresql
from sqlalchemy.engine import Connection

from service.records import several
from service.records.several import Asked


@dataclass(frozen=True, slots=True)
class Rows:
    """Rows for one table, all with the same columns; `conflict` is an ON CONFLICT clause."""

    table: sa.Table
    rows: Sequence[Mapping[str, Any]]
    conflict: str = ""

    @property
    def columns(self) -> tuple[str, ...]:
        """The columns that the rows have."""
        return tuple(self.rows[0])


_HEAD = "SELECT sequence FROM journal_head WHERE depot = :stream"

Shape = tuple[tuple[sa.Table, tuple[str, ...], str], ...]


@lru_cache(maxsize=64)
def _from_json(shape: Shape, *, sequenced: bool = False) -> sa.TextClause:
    *first, last = (_one_insert(place, *each) for place, each in enumerate(shape))
    if sequenced:
        last = last.replace(") SELECT * ", f", sequence) SELECT *, ({_HEAD}) ", 1)
    leading = ", ".join(f"i{place} AS ({text})" for place, text in enumerate(first))
    return sa.text(f"WITH {leading} {last}" if first else last)


def _one_insert(place: int, table: sa.Table, columns: tuple[str, ...], conflict: str) -> str:
    dialect = postgresql.dialect()  # type: ignore[no-untyped-call]
    types = {name: table.c[name].type.compile(dialect=dialect).partition(" COLLATE")[0] for name in columns}
    typed = ", ".join(f"{name} {kind}" for name, kind in types.items())
    names = ", ".join(columns)
    # names of our own tables only; every value is bound
    return (
        f"INSERT INTO {table.name} ({names}) SELECT * FROM "  # noqa: S608
        f"json_to_recordset(CAST(:rows_{place} AS json)) AS r{place}({typed}) {conflict}"
    )


@lru_cache(maxsize=64)
def _values(table: sa.Table, columns: tuple[str, ...], conflict: str) -> sa.TextClause:
    names = ", ".join(columns)
    marks = ", ".join(f":{name}" for name in columns)
    text = sa.text(f"INSERT INTO {table.name} ({names}) VALUES ({marks}) {conflict}")  # noqa: S608
    return text.bindparams(*(sa.bindparam(name, type_=table.c[name].type) for name in columns))


def insert(
    connection: Connection, table: sa.Table, rows: Sequence[Mapping[str, Any]], conflict: str = ""
) -> None:
    """Insert `rows`, all with the same columns; `conflict` is an ON CONFLICT clause."""
    insert_all(connection, Rows(table, rows, conflict))


def insert_all(connection: Connection, *rows: Rows) -> None:
    """Insert into several tables, in order; on PostgreSQL by one statement.

    What has no rows is left out (nothing would tell their columns); with none at all nothing is sent.
    """
    filled = [each for each in rows if each.rows]
    if not filled:
        return
    if connection.dialect.name == "postgresql":
        several.run(connection, asked(filled))
        return
    for each in filled:
        statement = _values(each.table, each.columns, each.conflict)
        connection.execute(statement, [dict(row) for row in each.rows])


def asked(filled: Sequence[Rows], stream: str | None = None) -> Asked:
    """The one statement for PostgreSQL; with `stream`, the last table's column `sequence` is taken from
    the head of that journal."""
    shape = tuple((each.table, each.columns, each.conflict) for each in filled)
    values = {f"rows_{place}": _encode(each.rows) for place, each in enumerate(filled)}
    if stream is None:
        return Asked(_from_json(shape), values)
    return Asked(_from_json(shape, sequenced=True), {**values, "stream": stream})


def _iso(value: date) -> str:
    """Days and instants, the only values that JSON has no word for."""
    return value.isoformat()


_encode = json.JSONEncoder(ensure_ascii=False, check_circular=False, allow_nan=False, default=_iso).encode
