"""For whoever runs the service: is it alive, is it ready, what has it done. No key is needed.

No key is asked for here, and nothing of the records is told.
"""

from __future__ import annotations

from fastapi import APIRouter, Request
from prometheus_client import generate_latest
from pydantic import ConfigDict
from starlette.responses import PlainTextResponse, Response

from service.api.answers import answer
from service.api.deps import service_of
from service.api.schemas.base import Answer
from service.errors import StorageFaultError
from service.records import migrations

router = APIRouter(tags=["health"])


class HealthAnswer(Answer):
    """`state` is `ok`; anything else is a problem."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"state": "ok"}]})

    state: str


@router.get("/health/live", response_model=HealthAnswer)
def get_live() -> Response:
    """The process answers."""
    return answer(HealthAnswer(state="ok"))


@router.get("/health/ready", response_model=HealthAnswer)
def get_ready(request: Request) -> Response:
    """The database is reached and migrated to this version."""
    with service_of(request).read() as connection:
        current = migrations.current(connection)
    if current != migrations.newest():
        raise StorageFaultError("The database is not migrated to this version: run `shuntbook migrate`.")
    return answer(HealthAnswer(state="ok"))


@router.get("/metrics", response_class=PlainTextResponse)
def get_metrics(request: Request) -> Response:
    """Counts and times of this process, as Prometheus reads them."""
    content = generate_latest(request.app.state.metrics.registry)
    return Response(content, media_type="text/plain; version=0.0.4; charset=utf-8")
