"""What watchers see: alive, ready or why not, counts, and logs that give nothing away."""

from __future__ import annotations

import io
import json
import logging
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import httpx
import pytest
from prometheus_client.parser import text_string_to_metric_families

from service.api import logs
from service.app import create_app
from service.records import migrations
from service.settings import Settings
from support.api import Api
from support.server import serve


def test_alive_and_ready(api: Api) -> None:
    client = api.client()
    assert client.get("/health/live").json() == {"state": "ok"}
    assert client.get("/health/ready").json() == {"state": "ok"}


def test_not_migrated_is_not_ready(api: Api, database_url: str) -> None:
    client = api.client("read")
    assert client.get("/v1/depots").status_code == 200
    migrations.downgrade(database_url, "base")
    for path in ("/health/ready", "/v1/depots"):
        answer = client.get(path)
        assert (answer.status_code, answer.json()["type"]) == (500, "/problems/storage-fault")
        assert "shuntbook migrate" in answer.json()["detail"]
    assert client.get("/health/live").status_code == 200


@pytest.mark.parametrize("url", ["postgresql://nobody@127.0.0.1:1/none", "sqlite:////nowhere/at/all.db"])
def test_a_database_that_is_not_there(url: str) -> None:
    with serve(create_app(Settings(database_url=url), ticks=False)) as base_url:
        answer = httpx.get(f"{base_url}/health/ready", timeout=30)
        problem = answer.json()
        assert answer.status_code == problem["status"] >= 500
        assert problem["type"] in ("/problems/unavailable", "/problems/storage-fault")
        assert (answer.status_code == 503) == ("retry-after" in answer.headers)


def test_a_file_that_is_no_database(tmp_path: Path) -> None:
    path = tmp_path / "shuntbook.db"
    path.write_bytes(b"not a database at all, but rather longer than a hundred bytes. " * 20)
    with serve(create_app(Settings(database_url=f"sqlite:///{path}"), ticks=False)) as base_url:
        answer = httpx.get(f"{base_url}/health/ready")
    assert (answer.status_code, answer.json()["type"]) == (500, "/problems/storage-fault")


def counted(client: httpx.Client) -> dict[tuple[str, str], float]:
    families = text_string_to_metric_families(client.get("/metrics").text)
    return {
        (sample.labels["route"], sample.labels["status"]): sample.value
        for family in families
        for sample in family.samples
        if sample.name == "shuntbook_requests_total"
    }


def test_requests_are_counted_by_route_not_by_address(api: Api) -> None:
    api.depot("harrow")
    client = api.client("read")
    for _ in range(3):
        client.get("/v1/depots/harrow")
    client.get("/v1/depots/elsewhere")
    client.get("/secret-address")
    seen = counted(client)
    assert seen["/v1/depots/{depot}", "200"] == 3
    assert seen["/v1/depots/{depot}", "404"] == 1
    assert seen["none", "404"] == 1
    assert "secret-address" not in client.get("/metrics").text


@pytest.fixture
def logged() -> Iterator[io.StringIO]:
    """What a serving process would write to its standard error stream."""
    root = logging.getLogger()
    before, level, stream = root.handlers[:], root.level, io.StringIO()
    logs.to_stderr("info")
    handler = root.handlers[0]
    assert isinstance(handler, logging.StreamHandler)
    handler.setStream(stream)
    yield stream
    root.handlers[:], root.level = before, level


def lines(stream: io.StringIO, event: str) -> list[dict[str, Any]]:
    found = [json.loads(line) for line in stream.getvalue().splitlines()]
    return [line for line in found if line["event"] == event]


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_each_request_is_one_line_without_what_is_private(api: Api, logged: io.StringIO) -> None:
    text = api.key("read", label="handheld")
    answer = api.client().get("/v1/depots?page_size=7", headers={"Authorization": f"Bearer {text}"})
    api.client().get("/v1/depots", headers={"Authorization": "Bearer sbk_guess"})
    api.client().get("/health/live")  # a line is written before the next request is read
    good, bad = lines(logged, "request")[:2]
    assert (good["route"], good["status"], good["key"]) == ("/v1/depots", 200, "handheld")
    assert good["request"] == answer.headers["x-request-id"]
    assert (bad["status"], bad["key"]) == (401, None)
    assert text not in logged.getvalue()
    assert "sbk_" not in logged.getvalue()
    assert "page_size" not in json.dumps([good, bad])


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_a_fault_of_ours_shows_nothing_of_itself(
    api: Api, logged: io.StringIO, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*_: object, **__: object) -> None:
        raise RuntimeError("reading 0.31 of TV114 with sbk_secret")

    monkeypatch.setattr("service.application.depots.listed", broken)
    answer = api.client("read").get("/v1/depots")
    assert (answer.status_code, answer.json()["type"]) == (500, "/problems/internal")
    assert answer.json()["instance"] == answer.headers["x-request-id"]
    (fault,) = lines(logged, "fault")
    assert fault["request"] == answer.headers["x-request-id"]
    assert fault["error"] == "RuntimeError"
    assert any("broken" in frame for frame in fault["frames"])
    for text in (answer.text, logged.getvalue()):
        assert "TV114" not in text
        assert "sbk_secret" not in text
        assert "Traceback" not in text


def test_errors_that_libraries_log_lose_their_messages(logged: io.StringIO) -> None:
    try:
        raise ValueError("reading 0.31 of TV114")
    except ValueError:
        logging.getLogger("uvicorn.error").exception("Exception in ASGI application")
    (line,) = lines(logged, "Exception in ASGI application")
    assert line["error"] == "ValueError"
    assert "TV114" not in logged.getvalue()


HEAVY = ("scipy", "matplotlib", "alembic", "procrastinate", "apscheduler", "xlsxwriter", "numpy", "uvicorn")


def test_nothing_heavy_is_imported_before_it_is_used() -> None:
    script = f"import sys, service.app; print([m for m in {HEAVY} if m in sys.modules])"
    ran = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert ran.stdout.strip() == "[]"
