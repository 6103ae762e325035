"""A copy of the whole database, taken while it is in use.

SQLite by its online copy, PostgreSQL by its own `pg_dump`. Restoring is an operator's work.
"""

from __future__ import annotations

import os
import shutil
import sqlite3
import subprocess
from contextlib import closing
from pathlib import Path

from sqlalchemy.engine import make_url

from service.errors import ConflictError, StorageFaultError
from service.records.engine import sqlite_path, translated


def take(url: str, target: Path) -> None:
    """Write a copy to a new file, which appears under its name only once it is whole.

    Raises
    ------
    ConflictError
        If the file exists.
    StorageFaultError
        If the copy cannot be made or is not sound.
    """
    if target.exists():
        raise ConflictError(f"{target} exists; name a new file.")
    partial = target.with_name(f"{target.name}.partial")
    source = sqlite_path(url)
    try:
        if source is None:
            _dump(url, partial)
        else:
            _copy(source, partial)
        partial.replace(target)
    except OSError as error:
        raise StorageFaultError(f"{target} cannot be written: {error.strerror}.") from error
    finally:
        partial.unlink(missing_ok=True)


def _copy(source: Path, target: Path) -> None:
    if not source.exists():
        raise StorageFaultError(f"There is no database at {source}.")
    with translated(), closing(sqlite3.connect(source)) as live, closing(sqlite3.connect(target)) as copy:
        live.backup(copy)
        copy.execute("PRAGMA journal_mode=DELETE")  # one file, not three
        if copy.execute("PRAGMA integrity_check").fetchall() != [("ok",)]:
            raise StorageFaultError("The copy is damaged, and so may the database be.")


def _dump(url: str, target: Path) -> None:
    program = shutil.which("pg_dump")
    if program is None:
        raise StorageFaultError("pg_dump is not installed here; it comes with PostgreSQL's client programs.")
    parsed = make_url(url)
    named = {
        "PGHOST": parsed.host,
        "PGPORT": parsed.port,
        "PGUSER": parsed.username,
        "PGPASSWORD": parsed.password,
        "PGDATABASE": parsed.database,
    }
    # By the environment, not the command line, which every user of the machine can read.
    environment = os.environ | {name: str(value) for name, value in named.items() if value is not None}
    command = [program, "--format=custom", f"--file={target}", "--no-password"]
    ran = subprocess.run(command, env=environment, capture_output=True, text=True, check=False)  # noqa: S603
    if ran.returncode != 0:
        raise StorageFaultError(f"pg_dump failed: {ran.stderr.strip()}")
