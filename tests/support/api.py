"""A served app for tests: a clock that stands until it is moved, keys for the asking, ways in past HTTP."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from itertools import count
from typing import Any

import httpx

from service.app import create_app
from service.application import access, depots
from service.application.context import Service
from service.records.unit_of_work import Actor
from service.settings import Settings
from support.server import serve

ACTOR = Actor("setup", "R. Ashdown")
TERMS = depots.Terms("Harrow Vale signalling depot", "Europe/London", "monday", 5)


@dataclass
class Clock:
    """A clock that stands until it is moved."""

    now: datetime = datetime(2026, 11, 30, 9, 0, tzinfo=UTC)

    def __call__(self) -> datetime:
        return self.now

    def move(self, **by: float) -> None:
        self.now += timedelta(**by)


@dataclass
class Api:
    """The served app, and ways into it past HTTP."""

    base_url: str
    app: Any
    clock: Clock
    labels: Iterator[int] = field(default_factory=count)
    clients: list[httpx.Client] = field(default_factory=list)

    @property
    def service(self) -> Service:
        return self.app.state.service

    def key(self, *scopes: str, depot: str | None = None, **more: Any) -> str:
        """The text of a new key."""
        label = more.pop("label", f"key-{next(self.labels)}")
        wanted = access.Wanted(label, more.pop("holder", "T. Marlow"), scopes, depot, **more)
        with self.service.unit_of_work(ACTOR) as tx:
            return access.create(tx, wanted, f"{label:>32}".encode()[:32])

    def client(self, *scopes: str, depot: str | None = None, **more: Any) -> httpx.Client:
        """A client with a new key of these scopes; with none it sends no key."""
        headers = {}
        if scopes:
            headers["Authorization"] = f"Bearer {self.key(*scopes, depot=depot, **more)}"
        client = httpx.Client(base_url=self.base_url, headers=headers, timeout=30)
        self.clients.append(client)
        return client

    def depot(self, depot: str, terms: depots.Terms = TERMS) -> None:
        with self.service.unit_of_work(ACTOR) as tx:
            depots.create(tx, depot, terms)


@contextmanager
def served(database_url: str) -> Iterator[Api]:
    """The app on a migrated database; its clients are closed at the end."""
    clock = Clock()
    app = create_app(Settings(database_url=database_url), clock, ticks=False)
    with serve(app) as base_url:
        api = Api(base_url, app, clock)
        try:
            yield api
        finally:
            for client in api.clients:
                client.close()
