"""Findings and the responses to them.

They are made by visits and audits; a route only reads them or answers for one.
"""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import answer
from service.api.deps import Caller, PathId, PathName, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.schemas.audits import FindingAnswer, ResponseSent
from service.application import findings
from service.rules.words import FindingKind, FindingState

router = APIRouter(tags=["findings"])
READER = [Depends(needs("read"))]


@router.get(
    "/v1/depots/{depot}/findings",
    dependencies=READER,
    response_model=Page[FindingAnswer],
    responses={304: {}},
)
def list_findings(
    request: Request,
    depot: PathName,
    paged: Annotated[Paging, Depends(paging)],
    state: Annotated[FindingState | None, Query()] = None,
    section: Annotated[str | None, Query(max_length=40)] = None,
    kind: Annotated[FindingKind | None, Query()] = None,
) -> Response:
    """Findings in the order in which they were made, cleared ones included."""
    service = service_of(request)
    after = None if paged.after is None else str(paged.after[0])
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = findings.page(
            connection, depot, state=state, section=section, kind=kind, after=after, most=paged.most
        )
    rows, following = paged.cut(found, lambda row: (row.finding,))
    items = [FindingAnswer.model_validate(findings.wire(row, fresh.today)) for row in rows]
    return answer(Page(items=items, next=following), fresh.headers | link(following))


@router.get(
    "/v1/depots/{depot}/findings/{finding}",
    dependencies=READER,
    response_model=FindingAnswer,
    responses={304: {}},
)
def get_finding(request: Request, depot: PathName, finding: PathId) -> Response:
    """One finding with its response."""
    service = service_of(request)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        row = findings.get(connection, depot, finding)
    return answer(FindingAnswer.model_validate(findings.wire(row, fresh.today)), fresh.of_record(row.version))


@router.put("/v1/depots/{depot}/findings/{finding}/response", response_model=FindingAnswer)
def put_response(
    request: Request,
    caller: Annotated[Caller, Depends(needs("audit"))],
    depot: PathName,
    finding: PathId,
    version: Annotated[int, Depends(conditional.edits)],
    sent: Annotated[ResponseSent, Depends(body_of(ResponseSent))],
) -> Response:
    """Answer for a finding: who has it, what is done, and to whom it was reported."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        today, row = findings.respond(
            tx, depot, finding, {name: getattr(sent, name) for name in findings.RESPONSE}, version
        )
    shown = FindingAnswer.model_validate(findings.wire(row, today))
    return answer(shown, conditional.written(row.version))
