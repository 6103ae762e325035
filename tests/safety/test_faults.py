"""Databases that fail under a visit: a clear problem, all or nothing kept, and posting again mends it."""

from __future__ import annotations

import shutil
import sqlite3
from collections.abc import Callable, Iterator
from contextlib import closing
from pathlib import Path
from typing import Any

import httpx
import psycopg
import pytest
import sqlalchemy as sa

from service.application import access, backup, verification
from service.records.engine import sqlite_path, with_driver
from service.records.tables import metadata
from support.api import Api, served
from support.world import World, furnished, visit_id

VISITS = "/v1/depots/harrow/visits"
TABLES = ("visit", "reading", "latest", "status", "finding", "journal", "journal_head")


@pytest.fixture
def api(database_url: str) -> Iterator[Api]:
    with served(database_url) as found:
        yield found


@pytest.fixture
def world(api: Api) -> World:
    made = furnished(api.service, api.clock)
    made.section("A1")
    return made


@pytest.fixture
def client(api: Api, world: World) -> httpx.Client:
    made = api.client("readings", "read", label="field")
    access.note_use(api.service, "field")  # which else would write beside the test
    return made


def body(number: int = 1, **changes: Any) -> dict[str, Any]:
    reading = {"quantity": "drop_shunt", "test_point": "relay_end", "stage": "as_found", "instrument": "SB"}
    return {
        "visit": visit_id(number),
        "section": "A1",
        "visited_at": "2026-11-02T08:00:00Z",
        "readings": [reading | {"comparison": "eq", "value": 0.3, "unit": "Ohm"}],
    } | changes


def kept(world: World) -> dict[str, list[str]]:
    with world.service.read(snapshot=True) as connection:
        return {
            name: sorted(map(repr, connection.execute(sa.select(metadata.tables[name])))) for name in TABLES
        }


def sound(world: World, visits: int) -> None:
    found = kept(world)
    assert (len(found["visit"]), len(found["reading"])) == (visits, visits)
    with world.service.read(snapshot=True) as connection:
        assert list(verification.broken_chains(connection)) == []
        assert list(verification.mismatched_visits(connection)) == []


def unavailable(answer: httpx.Response) -> str:
    assert (answer.status_code, answer.json()["type"]) == (503, "/problems/unavailable")
    assert int(answer.headers["retry-after"]) > 0
    assert "Traceback" not in answer.text
    assert "sql" not in answer.text.lower()
    return str(answer.json()["detail"])


def posted_again(world: World, client: httpx.Client, expected: set[int], visits: int = 1) -> None:
    assert client.post(VISITS, json=body()).status_code in expected
    assert client.post(VISITS, json=body()).status_code == 200
    sound(world, visits)


class Statements:
    """Counts the statements of writing transactions, and does something before the one that is named."""

    def __init__(self, engine: sa.Engine) -> None:
        self.engine = engine
        self.texts: list[str] = []
        self.at, self.action = -1, lambda: None
        sa.event.listen(engine, "before_cursor_execute", self._before)

    def _before(self, connection: sa.Connection, _cursor: object, statement: str, *_: object) -> None:
        if not connection.get_execution_options().get("shuntbook_writes", False):
            return
        self.texts.append(statement)
        if len(self.texts) - 1 == self.at:
            self.action()

    def fail(self, at: int, action: Callable[[], Any]) -> None:
        self.texts, self.at, self.action = [], at, action

    def close(self) -> None:
        sa.event.remove(self.engine, "before_cursor_execute", self._before)


@pytest.fixture
def statements(api: Api) -> Iterator[Statements]:
    made = Statements(api.service.database.engine)
    yield made
    made.close()


def test_a_failure_at_any_statement_keeps_nothing(
    world: World, client: httpx.Client, statements: Statements, database_url: str, subtests: pytest.Subtests
) -> None:
    """Whichever statement of posting fails, nothing of the visit is there; the database's own words are not
    told, and posting again stores it."""

    def fail() -> None:
        if database_url.startswith("sqlite"):
            error: Exception = sqlite3.OperationalError("database is locked: SELECT secret")
            error.sqlite_errorcode = sqlite3.SQLITE_BUSY  # type: ignore[attr-defined]
        else:
            error = psycopg.errors.LockNotAvailable("SELECT secret")
        raise sa.exc.OperationalError("SELECT secret", {}, error)

    before = kept(world)
    at = 0
    while True:
        statements.fail(at, fail)
        answer = client.post(VISITS, json=body())
        if answer.status_code == 201:
            break
        with subtests.test(statement=statements.texts[-1][:60]):
            unavailable(answer)
            assert "secret" not in answer.text
            assert kept(world) == before
        at += 1
    assert at >= 4
    sound(world, 1)


def kill_others(api: Api) -> None:
    """End every other session of the database, as a restart of the server does."""
    plain = with_driver(api.service.database.url).set(drivername="postgresql")
    with psycopg.connect(plain.render_as_string(hide_password=False), autocommit=True) as connection:
        connection.execute(
            "SELECT pg_terminate_backend(pid) FROM pg_stat_activity"
            " WHERE datname = current_database() AND pid <> pg_backend_pid()"
        )


