"""Routes, one module a noun; every router of the app stands in `ROUTERS`."""

from service.api.routes import depots, health, journal, keys, limit_books, section_limits, service

ROUTERS = (
    service.router,
    keys.router,
    depots.router,
    journal.router,
    limit_books.router,
    section_limits.router,
    health.router,
)
