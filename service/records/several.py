"""Several statements in one round trip.

On PostgreSQL they go through psycopg's pipeline: each still is a statement of its own, in order, and
sees what those before it waited for. SQLite has no trips to save and runs them one by one.
"""

from __future__ import annotations

from collections.abc import Mapping
from functools import lru_cache
from typing import Any, NamedTuple

import sqlalchemy as sa
from sqlalchemy import exc
from sqlalchemy.dialects import postgresql
from sqlalchemy.engine import Connection, Dialect


class Asked(NamedTuple):
    """A statement that is made once and kept, with this time's values for its parameters."""

    statement: sa.Executable
    values: Mapping[str, Any]


def among(column: sa.ColumnElement[Any], name: str, dialect: str) -> sa.ColumnElement[bool]:
    """`column` is one of the values of parameter `name`, a list, in words that need no compiling anew."""
    if dialect == "postgresql":
        return column == sa.func.any(sa.bindparam(name, type_=postgresql.ARRAY(sa.Text)))
    return column.in_(sa.bindparam(name, expanding=True))


def run(connection: Connection, *asked: Asked) -> list[list[tuple[Any, ...]]]:
    """Rows of each statement, as tuples in the order of its columns; none for one that returns no rows.

    Instants come as aware UTC datetimes on both databases.
    """
    if connection.dialect.name != "postgresql":
        results = [connection.execute(each.statement, each.values) for each in asked]
        return [[tuple(row) for row in result] if result.returns_rows else [] for result in results]
    raw: Any = connection.connection.driver_connection
    driver = connection.dialect.loaded_dbapi
    try:
        with raw.pipeline():
            cursors = []
            for each in asked:
                text, values = _compiled(each.statement, connection.dialect)
                cursors.append(raw.cursor().execute(text, {**values, **each.values}))
        return [cursor.fetchall() if cursor.pgresult.nfields else [] for cursor in cursors]
    except driver.Error as error:
        if raw.closed:
            connection.invalidate(error)
        wrapped = exc.DBAPIError.instance(
            None, None, error, driver.Error, connection_invalidated=raw.closed, dialect=connection.dialect
        )
        raise wrapped from error


@lru_cache(maxsize=256)
def _compiled(statement: sa.Executable, dialect: Dialect) -> tuple[str, Mapping[str, Any]]:
    compiled = statement.compile(dialect=dialect)  # type: ignore[attr-defined]
    return str(compiled), compiled.params
