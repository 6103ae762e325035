"""The test helpers themselves: databases are cloned and dropped, servers start, stop and fail loudly."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Awaitable, Callable, MutableMapping
from pathlib import Path
from typing import Any

import httpx
import psycopg
import pytest

from support import postgres
from support.house import ROOT
from support.server import serve

Message = MutableMapping[str, Any]


def plain(url: str) -> str:
    return url.replace("postgresql+psycopg:", "postgresql:")


def one_table(url: str) -> None:
    with psycopg.connect(plain(url)) as connection:
        connection.execute("CREATE TABLE seen (n integer)")


def databases_now(databases: postgres.Databases) -> set[str]:
    with psycopg.connect(plain(databases.server.render_as_string(hide_password=False))) as connection:
        return {name for (name,) in connection.execute("SELECT datname FROM pg_database")}


def answers(url: str) -> bool:
    try:
        psycopg.connect(url).close()
    except psycopg.OperationalError:
        return False
    return True


@pytest.mark.postgres
def test_each_clone_is_prepared_and_apart_from_the_others(postgres_databases: postgres.Databases) -> None:
    with postgres_databases.cloned(one_table) as first, postgres_databases.cloned(one_table) as second:
        with psycopg.connect(plain(first)) as connection:
            connection.execute("INSERT INTO seen VALUES (1)")
        with psycopg.connect(plain(second)) as connection:
            assert connection.execute("SELECT count(*) FROM seen").fetchone() == (0,)


@pytest.mark.postgres
def test_a_clone_is_dropped_even_under_an_open_connection(postgres_databases: postgres.Databases) -> None:
    with postgres_databases.cloned(one_table):
        pass
    before = databases_now(postgres_databases)
    with postgres_databases.cloned(one_table) as url:
        connection = psycopg.connect(plain(url))
        assert len(databases_now(postgres_databases)) == len(before) + 1
    connection.close()
    assert databases_now(postgres_databases) == before


@pytest.mark.postgres
def test_a_named_server_is_used_and_left_as_it_was(
    postgres_databases: postgres.Databases, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = databases_now(postgres_databases)
    with postgres_databases.cloned(one_table) as url:
        monkeypatch.setenv("SHUNTBOOK_TEST_POSTGRES", plain(url))
        with postgres.databases() as named, named.cloned(lambda _: None):
            assert len(databases_now(postgres_databases) - before) >= 3
    assert databases_now(postgres_databases) - before <= set(postgres_databases._templates.values())


@pytest.mark.postgres
@pytest.mark.skipif(shutil.which("setpriv") is None, reason="only Linux can tie one process to another")
def test_a_server_does_not_outlive_a_killed_test_run() -> None:
    script = """if True:
        import time
        from support import postgres
        with postgres.databases() as databases:
            print(databases.server.render_as_string(), flush=True)
            time.sleep(60)
    """
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as home:
        Path(home).chmod(0o755)
        environment = {**os.environ, "PYTHONPATH": str(ROOT / "tests"), "TMPDIR": home}
        environment.pop("SHUNTBOOK_TEST_POSTGRES", None)
        command = [sys.executable, "-c", script]
        with subprocess.Popen(command, env=environment, stdout=subprocess.PIPE, text=True) as killed:
            assert killed.stdout is not None
            url = plain(killed.stdout.readline().strip())
            assert answers(url)
            killed.kill()
        deadline = time.monotonic() + 20
        while answers(url):
            assert time.monotonic() < deadline
            time.sleep(0.05)


def test_unusable_binaries_are_named_with_the_reason(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("SHUNTBOOK_TEST_POSTGRES_BIN", str(tmp_path / "nowhere"))
    with pytest.raises(postgres.NoPostgresError, match="nowhere"):
        postgres.usable_binaries()


async def echo(scope: Message, receive: Callable[[], Awaitable[Message]], send: Any) -> None:
    if scope["type"] == "lifespan":
        while True:
            message = await receive()
            await send({"type": message["type"] + ".complete"})
            if message["type"] == "lifespan.shutdown":
                return
    await send({"type": "http.response.start", "status": 200, "headers": []})
    await send({"type": "http.response.body", "body": scope["path"].encode()})


def test_the_server_answers_until_the_block_ends() -> None:
    with serve(echo) as base_url:
        assert httpx.get(f"{base_url}/anything").text == "/anything"
    with pytest.raises(httpx.ConnectError):
        httpx.get(base_url)


def test_a_start_up_that_fails_is_an_error() -> None:
    async def broken(scope: Message, receive: Callable[[], Awaitable[Message]], send: Any) -> None:
        await receive()
        await send({"type": "lifespan.startup.failed", "message": "no database"})

    with pytest.raises(RuntimeError, match="start-up failed"), serve(broken):
        pass
