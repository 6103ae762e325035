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
from service.demo.build import SEED, build
from service.demo.lines import DEPOT
from service.records.engine import Database

NOW = datetime(2026, 12, 1, 10, 30, tzinfo=UTC)


@dataclass(frozen=True)
class Demo:
    """A built demo. `seconds` is the processor time it took; `told` what was said meanwhile."""

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


def built(path: Path, now: datetime) -> dict[str, Any]:
    """Fill a migrated database; what came of it."""
    service = service_on(path, now)
    told: list[str] = []
    before = process_time()
    found = build(service, SEED, Random(5).randbytes, told.append)
    service.database.close()
    return {
        "keys": found.keys,
        "counts": found.counts,
        "seconds": process_time() - before,
        "told": told,
    }


def opened(path: Path, now: datetime, known: dict[str, Any]) -> Demo:
    """A built demo with its latest list read."""
    service = service_on(path, now)
    with service.read(snapshot=True) as connection:
        weekly = audits.weekly_list(connection, DEPOT, None)
    return Demo(service, **known, listed={shown["section"]: shown for shown in weekly.sections})
