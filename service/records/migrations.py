"""Bring a database to this version's tables, and say which version it has.

SQLite is migrated on a connection of its own with foreign keys off (a batch rebuild of a parent table
fails or deletes children otherwise), checked before commit.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.errors import StorageFaultError
from service.records.engine import translated, with_driver

PROCRASTINATE_SCHEMA = "procrastinate"


def scripts() -> Path:
    """Where the migration scripts lie: inside the installed package, or beside it in a checkout."""
    packaged = Path(__file__).parents[1] / "_alembic"
    return packaged if packaged.is_dir() else Path(__file__).parents[2] / "alembic"


def _run(url: str, revision: str, *, down: bool) -> None:
    from alembic import command
    from alembic.config import Config

    config = Config()
    config.set_main_option("script_location", str(scripts()))
    engine = sa.create_engine(with_driver(url), poolclass=sa.NullPool)
    move = command.downgrade if down else command.upgrade
    with translated(), engine.connect() as connection:
        sqlite = engine.dialect.name == "sqlite"
        if sqlite:
            raw: Any = connection.connection.dbapi_connection
            raw.isolation_level = None  # or its driver would commit before every CREATE and ALTER
            raw.execute("PRAGMA foreign_keys=OFF")
        with connection.begin():
            if sqlite:
                connection.exec_driver_sql("BEGIN IMMEDIATE")
            config.attributes["connection"] = connection
            move(config, revision)
            if sqlite:
                _check_foreign_keys(connection)
    engine.dispose()


def _check_foreign_keys(connection: Connection) -> None:
    broken = connection.exec_driver_sql("PRAGMA foreign_key_check").fetchall()
    if broken:
        raise StorageFaultError(f"Migration stopped and undone: rows of {broken[0][0]} would point nowhere.")


def upgrade(url: str, revision: str = "head") -> None:
    """Migrate up; all or nothing."""
    _run(url, revision, down=False)


def downgrade(url: str, revision: str) -> None:
    """Migrate down; all or nothing."""
    _run(url, revision, down=True)


def newest() -> str:
    """The revision this version of the service works with."""
    from alembic.config import Config
    from alembic.script import ScriptDirectory

    config = Config()
    config.set_main_option("script_location", str(scripts()))
    head = ScriptDirectory.from_config(config).get_current_head()
    assert head is not None
    return head


def current(connection: Connection) -> str | None:
    """The revision of an open database; None if it was never migrated."""
    if not sa.inspect(connection).has_table("alembic_version"):
        return None
    found = connection.execute(sa.text("SELECT version_num FROM alembic_version")).scalar_one_or_none()
    return None if found is None else str(found)
