"""The composition root: settings in, the running service out.

Besides `cli.py` this is the only place that reads the clock and makes ids; tests build the same app with
a clock of their own.
"""

from __future__ import annotations

import gc
import os
import socket
from collections.abc import AsyncIterator, Callable, Iterator
from contextlib import asynccontextmanager, contextmanager
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

import anyio.to_thread
from fastapi import FastAPI
from fastapi.routing import APIRoute
from fastapi_offline import FastAPIOffline
from filelock import FileLock, Timeout
from uuid6 import uuid7

from service.api import logs, openapi, problems
from service.api.deps import parameters_of
from service.api.logs import Frame, Metrics
from service.api.routes import ROUTERS
from service.application.context import Service
from service.errors import ConflictError, NotAcceptableError, StorageFaultError
from service.jobs import scheduler
from service.records import migrations
from service.records.engine import Database, sqlite_path
from service.settings import Settings, from_environment

DESCRIPTION = (
    "Track circuit records, limits and verdicts for a signalling depot. Everything here is advice: it "
    "authorises nothing, and defers to the railway's own rules and to a competent, licensed person."
)

STOPS_WITHIN_S = 10
"""How long requests under way may take to finish when the server is told to stop."""


def utc_now() -> datetime:
    """Now, as an aware UTC instant."""
    return datetime.now(UTC)


def new_id() -> str:
    """A new UUIDv7."""
    return str(uuid7())


def make_service(settings: Settings, clock: Callable[[], datetime] = utc_now) -> Service:
    """The service without its HTTP side; opens nothing yet."""
    return Service(Database(settings.database_url, settings.threads), clock, new_id)


def create_app(settings: Settings, clock: Callable[[], datetime] = utc_now, *, ticks: bool = True) -> FastAPI:
    """The web app. With `ticks`, a SQLite database gets its hourly look at due audits in this process."""
    logs.configure()
    service = make_service(settings, clock)
    metrics = Metrics()

    @asynccontextmanager
    async def lifespan(_app: FastAPI) -> AsyncIterator[None]:
        anyio.to_thread.current_default_thread_limiter().total_tokens = settings.threads
        stop = scheduler.start(service) if ticks and service.database.is_sqlite else None
        yield
        if stop is not None:
            stop()
        service.database.close()

    app = FastAPIOffline(
        title="Shuntbook",
        version=version("shuntbook"),
        description=DESCRIPTION,
        lifespan=lifespan,
        redirect_slashes=False,
    )
    for router in ROUTERS:
        app.router.routes.extend(router.routes)  # flat, so that every route is found by its address
    app.state.service = service
    app.state.metrics = metrics
    app.state.parameters = {
        route.endpoint: parameters_of(route.dependant) for route in app.routes if isinstance(route, APIRoute)
    }
    app.add_middleware(Frame, new_id=service.new_id, metrics=metrics)
    problems.install(app)
    openapi.install(app)
    return app


def app_from_environment() -> FastAPI:
    """The app of one of several server processes."""
    settings = from_environment(os.environ)
    logs.to_stderr(settings.log_level)
    return create_app(settings)


def serve(settings: Settings, *, host: str, port: int, workers: int) -> None:
    """Serve until told to stop.

    Raises
    ------
    NotAcceptableError
        For more than one process on SQLite: the one write lock lives in the process.
    ConflictError
        If another process serves the same SQLite file.
    StorageFaultError
        If the database is not migrated.
    """
    path = sqlite_path(settings.database_url)
    if path is not None and workers > 1:
        raise NotAcceptableError(
            "SQLite has one writer, whose lock lives in the process: use one worker, or PostgreSQL."
        )
    import uvicorn

    require_migrated(settings)
    with alone_on(path):
        options: dict[str, Any] = {"host": host, "port": port, "log_config": None, "access_log": False}
        options["server_header"] = False
        options["timeout_graceful_shutdown"] = STOPS_WITHIN_S
        if workers == 1:
            logs.to_stderr(settings.log_level)
            app = create_app(settings)
            gc.freeze()  # what is imported stays: looking at it again costs an audit a tenth of its time
            uvicorn.run(app, **options)
        else:
            with _listening(host, port) as listener:
                uvicorn.run(
                    "service.app:app_from_environment", factory=True, workers=workers, fd=listener, **options
                )


@contextmanager
def _listening(host: str, port: int) -> Iterator[int]:
    """A socket for several processes, as a file descriptor, without Nagle's algorithm.

    The event loop leaves that on for a socket it is handed, and every second answer on a connection would
    wait 40 ms for the client's acknowledgement.
    """
    family = socket.AF_INET6 if ":" in host else socket.AF_INET
    with socket.create_server((host, port), family=family, backlog=2048) as listener:
        listener.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        listener.set_inheritable(True)
        yield listener.fileno()


@contextmanager
def alone_on(path: Path | None) -> Iterator[None]:
    """Hold the lock of a SQLite file for as long as this process serves or migrates it; None needs none.

    Raises
    ------
    ConflictError
        If another process holds it.
    StorageFaultError
        If the folder is not there.
    """
    if path is None:
        yield
        return
    if not path.absolute().parent.is_dir():
        raise StorageFaultError(f"There is no folder {path.parent}.")
    try:
        lock = FileLock(path.with_name(f"{path.name}.lock"), timeout=0).acquire()
    except Timeout:
        raise ConflictError(f"Another process serves {path}.") from None
    with lock:
        yield


def require_migrated(settings: Settings) -> None:
    """StorageFaultError if the database does not hold this version's tables."""
    path = sqlite_path(settings.database_url)
    if path is not None and not path.exists():  # opening it would make an empty one
        raise StorageFaultError(f"There is no database at {path}: run `shuntbook migrate`.")
    database = Database(settings.database_url, 1)
    with database.read() as connection:
        current = migrations.current(connection)
    database.close()
    if current != migrations.newest():
        raise StorageFaultError("The database is not migrated to this version: run `shuntbook migrate`.")
