"""Which limits and tasks apply to one track circuit on a day.

Whether they are met is answered in `status`.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated

from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import answer
from service.api.deps import PathName, needs, service_of
from service.api.schemas.section_limits import SectionLimitsAnswer, section_limits_answer
from service.application import section_limits

router = APIRouter(tags=["sections"])


@router.get(
    "/v1/depots/{depot}/sections/{section}/limits",
    response_model=SectionLimitsAnswer,
    responses={304: {}},
    dependencies=[Depends(needs("read"))],
)
def get_section_limits(
    request: Request,
    depot: PathName,
    section: PathName,
    as_of: Annotated[date | None, Query(description="May lie ahead. Default: the depot's today")] = None,
) -> Response:
    """What applies to one track circuit: in figures, from which clause or concession, and why."""
    service = service_of(request)
    now = service.clock()
    with service.read(snapshot=True) as connection:
        fresh = conditional.under_depot(request, connection, depot, now)
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = section_limits.of_section(connection, depot, section, now, as_of)
    return answer(section_limits_answer(depot, found), fresh.headers)
