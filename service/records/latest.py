"""`latest`: of each quantity and test point of a section, the one visit that decides.

A projection of `reading`: kept by upsert when visits arrive, derived again after a void or a
replacement.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.records import bulk
from service.records.tables import Latest, ReadingRow

_latest = Latest.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]

_JUDGED = ("comparison", "instrument", "shunt_ohm", "source", "doubtful")
_MOVED = ("visit", "visited_at", "as_found", "as_left", *_JUDGED)
_UPSERT = (
    "ON CONFLICT (depot, section, quantity, test_point) DO UPDATE SET "
    + ", ".join(f"{column} = excluded.{column}" for column in _MOVED)
    + " WHERE (latest.visited_at, latest.visit) < (excluded.visited_at, excluded.visit)"
)


def fold(readings: Iterable[Mapping[str, Any]]) -> list[dict[str, Any]]:
    """Rows of `latest` that these rows of `reading` make, one a section, quantity and test point."""
    newest: dict[tuple[str, str, str], dict[str, Any]] = {}
    for reading in readings:
        key = (reading["section"], reading["quantity"], reading["test_point"])
        row = newest.get(key)
        rank = (reading["visited_at"], reading["visit"])
        if row is None or (row["visited_at"], row["visit"]) < rank:
            row = newest[key] = {
                "depot": reading["depot"],
                "section": key[0],
                "quantity": key[1],
                "test_point": key[2],
                "visit": reading["visit"],
                "visited_at": reading["visited_at"],
                "as_found": None,
                "as_left": None,
                **dict.fromkeys(_JUDGED),
            }
        elif rank < (row["visited_at"], row["visit"]):
            continue
        row[reading["stage"]] = reading["value"]
        if reading["stage"] == "as_left" or row["as_left"] is None:
            row.update({column: reading[column] for column in _JUDGED})
    return list(newest.values())


def advanced(readings: Sequence[Mapping[str, Any]]) -> bulk.Rows:
    """The upsert for newly stored readings; whichever visit is newer by (visited_at, visit) stays."""
    return bulk.Rows(_latest, fold(readings), _UPSERT)


def derive(connection: Connection, depot: str, section: str, counting: Sequence[str]) -> None:
    """Derive a section's rows again from the visits that count."""
    connection.execute(sa.delete(_latest).where(_latest.c.depot == depot, _latest.c.section == section))
    found = connection.execute(
        sa.select(_reading).where(_reading.c.depot == depot, _reading.c.section == section)
    ).mappings()
    counted = set(counting)
    bulk.insert(connection, _latest, fold(dict(row) for row in found if row["visit"] in counted))
