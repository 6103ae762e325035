"""Routes, one module a noun; every router of the app stands in `ROUTERS`."""

from service.api.routes import depots, health, journal, keys, service

ROUTERS = (
    service.router,
    keys.router,
    depots.router,
    journal.router,
    health.router,
)
