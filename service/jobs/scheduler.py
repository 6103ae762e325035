"""The tick inside the serving process, for SQLite.

With PostgreSQL, where there may be many processes, `worker` does this.
"""

from __future__ import annotations

from collections.abc import Callable

import structlog

from service.application.context import Service
from service.errors import ShuntbookError
from service.jobs.tick import run_due

log = structlog.get_logger()


def start(service: Service) -> Callable[[], None]:
    """Look at once and then every hour for due audits, in a thread; returns what stops it."""
    from apscheduler.schedulers.background import BackgroundScheduler

    scheduler = BackgroundScheduler(timezone="UTC")
    scheduler.add_job(
        _tick,
        "cron",
        args=(service,),
        minute=0,
        next_run_time=service.clock(),
        misfire_grace_time=None,
        coalesce=True,
    )
    scheduler.start()

    def stop() -> None:
        scheduler.shutdown(wait=True)

    return stop


def _tick(service: Service) -> None:
    try:
        run_due(service)
    except ShuntbookError as error:
        log.warning("tick failed", reason=error.detail)
