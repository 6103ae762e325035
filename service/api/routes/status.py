"""The status of one track circuit, as of any day and as known at any instant.

It is judged from the records at each request; nothing is written here.
"""

from __future__ import annotations

import json
from datetime import date
from typing import Annotated

from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import JSON
from service.api.deps import PathName, needs, service_of
from service.api.schemas.status import StatusAnswer, UtcInstant
from service.application import status
from service.application.answers import status_json

router = APIRouter(tags=["sections"])
READER = [Depends(needs("read"))]


@router.get(
    "/v1/depots/{depot}/sections/{section}/status",
    dependencies=READER,
    response_model=StatusAnswer,
    responses={304: {}, 422: {}},
)
def get_status(
    request: Request,
    depot: PathName,
    section: PathName,
    as_of: Annotated[date | None, Query(description="Default: the depot's today")] = None,
    as_known_at: Annotated[UtcInstant | None, Query(description="Default: all that is stored")] = None,
) -> Response:
    """Every limit and task of one track circuit: what was measured, the limit, the margin, and why."""
    service = service_of(request)
    now = service.clock()
    with service.read(snapshot=True) as connection:
        fresh = conditional.under_depot(request, connection, depot, now)
        if fresh.not_modified is not None:
            return fresh.not_modified
        judged = status.of_section(connection, depot, section, now, as_of, as_known_at)
    shown = status_json(depot, judged.status, judged.known_at, judged.sequence)
    content = json.dumps(shown, ensure_ascii=False, allow_nan=False)
    return Response(content, headers=fresh.headers, media_type=JSON)
