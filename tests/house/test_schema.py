"""Migrations and tables say the same, on both databases, up and down and up again."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
import sqlalchemy as sa
from alembic.autogenerate import compare_metadata
from alembic.migration import MigrationContext

from service.records import migrations
from service.records.engine import with_driver
from service.records.tables import metadata


@pytest.fixture
def engine(database_url: str) -> Iterator[sa.Engine]:
    engine = sa.create_engine(with_driver(database_url), poolclass=sa.NullPool)
    yield engine
    engine.dispose()


def differences(engine: sa.Engine) -> list[object]:
    with engine.connect() as connection:
        context = MigrationContext.configure(connection, opts={"compare_type": True})
        return list(compare_metadata(context, metadata))


def test_migrated_tables_are_the_tables_of_the_model(engine: sa.Engine) -> None:
    assert differences(engine) == []


def test_down_to_nothing_and_up_again(engine: sa.Engine, database_url: str) -> None:
    migrations.downgrade(database_url, "base")
    left = set(sa.inspect(engine).get_table_names())
    assert left <= {"alembic_version"}
    migrations.upgrade(database_url)
    assert differences(engine) == []
