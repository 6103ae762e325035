"""A migrated database with two depots, and the clock of the one that the tests use."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, datetime

import pytest

from service.application import depots
from service.application.context import Service
from service.records.engine import Database
from support.register import ENGINEER, Depot


@pytest.fixture
def depot(database_url: str) -> Iterator[Depot]:
    clock = [datetime(2026, 3, 2, 12, tzinfo=UTC)]
    ids = iter(range(1, 10**6))
    database = Database(database_url, 5)
    service = Service(database, lambda: clock[0], lambda: f"00000000-0000-7000-8000-{next(ids):012d}")
    found = Depot(service, clock)
    with service.unit_of_work(ENGINEER) as tx:
        for name in ("ashby", "birchfield"):
            depots.create(tx, name, depots.Terms(f"{name} depot", "UTC", "monday", 4))
    yield found
    database.close()