@pytest.mark.postgres
@pytest.mark.parametrize("database_url", [pytest.param("postgres")], indirect=True)
class TestOnPostgres:
    def test_a_server_gone_at_any_statement(
        self,
        api: Api,
        world: World,
        client: httpx.Client,
        statements: Statements,
        subtests: pytest.Subtests,
    ) -> None:
        before = kept(world)
        at = 0
        while True:
            statements.fail(at, lambda: kill_others(api))
            answer = client.post(VISITS, json=body())
            if answer.status_code == 201:
                break
            with subtests.test(statement=statements.texts[-1][:60]):
                assert "may or may not" in unavailable(answer)
                api.service.database.close()
                assert kept(world) == before
            at += 1
        assert at >= 4
        sound(world, 1)

    @pytest.mark.parametrize("when", ["before", "after"])
    def test_a_server_gone_during_commit(
        self, api: Api, world: World, client: httpx.Client, when: str
    ) -> None:
        """The client cannot know; what it posts again is stored once."""
        dialect = api.service.database.engine.dialect
        commit = dialect.do_commit

        def interrupted(connection: Any) -> None:
            if when == "after":
                commit(connection)
            kill_others(api)
            connection.execute("SELECT 1")

        dialect.do_commit = interrupted  # type: ignore[method-assign]
        try:
            assert "may or may not" in unavailable(client.post(VISITS, json=body()))
        finally:
            dialect.do_commit = commit  # type: ignore[method-assign]
        api.service.database.close()
        sound(world, 1 if when == "after" else 0)
        posted_again(world, client, {200} if when == "after" else {201})


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
class TestOnSqlite:
    def test_a_disk_that_fills_up(self, api: Api, world: World, client: httpx.Client) -> None:
        """Every visit that was acknowledged is there; the others are once there is room."""
        with closing(sqlite3.connect(sqlite_path(world.service.database.url))) as other:  # type: ignore[arg-type]
            (pages,) = other.execute("PRAGMA page_count").fetchone()
        room = [pages + 2]

        @sa.event.listens_for(api.service.database.engine, "checkout")
        def bound(connection: sqlite3.Connection, *_: object) -> None:
            connection.execute(f"PRAGMA max_page_count={room[0]}")

        answers = {number: client.post(VISITS, json=body(number, remarks="x" * 1500)) for number in range(30)}
        stored = [number for number, answer in answers.items() if answer.status_code == 201]
        refused = [number for number in answers if number not in stored]
        assert stored
        assert refused
        assert all("disk is full" in unavailable(answers[number]) for number in refused)
        sound(world, len(stored))
        room[0] = 10**6
        for number in answers:
            expected = 200 if number in stored else 201
            assert client.post(VISITS, json=body(number, remarks="x" * 1500)).status_code == expected
        sound(world, 30)

    def test_a_file_that_takes_no_writes(self, api: Api, world: World, client: httpx.Client) -> None:
        @sa.event.listens_for(api.service.database.engine, "checkout")
        def bound(connection: sqlite3.Connection, *_: object) -> None:
            connection.execute("PRAGMA query_only=ON")

        answer = client.post(VISITS, json=body())
        assert (answer.status_code, answer.json()["type"]) == (500, "/problems/storage-fault")
        assert "cannot be opened for writing" in answer.json()["detail"]
        assert "retry-after" not in answer.headers
        assert client.get("/v1/depots/harrow").status_code == 200
        sa.event.remove(api.service.database.engine, "checkout", bound)
        api.service.database.close()
        posted_again(world, client, {201})

    def test_a_server_restored_from_an_older_backup(
        self, api: Api, world: World, client: httpx.Client, tmp_path: Path
    ) -> None:
        """Followers are told; handhelds that post their last weeks again put back what was lost."""
        feed = "/v1/depots/harrow/journal"
        assert client.post(VISITS, json=body(1)).status_code == 201
        backup.take(world.service.database.url, tmp_path / "copy.db")
        assert client.post(VISITS, json=body(2, visited_at="2026-11-02T08:30:00Z")).status_code == 201
        last = client.get(feed).json()["items"][-1]
        statuses = kept(world)["latest"]

        api.service.database.close()
        path = sqlite_path(world.service.database.url)
        assert path is not None
        for suffix in ("-wal", "-shm"):
            path.with_name(path.name + suffix).unlink(missing_ok=True)
        shutil.copy(tmp_path / "copy.db", path)

        sound(world, 1)
        followed = {"after": last["sequence"], "after_digest": last["digest"]}
        assert client.get(feed, params=followed).status_code == 409
        again = [body(1), body(2, visited_at="2026-11-02T08:30:00Z")]
        answers = client.post(f"{VISITS}/batch", json=again).json()
        assert [one["outcome"] for one in answers] == ["already_stored", "stored"]
        assert kept(world)["latest"] == statuses
        sound(world, 2)
