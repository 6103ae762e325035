"""The folder a demo lives in: its database, told from others by a marker, and the file of its keys.

Only a database with the marker is ever deleted. What is in it is built elsewhere (`build`).
"""

from __future__ import annotations

import json
import os
import sqlite3
from collections.abc import Mapping
from contextlib import closing
from pathlib import Path

from filelock import FileLock, Timeout

from service.errors import ConflictError, StorageFaultError

DATABASE = "shuntbook-demo.db"
KEYS = "demo-keys.json"

MARKER = 0x53684264
"""SQLite's application id of a demo's database, bytes 68 to 71 of the file."""

_ID_AT = 68
_BESIDE = ("", "-wal", "-shm", "-journal")


def database(directory: Path) -> Path:
    """The demo's database file in a folder."""
    return directory / DATABASE


def is_demo(path: Path) -> bool:
    """Whether the file is a SQLite database with the demo's marker."""
    with path.open("rb") as file:
        head = file.read(_ID_AT + 4)
    return head.startswith(b"SQLite format 3\0") and head[_ID_AT:] == MARKER.to_bytes(4, "big")


def is_complete(directory: Path) -> bool:
    """Whether there is a demo that was built to its end: its keys are written last."""
    path = database(directory)
    return path.exists() and is_demo(path) and (directory / KEYS).exists()


def make_fresh(directory: Path) -> Path:
    """An empty database with the marker, in place of the demo that was there, if one was.

    Raises
    ------
    StorageFaultError
        If a file of that name is no demo: it is left alone.
    ConflictError
        If another process serves the demo that is there.
    """
    directory.mkdir(parents=True, exist_ok=True)
    path = database(directory)
    try:
        with FileLock(path.with_name(f"{path.name}.lock"), timeout=0):
            if path.exists():
                _delete(path)
            (directory / KEYS).unlink(missing_ok=True)
            with closing(sqlite3.connect(path)) as connection:
                connection.execute(f"PRAGMA application_id = {MARKER}")
    except Timeout:
        raise ConflictError(f"Another process serves {path}.") from None
    return path


def _delete(path: Path) -> None:
    if not is_demo(path):
        raise StorageFaultError(f"{path} is not a demo's database; nothing was deleted. Name another folder.")
    for ending in _BESIDE:
        path.with_name(f"{path.name}{ending}").unlink(missing_ok=True)


def write_keys(directory: Path, keys: Mapping[str, str]) -> Path:
    """Write the keys by scope, for the owner's eyes only."""
    path = directory / KEYS
    descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    with os.fdopen(descriptor, "w", encoding="utf-8") as file:
        json.dump(dict(keys), file, indent=2)
        file.write("\n")
    return path
