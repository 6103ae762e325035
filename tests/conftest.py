"""What every test can ask for. Helpers that are not fixtures are in `support/`."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import pytest

from support import postgres


def pytest_ignore_collect(collection_path: Path) -> bool | None:
    """Look for doctests in `service/` only: helpers and benches under `tests/` are not imported."""
    if collection_path.suffix == ".py" and not collection_path.name.startswith("test_"):
        return True
    return None


def pytest_xdist_auto_num_workers(config: pytest.Config) -> int:
    """Two processes for the whole suite; for a few files, starting them costs more than it saves."""
    return 2 if config.args_source is pytest.Config.ArgsSource.TESTPATHS else 0


def migrate(url: str) -> None:
    """Bring an empty database to the newest schema; done once, and copied for every test."""
    from service.records.migrations import upgrade

    upgrade(url)


@pytest.fixture(scope="session")
def postgres_databases() -> Iterator[postgres.Databases]:
    """A PostgreSQL server and its databases; where none can be had, whoever asks fails with the reason."""
    with postgres.databases() as found:
        yield found


@pytest.fixture(scope="session")
def sqlite_template(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A migrated SQLite file; copy it, do not open it."""
    path = tmp_path_factory.mktemp("template") / "shuntbook.db"
    migrate(f"sqlite:///{path}")
    return path


@pytest.fixture
def sqlite_url(sqlite_template: Path, tmp_path: Path) -> str:
    """A migrated, empty SQLite database of this test's own."""
    path = tmp_path / "shuntbook.db"
    with closing(sqlite3.connect(sqlite_template)) as source, closing(sqlite3.connect(path)) as copy:
        source.backup(copy)
    return f"sqlite:///{path}"


@pytest.fixture
def postgres_url(postgres_databases: postgres.Databases) -> Iterator[str]:
    """A migrated, empty PostgreSQL database of this test's own; mark a test that asks for it `postgres`."""
    with postgres_databases.cloned(migrate) as url:
        yield url


@pytest.fixture(params=["sqlite", pytest.param("postgres", marks=pytest.mark.postgres)])
def database_url(request: pytest.FixtureRequest) -> str:
    """The same test on both databases: a migrated, empty one each time."""
    url: str = request.getfixturevalue(f"{request.param}_url")
    return url
