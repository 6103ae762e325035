"""A depot to visit, on both databases: past HTTP and through it."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from visits.field import NOW, Field, Handheld, furnish, issue_book, opened

from support.api import served


@pytest.fixture
def field(database_url: str) -> Iterator[Field]:
    service, clock = opened(database_url)
    made = furnish(Field(service, clock))
    clock.now = NOW
    yield made
    service.database.close()


@pytest.fixture
def handheld(database_url: str) -> Iterator[Handheld]:
    with served(database_url) as api:
        api.clock.now = api.clock.now.replace(month=1, day=1)
        issue_book(api.service, api.clock)
        made = furnish(Field(api.service, api.clock))
        api.clock.now = NOW
        yield Handheld(api, made)
