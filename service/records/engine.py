"""One database: its engine, its reads and its units of work.

SQLite runs in WAL with one writer at a time behind an in-process lock; PostgreSQL through psycopg.
What the drivers raise is turned into the service's errors here and nowhere else.
"""

from __future__ import annotations

import hashlib
import sqlite3
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import sqlalchemy as sa
from sqlalchemy import event, exc
from sqlalchemy.engine import URL, Connection, Engine, make_url

from service.errors import StorageFaultError, UnavailableError

WAIT_S = 5.0
"""How long anything waits for a lock or a pooled connection before it answers 503."""


def sqlite_path(url: str) -> Path | None:
    """The file of a SQLite URL; None for any other database."""
    parsed = make_url(url)
    return Path(parsed.database or "") if parsed.get_backend_name() == "sqlite" else None


def with_driver(url: str) -> URL:
    """The URL with the driver we use: psycopg for PostgreSQL, the standard one for SQLite."""
    parsed = make_url(url)
    if parsed.get_backend_name() in ("postgresql", "postgres"):
        return parsed.set(drivername="postgresql+psycopg")
    return parsed


def make_engine(url: str, pool_size: int) -> Engine:
    """Open nothing yet; connections are made when first needed."""
    parsed = with_driver(url)
    if parsed.get_backend_name() == "sqlite":
        return _sqlite_engine(parsed, pool_size)
    return sa.create_engine(
        parsed,
        pool_size=pool_size,
        max_overflow=0,
        pool_timeout=WAIT_S,
        pool_use_lifo=True,
        connect_args={
            "options": f"-c jit=off -c lock_timeout={int(WAIT_S * 1000)} -c timezone=UTC",
            "connect_timeout": int(WAIT_S),
        },
    )


def _sqlite_engine(url: URL, pool_size: int) -> Engine:
    engine = sa.create_engine(
        url,
        poolclass=sa.QueuePool,
        pool_size=pool_size,
        max_overflow=0,
        pool_timeout=WAIT_S,
        connect_args={"timeout": WAIT_S, "check_same_thread": False},
    )

    @event.listens_for(engine, "connect")
    def _configure(connection: sqlite3.Connection, _record: object) -> None:
        connection.isolation_level = None  # we say BEGIN ourselves
        for pragma in ("journal_mode=WAL", "synchronous=FULL", "foreign_keys=ON"):
            connection.execute(f"PRAGMA {pragma}")

    @event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        writes = connection.get_execution_options().get("shuntbook_writes", False)
        connection.exec_driver_sql("BEGIN IMMEDIATE" if writes else "BEGIN")

    return engine


@contextmanager
def translated() -> Iterator[None]:
    """Turn what the database raises into `UnavailableError` or `StorageFaultError`."""
    try:
        yield
    except exc.TimeoutError as error:
        raise UnavailableError("The service is busy; post the same again shortly.") from error
    except exc.DBAPIError as error:
        meaning = _meaning(error)
        if meaning is error:
            raise
        raise meaning from error
    except sqlite3.Error as error:
        meaning = _sqlite_meaning(error)
        if meaning is error:
            raise
        raise meaning from error


def _meaning(error: exc.DBAPIError) -> Exception:
    if isinstance(error, exc.IntegrityError):
        return _taken(error)
    if isinstance(error.orig, sqlite3.Error):
        return _sqlite_meaning(error.orig, error)
    state = str(getattr(error.orig, "sqlstate", None) or "")
    if state in ("42P01", "42703", "42883"):  # a table, column or function is missing
        return StorageFaultError("The database is not migrated to this version: run `shuntbook migrate`.")
    if state in ("55P03", "40P01", "40001"):  # a lock not had in time, a deadlock, a write that lost
        return UnavailableError("Others are writing here at the moment; post the same again shortly.")
    if state.startswith("53") or state == "25006":
        return UnavailableError("The database has no room or takes no writes at the moment; try again later.")
    if error.connection_invalidated or isinstance(error, exc.OperationalError | exc.InterfaceError):
        return UnavailableError(
            "The database was not reached, or went away: what was sent may or may not have been stored. "
            "Post the same again."
        )
    return error


