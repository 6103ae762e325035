"""A hundred clients at once through a real server: every one is answered, and each visit is stored once."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import httpx
import pytest
import sqlalchemy as sa

from service.application import verification
from service.records.tables import ReadingRow, VisitRow
from support.api import Api, served
from support.world import World, furnished, visit_id

CLIENTS = 100
VISITS = "/v1/depots/harrow/visits"
VISIT, READING = VisitRow.__table__, ReadingRow.__table__  # type: ignore[attr-defined]


@pytest.fixture
def api(database_url: str) -> Iterator[Api]:
    with served(database_url) as found:
        yield found


@pytest.fixture
def world(api: Api) -> World:
    made = furnished(api.service, api.clock)
    for number in range(10):
        made.section(f"A{number}")
    return made


def body(number: int) -> dict[str, Any]:
    reading = {"quantity": "drop_shunt", "test_point": "relay_end", "stage": "as_left", "instrument": "SB"}
    return {
        "visit": visit_id(number),
        "section": f"A{number % 10}",
        "visited_at": "2026-11-02T08:00:00Z",
        "readings": [reading | {"comparison": "eq", "value": 0.8, "unit": "Ohm"}],
    }


def all_at_once(api: Api, key: str, bodies: list[dict[str, Any]]) -> list[int]:
    """The statuses; each client keeps a connection of its own, and all send at the same moment."""
    barrier = threading.Barrier(len(bodies), timeout=60)

    def post(sent: dict[str, Any]) -> int:
        headers = {"Authorization": f"Bearer {key}"}
        with httpx.Client(base_url=api.base_url, headers=headers, timeout=60) as client:
            client.get("/health/live")
            barrier.wait()
            return client.post(VISITS, json=sent).status_code

    with ThreadPoolExecutor(len(bodies)) as pool:
        return list(pool.map(post, bodies))


def test_a_hundred_visits(api: Api, world: World) -> None:
    key = api.key("readings")
    statuses = all_at_once(api, key, [body(number) for number in range(CLIENTS)])
    assert statuses == [201] * CLIENTS
    with world.service.read(snapshot=True) as connection:
        assert connection.execute(sa.select(sa.func.count()).select_from(VISIT)).scalar_one() == CLIENTS
        assert connection.execute(sa.select(sa.func.count()).select_from(READING)).scalar_one() == CLIENTS
        assert list(verification.broken_chains(connection)) == []
        assert list(verification.mismatched_visits(connection)) == []


def test_the_same_visit_a_hundred_times(api: Api, world: World) -> None:
    statuses = all_at_once(api, api.key("readings"), [body(1)] * CLIENTS)
    assert sorted(statuses) == [200] * (CLIENTS - 1) + [201]
    with world.service.read() as connection:
        assert connection.execute(sa.select(sa.func.count()).select_from(READING)).scalar_one() == 1
