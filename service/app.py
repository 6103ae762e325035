"""The composition root: settings in, the running service out.

Besides `cli.py` this is the only place that reads the clock and makes ids; tests build the same app with
a clock of their own.
"""

from __future__ import annotations

from collections.abc import AsyncIterator, Callable
from contextlib import asynccontextmanager
from datetime import UTC, datetime
from importlib.metadata import version

import anyio.to_thread
from fastapi import FastAPI
from fastapi.routing import APIRoute
from fastapi_offline import FastAPIOffline
from uuid6 import uuid7

from service.api import openapi, problems
from service.api.deps import parameters_of
from service.api.logs import Frame, Metrics
from service.api.routes import ROUTERS
from service.application.context import Service
from service.jobs import scheduler
from service.records.engine import Database
from service.settings import Settings

DESCRIPTION = (
    "Track circuit records, limits and verdicts for a signalling depot. Everything here is advice: it "
    "authorises nothing, and defers to the railway's own rules and to a competent, licensed person."
)


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
