"""What every use of the service needs: the database, the clock, ids, and the bounds it keeps.

Built once by the composition root; passed as an argument, never looked up.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import datetime

from sqlalchemy.engine import Connection

from service.records.engine import Database
from service.records.unit_of_work import Actor, Transaction, unit_of_work

__all__ = ["Actor", "Service"]


@dataclass(frozen=True, slots=True)
class Service:
    """The running service. `clock` gives aware UTC instants, `new_id` a new UUIDv7 as text."""

    database: Database
    clock: Callable[[], datetime]
    new_id: Callable[[], str]

    @contextmanager
    def unit_of_work(self, actor: Actor) -> Iterator[Transaction]:
        """One write transaction at the clock's now."""
        with unit_of_work(self.database, actor, self.clock(), self.new_id) as transaction:
            yield transaction

    @contextmanager
    def read(self, *, snapshot: bool = False) -> Iterator[Connection]:
        """A connection to read with."""
        with self.database.read(snapshot=snapshot) as connection:
            yield connection
