"""Verdicts on what is not stored.

Nothing that is sent here is kept; visits are posted in `visits`.
"""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Request
from starlette.responses import Response

from service.api.answers import answer
from service.api.deps import body_of, needs, service_of
from service.api.schemas.checks import CheckAnswer, CheckSent, check_answer
from service.application import checks

router = APIRouter(tags=["checks"])


@router.post("/v1/checks", response_model=CheckAnswer, dependencies=[Depends(needs("read"))])
def check_readings(request: Request, sent: Annotated[CheckSent, Depends(body_of(CheckSent))]) -> Response:
    """Judge the readings of one visit of a track circuit described on the spot, by a limit book."""
    with service_of(request).read() as connection:
        checked = checks.check(connection, sent.check())
    return answer(check_answer(sent, checked))
