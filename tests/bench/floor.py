"""The floors that the service is measured against: the same rows, nothing judged.

`floor_app` is an HTTP app of the same framework that writes a visit's rows with plain psycopg;
`copy_readings` writes readings alone, by COPY, without HTTP.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any

import psycopg
from fastapi import Depends, FastAPI, Request, Response
from psycopg_pool import ConnectionPool

from service.records.engine import digest_of

VISIT = """INSERT INTO visit (depot, visit, section, visited_at, received_at, received_by, holder,
 found_outside, tasks, work_done, digest, tester, ballast, rail, condition_left, device) VALUES
 (%s, %s, %s, %s, %s, 'k', 'h', false, %s, '[]', %s, %s, %s, %s, %s, %s)"""
READINGS = """INSERT INTO reading (depot, visit, quantity, test_point, stage, section, visited_at, comparison,
 value, value_given, unit_given, instrument, shunt_ohm, source) SELECT * FROM unnest(%s::text[], %s::text[],
 %s::text[], %s::text[], %s::text[], %s::text[], %s::timestamptz[], %s::text[], %s::float8[], %s::float8[],
 %s::text[], %s::text[], %s::float8[], %s::text[])"""
LATEST = """INSERT INTO latest (depot, visit, quantity, test_point, section, visited_at, comparison, as_left,
 instrument, shunt_ohm, source) SELECT * FROM unnest(%s::text[], %s::text[], %s::text[], %s::text[],
 %s::text[], %s::timestamptz[], %s::text[], %s::float8[], %s::text[], %s::float8[], %s::text[])
 ON CONFLICT (depot, section, quantity, test_point) DO UPDATE SET visit = excluded.visit,
 visited_at = excluded.visited_at, as_left = excluded.as_left"""
STATUS = """INSERT INTO status (depot, section, as_of, compliance, overdue, holds_until, sequence)
 VALUES (%s, %s, %s, 'yes', false, %s, 0) ON CONFLICT (depot, section) DO UPDATE SET as_of = excluded.as_of"""
JOURNAL = """SELECT journal_append(%s, %s::jsonb)"""


def columns(depot: str, visit: dict[str, Any]) -> dict[str, list[Any]]:
    """The readings of a visit as the columns of `reading`."""
    readings = visit["readings"]
    count = len(readings)
    return {
        "depot": [depot] * count,
        "visit": [visit["visit"]] * count,
        "quantity": [one["quantity"] for one in readings],
        "test_point": [one["test_point"] for one in readings],
        "stage": [one["stage"] for one in readings],
        "section": [visit["section"]] * count,
        "visited_at": [visit["visited_at"]] * count,
        "comparison": [one["comparison"] for one in readings],
        "value": [one["value"] for one in readings],
        "value_given": [one["value"] for one in readings],
        "unit_given": [one["unit"] for one in readings],
        "instrument": [one["instrument"] for one in readings],
        "shunt_ohm": [one["shunt_ohm"] for one in readings],
        "source": [one["source"] for one in readings],
    }


def write(cursor: psycopg.Cursor[Any], depot: str, visit: dict[str, Any], body: str) -> None:
    """One visit's rows: visit, readings, latest, status, journal."""
    now = datetime(2026, 11, 30, 12, tzinfo=UTC)
    seen = visit["conditions"]
    cursor.execute(
        VISIT,
        (
            depot,
            visit["visit"],
            visit["section"],
            visit["visited_at"],
            now,
            json.dumps(visit["tasks"]),
            digest_of(body),
            visit["tester"],
            seen["ballast"],
            seen["rail"],
            visit["condition_left"],
            visit["device"],
        ),
    )
    values = columns(depot, visit)
    cursor.execute(READINGS, tuple(values.values()))
    names = (
        "depot",
        "visit",
        "quantity",
        "test_point",
        "section",
        "visited_at",
        "comparison",
        "value",
        "instrument",
    )
    cursor.execute(LATEST, tuple(values[name] for name in (*names, "shunt_ohm", "source")))
    cursor.execute(STATUS, (depot, visit["section"], now.date(), now.date()))
    line = {
        "recorded_at": now.isoformat(),
        "actor": "{}",
        "action": "visit_stored",
        "subject_kind": "visit",
        "subject_name": visit["visit"],
        "section": visit["section"],
        "sections": json.dumps([visit["section"]]),
        "content": body,
        "parts": ["", "", body],
    }
    cursor.execute(JOURNAL, (depot, json.dumps([line])))


def floor_app(url: str, threads: int) -> FastAPI:
    """An app that stores what it is sent, with plain psycopg, and answers 201."""
    pool = ConnectionPool(url, min_size=4, max_size=threads, kwargs={"options": "-c jit=off"})

    app = FastAPI()

    async def body(request: Request) -> bytes:
        return await request.body()

    @app.post("/v1/depots/{depot}/visits")
    def post(depot: str, raw: bytes = Depends(body)) -> Response:
        with pool.connection() as connection, connection.cursor() as cursor:
            write(cursor, depot, json.loads(raw), raw.decode())
        return Response(b"{}", 201, media_type="application/json")

    @app.get("/empty")
    def empty() -> Response:
        return Response(b"{}", media_type="application/json")

    return app


def copy_readings(url: str, depot: str, visits: list[dict[str, Any]], clock: Callable[[], float]) -> float:
    """Readings a second by COPY into `reading` in one transaction (its visits are there already)."""
    rows = [list(zip(*columns(depot, visit).values(), strict=True)) for visit in visits]
    names = list(columns(depot, visits[0]))
    total = sum(map(len, rows))
    with psycopg.connect(url) as connection, connection.cursor() as cursor:
        started = clock()
        with cursor.copy(f"COPY reading ({', '.join(names)}) FROM STDIN") as copy:
            for several in rows:
                for row in several:
                    copy.write_row(row)
        connection.commit()
        return total / (clock() - started)