def _taken(error: exc.DBAPIError) -> Exception:
    """Two requests made the same record at the same moment; anything else is a fault of ours."""
    unique = getattr(error.orig, "sqlstate", None) == "23505" or getattr(
        error.orig, "sqlite_errorcode", None
    ) in (sqlite3.SQLITE_CONSTRAINT_UNIQUE, sqlite3.SQLITE_CONSTRAINT_PRIMARYKEY)
    if unique:
        return UnavailableError(
            "Another request wrote the same record at the same moment; post the same again."
        )
    return error


def _sqlite_meaning(error: sqlite3.Error, wrapped: Exception | None = None) -> Exception:
    code = getattr(error, "sqlite_errorcode", None)
    primary = None if code is None else code & 0xFF
    if primary in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
        return UnavailableError("The database is locked by another process; post the same again shortly.")
    if primary == sqlite3.SQLITE_FULL:
        return UnavailableError(
            "The disk is full: nothing was stored. Post the same again once there is room."
        )
    if primary == sqlite3.SQLITE_IOERR:
        return UnavailableError(
            "The database file could not be written: nothing was stored. Post the same again."
        )
    if primary in (sqlite3.SQLITE_CORRUPT, sqlite3.SQLITE_NOTADB):
        return StorageFaultError("The database file is damaged or is no database: restore it from a backup.")
    if primary in (sqlite3.SQLITE_CANTOPEN, sqlite3.SQLITE_READONLY, sqlite3.SQLITE_PERM):
        return StorageFaultError("The database file cannot be opened for writing.")
    if primary == sqlite3.SQLITE_ERROR and "no such" in str(error):
        return StorageFaultError("The database is not migrated to this version: run `shuntbook migrate`.")
    return wrapped or error


class Database:
    """The engine with the one write lock that SQLite needs."""

    def __init__(self, url: str, pool_size: int) -> None:
        self.url = url
        self.engine = make_engine(url, pool_size)
        self.is_sqlite = self.engine.dialect.name == "sqlite"
        self.memory: dict[str, Any] = {}
        self._write_lock = threading.Lock()

    @contextmanager
    def read(self, *, snapshot: bool = False) -> Iterator[Connection]:
        """A connection to read with; with `snapshot`, every statement sees the same state.

        SQLite always reads a snapshot. Ends without writing.
        """
        options: dict[str, Any] = {}
        if not self.is_sqlite:
            options["isolation_level"] = "REPEATABLE READ" if snapshot else "AUTOCOMMIT"
        with translated(), self.engine.connect().execution_options(**options) as connection:
            yield connection

    @contextmanager
    def write(self) -> Iterator[Connection]:
        """A connection in a write transaction, committed at the end and rolled back on any error.

        Raises
        ------
        UnavailableError
            When a lock or connection was not to be had in time, or the database went away. If that
            happens at COMMIT, the write may have happened.
        """
        with translated(), self._sqlite_turn(), self.engine.connect() as plain:
            connection = plain.execution_options(shuntbook_writes=True)
            with connection.begin():
                yield connection

    @contextmanager
    def _sqlite_turn(self) -> Iterator[None]:
        if not self.is_sqlite:
            yield
            return
        if not self._write_lock.acquire(timeout=WAIT_S):
            raise UnavailableError("Many are writing at once; post the same again shortly.")
        try:
            yield
        finally:
            self._write_lock.release()

    def close(self) -> None:
        """Close every pooled connection."""
        self.engine.dispose()


def digest_of(text: str) -> str:
    """SHA-256 of the text's UTF-8, in lower-case hex."""
    return hashlib.sha256(text.encode()).hexdigest()
