"""Routes, one module a noun; every router of the app stands in `ROUTERS`."""

from service.api.routes import (
    audits,
    calculations,
    checks,
    concessions,
    depots,
    findings,
    health,
    instruments,
    journal,
    keys,
    limit_books,
    section_limits,
    sections,
    service,
    status,
    visits,
)

ROUTERS = (
    service.router,
    keys.router,
    depots.router,
    sections.router,
    instruments.router,
    concessions.router,
    visits.router,
    status.router,
    audits.router,
    findings.router,
    journal.router,
    limit_books.router,
    section_limits.router,
    checks.router,
    calculations.router,
    health.router,
)
