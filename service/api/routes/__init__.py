"""Routes, one module a noun; every router of the app stands in `ROUTERS`."""

from service.api.routes import depots, findings, health, journal, keys, limit_books, section_limits, service, status, visits

ROUTERS = (
    service.router,
    keys.router,
    depots.router,
    visits.router,
    status.router,
    findings.router,
    journal.router,
    limit_books.router,
    section_limits.router,
    health.router,
)
