"""A depot to visit, on both databases: past HTTP and through it. Furnished once, and copied for each test."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import pytest
from visits.field import NOW, Field, Handheld, furnish, issue_book, opened

from service.records.migrations import upgrade
from support import postgres
from support.api import served


def prepare(url: str) -> None:
    """Migrate and furnish an empty database."""
    upgrade(url)
    service, clock = opened(url)
    issue_book(service, clock)
    furnish(Field(service, clock))
    service.database.close()


@pytest.fixture(scope="session")
def furnished_template(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("furnished") / "shuntbook.db"
    prepare(f"sqlite:///{path}")
    return path


@pytest.fixture(params=["sqlite", pytest.param("postgres", marks=pytest.mark.postgres)])
def furnished_url(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[str]:
    """A database of this test's own with the depot in it."""
    if request.param == "sqlite":
        path = tmp_path / "shuntbook.db"
        template = request.getfixturevalue("furnished_template")
        with closing(sqlite3.connect(template)) as source, closing(sqlite3.connect(path)) as copy:
            source.backup(copy)
        yield f"sqlite:///{path}"
    else:
        databases: postgres.Databases = request.getfixturevalue("postgres_databases")
        with databases.cloned(prepare) as url:
            yield url


@pytest.fixture
def field(furnished_url: str) -> Iterator[Field]:
    service, clock = opened(furnished_url)
    clock.now = NOW
    yield Field(service, clock)
    service.database.close()


@pytest.fixture
def handheld(furnished_url: str) -> Iterator[Handheld]:
    with served(furnished_url) as api:
        api.clock.now = NOW
        yield Handheld(api, Field(api.service, api.clock))
