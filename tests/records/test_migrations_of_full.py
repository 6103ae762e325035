"""Migrating a database full of rows: down, up, and a next revision that rebuilds a parent table.

There is one revision yet. The ones that would follow are written here, so that what runs them is tried.
"""

from __future__ import annotations

import shutil
from pathlib import Path
from typing import Any

import pytest
import sqlalchemy as sa

from service.errors import ShuntbookError, StorageFaultError
from service.records import migrations
from service.records.engine import with_driver
from service.records.tables import metadata
from support.house import ROOT
from support.world import World, furnished

REVISION = '''"""{title}"""

import sqlalchemy as sa
from alembic import op

revision, down_revision, branch_labels, depends_on = "{name}", "0001", None, None


def upgrade() -> None:
{up}


def downgrade() -> None:
    with op.batch_alter_table("section") as batch:
        batch.drop_column("colour")
'''
WIDER = """    with op.batch_alter_table("section") as batch:
        batch.add_column(sa.Column("colour", sa.String(), nullable=True))
        batch.alter_column("folded", existing_type=sa.String(), nullable=True)"""


def rows(url: str) -> dict[str, list[Any]]:
    """Every row of our tables, as the database has them."""
    engine = sa.create_engine(with_driver(url), poolclass=sa.NullPool)
    with engine.connect() as connection:
        found = {
            name: sorted(repr(sorted(row.items())) for row in connection.execute(sa.select(table)).mappings())
            for name, table in metadata.tables.items()
        }
    engine.dispose()
    return found


def tables(url: str) -> set[str]:
    engine = sa.create_engine(with_driver(url), poolclass=sa.NullPool)
    names = set(sa.inspect(engine).get_table_names())
    engine.dispose()
    return names


def columns(url: str, table: str) -> set[str]:
    engine = sa.create_engine(with_driver(url), poolclass=sa.NullPool)
    names = {column["name"] for column in sa.inspect(engine).get_columns(table)}
    engine.dispose()
    return names


def shape_of(url: str) -> dict[str, tuple[set[str], set[str | None]]]:
    """Columns and indexes of every table."""
    engine = sa.create_engine(with_driver(url), poolclass=sa.NullPool)
    inspector = sa.inspect(engine)
    found = {
        name: (
            {column["name"] for column in inspector.get_columns(name)},
            {index["name"] for index in inspector.get_indexes(name)},
        )
        for name in inspector.get_table_names()
    }
    engine.dispose()
    return found


def current(url: str) -> str | None:
    engine = sa.create_engine(with_driver(url), poolclass=sa.NullPool)
    with engine.connect() as connection:
        found = migrations.current(connection)
    engine.dispose()
    return found


def with_next(folder: Path, monkeypatch: pytest.MonkeyPatch, up: str) -> None:
    """Migration scripts with one more revision, whose upgrade is `up`."""
    shutil.copytree(ROOT / "alembic", folder, ignore=shutil.ignore_patterns("__pycache__"))
    (folder / "versions" / "0002_next.py").write_text(REVISION.format(title="The next.", name="0002", up=up))
    monkeypatch.setattr(migrations, "scripts", lambda: folder)


@pytest.fixture
def url(full: World) -> str:
    """A full database that nobody has open."""
    full.service.database.close()
    return full.service.database.url


def test_every_table_has_rows(url: str) -> None:
    assert [name for name, found in rows(url).items() if not found] == []


def test_down_and_up_again(url: str, full: World) -> None:
    migrations.downgrade(url, "base")
    assert not tables(url) & set(metadata.tables)
    assert current(url) is None
    migrations.upgrade(url)
    assert {name for name, found in rows(url).items() if found} == {"journal_head"}
    furnished(full.service, full.clock).section("A1")


def test_migrating_what_is_migrated_changes_nothing(url: str) -> None:
    before = rows(url)
    migrations.upgrade(url)
    assert rows(url) == before


def test_a_parent_table_rebuilt_keeps_every_row(
    url: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = rows(url)
    with_next(tmp_path / "alembic", monkeypatch, WIDER)
    migrations.upgrade(url)
    assert current(url) == migrations.newest() == "0002"
    assert "colour" in columns(url, "section")
    assert rows(url) == before
    migrations.downgrade(url, "0001")
    assert "colour" not in columns(url, "section")
    assert rows(url) == before


HALVES = {
    "rows": '    op.execute("DELETE FROM reading")',
    "a table made": '    op.create_table("colour", sa.Column("name", sa.String(), primary_key=True))',
    "a column added": '    op.add_column("section", sa.Column("colour", sa.String()))',
    "an index gone": '    op.drop_index("ix_visit_section", "visit")',
    "a table rebuilt": WIDER,
}


@pytest.mark.parametrize("half", HALVES)
def test_a_migration_half_done_is_undone(
    url: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, half: str
) -> None:
    before, shape = rows(url), shape_of(url)
    with_next(tmp_path / "alembic", monkeypatch, HALVES[half] + '\n    raise RuntimeError("half way")')
    with pytest.raises(RuntimeError, match="half way"):
        migrations.upgrade(url)
    assert current(url) == "0001"
    assert shape_of(url) == shape
    assert rows(url) == before


def test_a_migration_that_would_leave_rows_pointing_nowhere_is_undone(
    url: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = rows(url)
    with_next(
        tmp_path / "alembic", monkeypatch, "    op.execute(\"DELETE FROM section WHERE section = 'A1'\")"
    )
    with pytest.raises((ShuntbookError, sa.exc.IntegrityError)) as refused:
        migrations.upgrade(url)
    if url.startswith("sqlite"):
        assert isinstance(refused.value, StorageFaultError)
        assert "point nowhere" in refused.value.detail
    assert current(url) == "0001"
    assert rows(url) == before


def test_a_statement_that_fails_half_way_is_undone(
    url: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    before, shape = rows(url), shape_of(url)
    with_next(tmp_path / "alembic", monkeypatch, WIDER + '\n    op.execute("INSERT INTO nowhere VALUES (1)")')
    with pytest.raises(ShuntbookError):
        migrations.upgrade(url)
    assert current(url) == "0001"
    assert shape_of(url) == shape
    assert rows(url) == before
