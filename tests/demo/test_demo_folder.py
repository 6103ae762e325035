"""The demo's folder: only a database with its marker is deleted, and keys are for the owner's eyes."""

from __future__ import annotations

import json
import sqlite3
import stat
from contextlib import closing
from pathlib import Path

import pytest
from filelock import FileLock

from service.demo import folder
from service.errors import ConflictError, StorageFaultError
from service.records import migrations


def test_a_fresh_database_is_marked_and_stays_so_when_migrated(tmp_path: Path) -> None:
    path = folder.make_fresh(tmp_path / "new")
    assert folder.is_demo(path)
    migrations.upgrade(f"sqlite:///{path}")
    assert folder.is_demo(path)


def test_an_old_demo_makes_room_for_a_new_one(tmp_path: Path) -> None:
    path = folder.make_fresh(tmp_path)
    migrations.upgrade(f"sqlite:///{path}")
    folder.write_keys(tmp_path, {"read": "old"})
    assert folder.is_complete(tmp_path)
    folder.make_fresh(tmp_path)
    with closing(sqlite3.connect(path)) as connection:
        assert connection.execute("SELECT count(*) FROM sqlite_master").fetchone() == (0,)
    assert not folder.is_complete(tmp_path)


@pytest.mark.parametrize("content", [b"", b"a letter", b"SQLite format 3\0" + bytes(200)])
def test_what_is_no_demo_is_left_alone(tmp_path: Path, content: bytes) -> None:
    path = folder.database(tmp_path)
    path.write_bytes(content)
    with pytest.raises(StorageFaultError):
        folder.make_fresh(tmp_path)
    assert path.read_bytes() == content


def test_another_database_under_its_name_is_left_alone(tmp_path: Path) -> None:
    migrations.upgrade(f"sqlite:///{folder.database(tmp_path)}")
    with pytest.raises(StorageFaultError):
        folder.make_fresh(tmp_path)
    assert not folder.is_complete(tmp_path)


def test_a_demo_that_is_served_is_left_alone(tmp_path: Path) -> None:
    path = folder.make_fresh(tmp_path)
    with FileLock(path.with_name(f"{path.name}.lock"), timeout=0), pytest.raises(ConflictError):
        folder.make_fresh(tmp_path)


def test_the_keys_are_written_for_the_owner_alone(tmp_path: Path) -> None:
    path = folder.write_keys(tmp_path, {"read": "a", "audit": "b"})
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert json.loads(path.read_text()) == {"read": "a", "audit": "b"}
