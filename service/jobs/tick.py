"""The hourly tick: run every audit that is due.

Any number of ticks may meet: the unique constraint on depot and date makes each audit happen once.
"""

from __future__ import annotations

import structlog

from service.application import audits
from service.application.context import Service
from service.errors import ConflictError, ShuntbookError
from service.records.unit_of_work import Actor

ACTOR = Actor("clock", "shuntbook")

log = structlog.get_logger()


def run_due(service: Service) -> int:
    """Run the audits that are due now, and say how many were; one that fails does not stop the others."""
    with service.read() as connection:
        due = audits.due(connection, service.clock())
    done = 0
    for depot, on in due:
        try:
            audits.run(service, ACTOR, depot, on)
        except ConflictError:
            continue  # somebody asked for a later one meanwhile
        except ShuntbookError as error:
            log.warning("audit failed", depot=depot, audit=on.isoformat(), reason=error.detail)
        else:
            done += 1
            log.info("audit", depot=depot, audit=on.isoformat())
    return done
