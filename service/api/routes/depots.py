"""Depots: open, list, read, edit. What belongs to a depot has routes of its own.

What lies under a depot has routes of its own.
"""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import answer
from service.api.deps import Caller, PathName, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.schemas.depots import DepotAnswer, DepotDraft, DepotEdit
from service.application import depots

router = APIRouter(tags=["depots"])


def _terms(sent: DepotDraft | DepotEdit) -> depots.Terms:
    return depots.Terms(sent.title, sent.time_zone, sent.audit_weekday.value, sent.audit_hour)


@router.get("/v1/depots", response_model=Page[DepotAnswer])
def list_depots(
    request: Request,
    caller: Annotated[Caller, Depends(needs("read"))],
    paged: Annotated[Paging, Depends(paging)],
) -> Response:
    """The depots this key is good for, in order of name."""
    after = None if paged.after is None else str(paged.after[0])
    with service_of(request).read() as connection:
        found = depots.listed(connection, only=caller.depot, after=after, most=paged.most)
    rows, following = paged.cut(found, lambda depot: (depot.depot,))
    page = Page(items=[DepotAnswer.model_validate(row) for row in rows], next=following)
    return answer(page, link(following))


@router.post("/v1/depots", status_code=201, response_model=DepotAnswer, responses={409: {}})
def create_depot(
    request: Request,
    caller: Annotated[Caller, Depends(needs("admin", every_depot=True))],
    sent: Annotated[DepotDraft, Depends(body_of(DepotDraft))],
) -> Response:
    """Open a depot and its journal."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        created = depots.create(tx, sent.depot, _terms(sent))
    headers = {"Location": f"/v1/depots/{created.depot}"} | conditional.written(created.version)
    return answer(DepotAnswer.model_validate(created), headers, status=201)


@router.get(
    "/v1/depots/{depot}",
    response_model=DepotAnswer,
    dependencies=[Depends(needs("read"))],
    responses={304: {}},
)
def get_depot(request: Request, depot: PathName) -> Response:
    """One depot, with the sequence its journal has reached."""
    service = service_of(request)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = depots.get(connection, depot)
    return answer(DepotAnswer.model_validate(found), fresh.of_record(found.version))


@router.put("/v1/depots/{depot}", response_model=DepotAnswer)
def edit_depot(
    request: Request,
    caller: Annotated[Caller, Depends(needs("admin"))],
    depot: PathName,
    version: Annotated[int, Depends(conditional.edits)],
    sent: Annotated[DepotEdit, Depends(body_of(DepotEdit))],
) -> Response:
    """Change a depot. A new time zone moves its days: every track circuit is judged again."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        edited = depots.edit(tx, depot, version, _terms(sent))
    return answer(DepotAnswer.model_validate(edited), conditional.written(edited.version))
