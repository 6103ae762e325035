"""Audits and the weekly list that is printed from each.

What an audit finds is decided in `application.audits`; how a list is laid out, in `reports`.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated

from fastapi import APIRouter, Depends, HTTPException, Path, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import JSON, answer, chosen, file
from service.api.deps import Caller, PathName, QueryFormat, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.schemas.audits import AuditAnswer, AuditSent, WeeklyListAnswer
from service.application import audits
from service.reports import weekly_csv, weekly_html, weekly_xlsx

router = APIRouter(tags=["audits"])
READER = [Depends(needs("read"))]

Which = Annotated[str, Path(pattern=r"^(latest|[0-9]{4}-[0-9]{2}-[0-9]{2})$")]
"""The date of an audit, or the latest."""

FORMATS = {
    "json": JSON,
    "csv": "text/csv",
    "xlsx": "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet",
    "html": "text/html",
}


def _day(which: str) -> date | None:
    if which == "latest":
        return None
    try:
        return date.fromisoformat(which)
    except ValueError:
        raise HTTPException(404, "There is no such day.") from None


@router.post("/v1/depots/{depot}/audits", status_code=201, response_model=AuditAnswer, responses={409: {}})
def run_audit(
    request: Request,
    caller: Annotated[Caller, Depends(needs("audit"))],
    depot: PathName,
    sent: Annotated[AuditSent, Depends(body_of(AuditSent))],
) -> Response:
    """Audit the depot as of a day. A day that was audited gives the stored audit."""
    row = audits.run(service_of(request), caller.actor, depot, sent.as_of)
    headers = {"Location": f"/v1/depots/{depot}/audits/{row.audit.isoformat()}"}
    return answer(AuditAnswer.model_validate(audits.wire(row)), headers, status=201)


@router.get(
    "/v1/depots/{depot}/audits", dependencies=READER, response_model=Page[AuditAnswer], responses={304: {}}
)
def list_audits(
    request: Request,
    depot: PathName,
    paged: Annotated[Paging, Depends(paging)],
) -> Response:
    """The depot's audits in order of date."""
    service = service_of(request)
    after = None if paged.after is None else date.fromisoformat(str(paged.after[0]))
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = audits.page(connection, depot, after, paged.most)
    rows, following = paged.cut(found, lambda row: (row.audit.isoformat(),))
    page = Page(items=[AuditAnswer.model_validate(audits.wire(row)) for row in rows], next=following)
    return answer(page, fresh.headers | link(following))


@router.get(
    "/v1/depots/{depot}/audits/{audit}", dependencies=READER, response_model=AuditAnswer, responses={304: {}}
)
def get_audit(request: Request, depot: PathName, audit: Which) -> Response:
    """One audit, or the latest."""
    service = service_of(request)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        row = audits.get(connection, depot, _day(audit))
    return answer(AuditAnswer.model_validate(audits.wire(row)), fresh.headers)


@router.get(
    "/v1/depots/{depot}/audits/{audit}/list",
    dependencies=READER,
    response_model=WeeklyListAnswer,
    responses={
        200: {"content": {media_type: {} for name, media_type in FORMATS.items() if name != "json"}},
        304: {},
        406: {},
    },
)
def get_weekly_list(
    request: Request,
    depot: PathName,
    audit: Which,
    named: QueryFormat = None,
) -> Response:
    """The weekly list of one audit, as it was found then: JSON, CSV, a workbook, or a page to print."""
    service = service_of(request)
    name = chosen(request, named, FORMATS)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = audits.weekly_list(connection, depot, _day(audit))
    stem = f"weekly-list-{depot}-{found.audit['audit']}"
    if name == "csv":
        return file(weekly_csv.write(found), "text/csv; charset=utf-8", f"{stem}.csv", fresh.headers)
    if name == "xlsx":
        return file(weekly_xlsx.write(found), FORMATS["xlsx"], f"{stem}.xlsx", fresh.headers)
    if name == "html":
        page = weekly_html.write(found)
        policy = {"Content-Security-Policy": weekly_html.CONTENT_SECURITY_POLICY}
        return Response(page, headers=fresh.headers | policy, media_type="text/html; charset=utf-8")
    return answer(WeeklyListAnswer.model_validate(found), fresh.headers)
