"""Databases that lock, fill up, rot or go away: a clear problem each time, and nothing acknowledged lost."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path
from typing import Any

import httpx
import psycopg
import pytest
import sqlalchemy as sa

from service.application import access, depots
from service.records.engine import with_driver
from support.api import Api, served

BODY = {"depot": "marsh", "title": "t", "time_zone": "UTC", "audit_weekday": "monday", "audit_hour": 1}
TERMS = {name: value for name, value in BODY.items() if name != "depot"}


def edit(client: httpx.Client, title: str, version: int = 1) -> httpx.Response:
    return client.put(
        "/v1/depots/harrow", json=TERMS | {"title": title}, headers={"If-Match": f'"v{version}"'}
    )


def unavailable(answer: httpx.Response) -> str:
    assert (answer.status_code, answer.json()["type"]) == (503, "/problems/unavailable")
    assert int(answer.headers["retry-after"]) > 0
    return str(answer.json()["detail"])


@pytest.fixture
def on_file(sqlite_url: str) -> Iterator[Api]:
    with served(sqlite_url) as api:
        api.depot("harrow")
        yield api


@pytest.fixture
def on_server(postgres_url: str) -> Iterator[Api]:
    with served(postgres_url) as api:
        api.depot("harrow")
        yield api


def file_of(api: Api) -> Path:
    return Path(api.service.database.url.removeprefix("sqlite:///"))


def test_a_locked_file_is_busy_for_writers_only(on_file: Api) -> None:
    client = on_file.client("admin", "read", label="engineer")
    access.note_use(on_file.service, "engineer")  # which else would wait for the lock beside the edit
    with closing(sqlite3.connect(file_of(on_file), isolation_level=None)) as other:
        other.execute("BEGIN IMMEDIATE")
        assert client.get("/v1/depots/harrow").status_code == 200
        assert "locked" in unavailable(edit(client, "x"))
    assert edit(client, "y").json()["title"] == "y"


def test_a_full_disk_says_so_and_writes_nothing(on_file: Api) -> None:
    """SQLite's own bound on pages gives the same SQLITE_FULL as a disk without room."""
    client = on_file.client("admin", "read")
    pages = closing(sqlite3.connect(file_of(on_file)))
    with pages as other:
        (count,) = other.execute("PRAGMA page_count").fetchone()

    @sa.event.listens_for(on_file.service.database.engine, "checkout")
    def bound(connection: sqlite3.Connection, *_: object) -> None:
        connection.execute(f"PRAGMA max_page_count={count}")

    statuses = []
    for number in range(200):
        answer = client.post("/v1/depots", json=BODY | {"depot": f"d{number}", "title": "t" * 200})
        statuses.append(answer.status_code)
        if answer.status_code != 201:
            assert "disk is full" in unavailable(answer)
            break
    kept = client.get("/v1/depots?page_size=1000").json()["items"]
    assert len(kept) == statuses.count(201) + 1
    assert statuses[-1] == 503


def test_a_rotten_file_asks_for_an_operator(on_file: Api) -> None:
    for number in range(50):
        on_file.depot(f"d{number}")
    client = on_file.client("admin", "read")
    with closing(sqlite3.connect(file_of(on_file))) as other:
        other.execute("PRAGMA wal_checkpoint(TRUNCATE)")
    on_file.service.database.close()
    content = bytearray(file_of(on_file).read_bytes())
    for page in range(4096, len(content), 4096):
        content[page : page + 64] = b"\xa5" * 64
    file_of(on_file).write_bytes(content)
    answer = client.get("/v1/depots")
    assert (answer.status_code, answer.json()["type"]) == (500, "/problems/storage-fault")
    assert "backup" in answer.json()["detail"]
    assert "retry-after" not in answer.headers


@contextmanager
def beside(api: Api) -> Iterator[psycopg.Connection[Any]]:
    plain = with_driver(api.service.database.url).set(drivername="postgresql")
    with psycopg.connect(plain.render_as_string(hide_password=False), autocommit=True) as connection:
        yield connection


def kill_others(api: Api) -> None:
    """End every other session of the database, as a restart of the server does."""
    with beside(api) as connection:
        connection.execute(
            "SELECT pg_terminate_backend(pid) FROM pg_stat_activity"
            " WHERE datname = current_database() AND pid <> pg_backend_pid()"
        )


@pytest.mark.postgres
def test_a_server_that_went_away_between_requests(on_server: Api) -> None:
    """Pooled connections are dead: one request may tell, and the next finds new ones."""
    client = on_server.client("admin", "read")
    assert client.get("/v1/depots").status_code == 200
    kill_others(on_server)
    first = client.get("/v1/depots")
    assert first.status_code == 200 or unavailable(first)
    assert client.get("/v1/depots").status_code == 200


@pytest.mark.postgres
def test_a_server_that_goes_away_in_mid_request(on_server: Api, monkeypatch: pytest.MonkeyPatch) -> None:
    client = on_server.client("admin", "read")
    listed = depots.listed

    def interrupted(*arguments: Any, **words: Any) -> Any:
        kill_others(on_server)
        return listed(*arguments, **words)

    monkeypatch.setattr("service.application.depots.listed", interrupted)
    unavailable(client.get("/v1/depots"))
    monkeypatch.undo()
    assert client.get("/v1/depots").status_code == 200


@pytest.mark.postgres
@pytest.mark.parametrize("when", ["before", "after"])
def test_a_server_that_goes_away_during_commit(on_server: Api, when: str) -> None:
    """Whether it happened or not, the answer says "may or may not", and sending again settles it."""
    client = on_server.client("admin", "read")
    engine = on_server.service.database.engine
    dialect = engine.dialect
    commit = dialect.do_commit

    def interrupted(connection: Any) -> None:
        if when == "before":
            kill_others(on_server)
            commit(connection)
        commit(connection)
        kill_others(on_server)
        connection.execute("SELECT 1")

    dialect.do_commit = interrupted  # type: ignore[method-assign]
    try:
        assert "may or may not" in unavailable(edit(client, "renamed"))
    finally:
        dialect.do_commit = commit  # type: ignore[method-assign]
    kept = client.get("/v1/depots/harrow").json()
    assert (kept["title"] == "renamed") == (when == "after")
    again = edit(client, "renamed", kept["version"])
    assert (again.status_code, again.json()["title"]) == (200, "renamed")


@pytest.mark.postgres
def test_a_lock_that_is_not_to_be_had_in_time(on_server: Api) -> None:
    client = on_server.client("admin", "read")

    @sa.event.listens_for(on_server.service.database.engine, "checkout")
    def hurry(connection: Any, *_: object) -> None:
        connection.execute("SET lock_timeout = '200ms'")
        connection.commit()

    with beside(on_server) as other, other.transaction():
        other.execute("SELECT 1 FROM depot WHERE depot = 'harrow' FOR UPDATE")
        unavailable(edit(client, "x"))
    assert edit(client, "y").status_code == 200
