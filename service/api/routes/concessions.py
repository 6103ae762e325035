"""Concessions: grant, read, end.

Which of them show in a verdict is answered with the status of the section.
"""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import answer
from service.api.deps import Caller, PathId, PathName, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.schemas.concessions import ConcessionAnswer, ConcessionSent, EndSent, concession_answer
from service.application import concessions

router = APIRouter(tags=["concessions"])


@router.get(
    "/v1/depots/{depot}/concessions",
    response_model=Page[ConcessionAnswer],
    dependencies=[Depends(needs("read"))],
    responses={304: {}},
)
def list_concessions(
    request: Request, depot: PathName, paged: Annotated[Paging, Depends(paging)]
) -> Response:
    """Concessions in order of id, ended and lapsed ones included."""
    service = service_of(request)
    after = None if paged.after is None else str(paged.after[0])
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = concessions.page(connection, depot, after=after, most=paged.most)
    rows, following = paged.cut(found, lambda kept: (kept.concession,))
    page = Page(items=[concession_answer(row) for row in rows], next=following)
    return answer(page, fresh.headers | link(following))


@router.get(
    "/v1/depots/{depot}/concessions/{concession}",
    response_model=ConcessionAnswer,
    dependencies=[Depends(needs("read"))],
    responses={304: {}},
)
def get_concession(request: Request, depot: PathName, concession: PathId) -> Response:
    """One concession."""
    service = service_of(request)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = concessions.get(connection, depot, concession)
    return answer(concession_answer(found), fresh.of_record(found.version))


@router.put(
    "/v1/depots/{depot}/concessions/{concession}",
    response_model=ConcessionAnswer,
    responses={201: {"model": ConcessionAnswer}, 409: {}},
    dependencies=[Depends(conditional.edits_or_creates)],
)
def grant_concession(
    request: Request,
    caller: Annotated[Caller, Depends(needs("register"))],
    depot: PathName,
    concession: PathId,
    sent: Annotated[ConcessionSent, Depends(body_of(ConcessionSent))],
) -> Response:
    """Grant a concession under an id of the client's; sent again it changes nothing."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        kept, new = concessions.grant(tx, depot, concession, sent.content())
    return answer(concession_answer(kept), conditional.written(kept.version), status=201 if new else 200)


@router.post(
    "/v1/depots/{depot}/concessions/{concession}/end", response_model=ConcessionAnswer, responses={409: {}}
)
def end_concession(
    request: Request,
    caller: Annotated[Caller, Depends(needs("register"))],
    depot: PathName,
    concession: PathId,
    sent: Annotated[EndSent, Depends(body_of(EndSent))],
) -> Response:
    """End a concession today."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        kept = concessions.end(tx, depot, concession, sent.why)
    return answer(concession_answer(kept), conditional.written(kept.version))
