"""A migrated database with two depots in far-apart zones, whose clock the test moves."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, datetime

import pytest

from service.app import create_app
from service.application import depots
from service.application.context import Service
from service.records.engine import Database
from service.settings import Settings
from support.limit_books import DRAFTER, Api, Shelf, keys
from support.server import serve


@pytest.fixture
def shelf(database_url: str) -> Iterator[Shelf]:
    clock = [datetime(2026, 3, 2, 9, tzinfo=UTC)]
    ids = iter(range(1, 10**6))
    database = Database(database_url, 5)
    service = Service(database, lambda: clock[0], lambda: f"00000000-0000-7000-8000-{next(ids):012d}")
    with service.unit_of_work(DRAFTER) as tx:
        for name, zone in (("ashby", "Pacific/Kiritimati"), ("birchfield", "Pacific/Honolulu")):
            depots.create(tx, name, depots.Terms(f"{name} depot", zone, "monday", 4))
    yield Shelf(service, clock, database_url)
    database.close()


@pytest.fixture
def api(shelf: Shelf) -> Iterator[Api]:
    issued = shelf.write(keys)
    app = create_app(Settings(database_url=shelf.url, threads=5), lambda: shelf.clock[0], ticks=False)
    with serve(app) as base_url:
        yield Api(base_url, shelf, issued)
