"""A built demo and how to build one: what the fixtures and the tests beside this file share."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from random import Random
from time import process_time
from typing import Any

from service.application import audits
from service.application.context import Service
from service.demo import folder
from service.demo.build import SEED, build
from service.demo.lines import DEPOT
from service.records import migrations
from service.records.engine import Database

NOW = datetime(2026, 12, 1, 10, 30, tzinfo=UTC)


@dataclass(frozen=True)
class Demo:
    """A built demo. `seconds` is the processor time it took; `told` what was said meanwhile."""

    directory: Path
    service: Service
    keys: dict[str, str]
    counts: dict[str, int]
    seconds: float
    told: list[str]
    listed: dict[str, dict[str, Any]]
    """section → what the latest weekly list shows of it."""


def service_on(path: Path, now: datetime) -> Service:
    """The service over a demo's database, with its clock stopped."""
    return Service(Database(f"sqlite:///{path}", 2), lambda: now, lambda: "0" * 8)


def built(directory: Path, now: datetime) -> dict[str, Any]:
    """Build a demo in a folder, as the command does; what came of it."""
    path = folder.make_fresh(directory)
    migrations.upgrade(f"sqlite:///{path}")
    service = service_on(path, now)
    told: list[str] = []
    before = process_time()
    found = build(service, SEED, Random(5).randbytes, told.append)
    seconds = process_time() - before
    service.database.close()
    folder.write_keys(directory, found.keys)
    return {"keys": found.keys, "counts": found.counts, "seconds": seconds, "told": told}


def opened(directory: Path, now: datetime, known: dict[str, Any]) -> Demo:
    """A built demo with its latest list read."""
    service = service_on(folder.database(directory), now)
    with service.read(snapshot=True) as connection:
        weekly = audits.weekly_list(connection, DEPOT, None)
    listed = {shown["section"]: shown for shown in weekly.sections}
    return Demo(directory, service, **known, listed=listed)
