"""The tick on PostgreSQL: a procrastinate worker, one or many, on the service's own database.

The queue's tables lie in a schema of their own and hold nothing worth keeping.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import structlog
from sqlalchemy.engine import make_url

from service.application.context import Service
from service.jobs.tick import run_due
from service.records.migrations import PROCRASTINATE_SCHEMA

if TYPE_CHECKING:
    import procrastinate

log = structlog.get_logger()


def create_tables(url: str) -> None:
    """Make the queue's tables as this version of procrastinate wants them, anew if another made them."""
    import procrastinate
    import psycopg
    from procrastinate.schema import SchemaManager
    from psycopg import sql

    schema, version = sql.Identifier(PROCRASTINATE_SCHEMA), procrastinate.__version__
    with psycopg.connect(_plain(url)) as connection:
        found = connection.execute(
            "SELECT obj_description(oid, 'pg_namespace') FROM pg_namespace WHERE nspname = %s",
            (PROCRASTINATE_SCHEMA,),
        ).fetchone()
        if found == (version,):
            return
        connection.execute(sql.SQL("DROP SCHEMA IF EXISTS {} CASCADE").format(schema))
        connection.execute(sql.SQL("CREATE SCHEMA {}").format(schema))
        connection.execute(sql.SQL("SET LOCAL search_path TO {}").format(schema))
        connection.execute(SchemaManager.get_schema())
        connection.execute(sql.SQL("COMMENT ON SCHEMA {} IS {}").format(schema, sql.Literal(version)))


def make_queue(service: Service) -> procrastinate.App:
    """The queue with its one task: every hour, due audits. One tick waits at the most."""
    import procrastinate

    connector = procrastinate.PsycopgConnector(
        conninfo=_plain(service.database.url),
        kwargs={"options": f"-c search_path={PROCRASTINATE_SCHEMA}"},
    )
    queue = procrastinate.App(connector=connector)

    @queue.periodic(cron="0 * * * *")
    @queue.task(name="tick", queueing_lock="tick")
    def tick(timestamp: int) -> None:
        log.info("tick", due_at=timestamp, audits=run_due(service))

    return queue


def work(service: Service) -> None:
    """Look at once for due audits, then every hour until told to stop."""
    run_due(service)
    make_queue(service).run_worker(delete_jobs="always")


def _plain(url: str) -> str:
    """The URL as psycopg takes it."""
    return make_url(url).set(drivername="postgresql").render_as_string(hide_password=False)
