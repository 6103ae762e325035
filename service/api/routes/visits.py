"""Visits: posted one by one or in batches, voided, read again.

Reading the items of a batch one by one is done here, taking them in `application.visits`.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from datetime import datetime
from email.utils import parsedate_to_datetime
from typing import Annotated, Any

import pydantic_core
from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.api import bodies, bounds, conditional
from service.api.answers import JSON, NDJSON
from service.api.deps import Caller, PathId, PathName, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.problems import problem_of
from service.api.schemas.status import UtcInstant
from service.api.schemas.visits import (
    OUTCOME,
    VISIT,
    BatchOutcomeAnswer,
    OutcomeAnswer,
    VisitAnswer,
    VisitSent,
    VoidSent,
)
from service.application import visit_records, visits
from service.application.answers import instant, summary_json, verdict_json
from service.application.visit_content import Draft
from service.errors import ShuntbookError, TooLargeError, UnparsableError
from service.records.journal import canonical

router = APIRouter(tags=["visits"])
READER = [Depends(needs("read"))]


def clock_offset_s(request: Request, now: datetime) -> int | None:
    """The client's clock minus the server's, from the `Date` header; None if it says nothing."""
    sent = request.headers.get("date")
    if sent is None:
        return None
    try:
        stated = parsedate_to_datetime(sent)
    except ValueError:
        return None
    if stated.tzinfo is None:
        return None
    return max(-_FURTHEST_S, min(_FURTHEST_S, round((stated - now).total_seconds())))


_FURTHEST_S = 2**31 - 1
"""The furthest off a clock is said to be, 68 years: as much as the record holds."""


def _minimal(request: Request) -> bool:
    """`Prefer: return=minimal` (RFC 7240) leaves verdicts out."""
    stated = ",".join(request.headers.getlist("prefer")).split(",")
    wanted = {preference.partition(";")[0].replace(" ", "").replace('"', "").lower() for preference in stated}
    return "return=minimal" in wanted


def _outcome(outcome: visits.Outcome, request: Request, now: datetime) -> dict[str, Any]:
    status = outcome.status
    shown = () if status is None or _minimal(request) else status.verdicts
    problem = None
    if outcome.problem is not None:
        problem = problem_of(outcome.problem, request.state.request_id, now)
    return {
        "visit": outcome.visit,
        "section": outcome.section,
        "outcome": outcome.outcome,
        "received_at": instant(outcome.received_at),
        "clock_offset_s": outcome.clock_offset_s,
        "verdicts": [verdict_json(verdict) for verdict in shown],
        "status": None if status is None else summary_json(status, outcome.sequence or 0),
        "cautions": [
            {"code": caution.code, "pointer": caution.pointer, "reason": caution.reason}
            for caution in outcome.cautions
        ],
        "problem": problem,
    }


@router.post(
    "/v1/depots/{depot}/visits",
    status_code=201,
    response_model=OutcomeAnswer,
    responses={
        200: {"model": OutcomeAnswer, "description": "Already stored, with the same content"},
        409: {},
        422: {},
    },
)
def post_visit(
    request: Request,
    caller: Annotated[Caller, Depends(needs("readings"))],
    depot: PathName,
    sent: Annotated[VisitSent, Depends(body_of(VisitSent))],
) -> Response:
    """Store one visit and say what it shows. Posting the same again is harmless."""
    service = service_of(request)
    with service.unit_of_work(caller.actor) as tx:
        offset = clock_offset_s(request, tx.now)
        outcome = visits.post(tx, depot, [sent.draft()], offset)[0]
        now = tx.now
    if outcome.problem is not None:
        raise outcome.problem
    stored = outcome.outcome == "stored"
    headers = {"Location": f"/v1/depots/{depot}/visits/{outcome.visit}"} if stored else {}
    content = json.dumps(_outcome(outcome, request, now), ensure_ascii=False, allow_nan=False)
    return Response(content, 201 if stored else 200, headers, media_type=JSON)


_BATCH_BODY = {
    "requestBody": {
        "required": True,
        "content": {
            JSON: {
                "schema": {
                    "type": "array",
                    "maxItems": bounds.BATCH_VISITS,
                    "items": {"$ref": "#/components/schemas/VisitSent"},
                },
                "example": [VISIT],
            },
            NDJSON: {"schema": {"type": "string"}, "example": json.dumps(VISIT)},
        },
    }
}


@router.post(
    "/v1/depots/{depot}/visits/batch",
    response_model=list[BatchOutcomeAnswer],
    responses={200: {"content": {JSON: {"example": [{"index": 0, **OUTCOME}]}, NDJSON: {}}}},
    openapi_extra=_BATCH_BODY,
)
def post_visits(
    request: Request,
    caller: Annotated[Caller, Depends(needs("readings"))],
    depot: PathName,
    raw: Annotated[bodies.Raw, Depends(bodies.RawBody((JSON, NDJSON), bounds.BODY_BYTES))],
) -> Response:
    """Store a batch of visits in one transaction; one outcome a visit, in order, even if all are refused."""
    items = list(_lines(raw) if raw.media_type == NDJSON else _array(raw))
    service = service_of(request)
    with service.unit_of_work(caller.actor) as tx:
        offset = clock_offset_s(request, tx.now)
        drafts = [item for item in items if isinstance(item, Draft)]
        outcomes = iter(visits.post(tx, depot, drafts, offset))
        now = tx.now
    answers = [
        next(outcomes)
        if isinstance(item, Draft)
        else visits.Outcome(item.visit, item.section, "refused", problem=item.problem)
        for item in items
    ]
    shown = [{"index": index, **_outcome(one, request, now)} for index, one in enumerate(answers)]
    if raw.media_type == NDJSON:
        text = "".join(json.dumps(one, ensure_ascii=False, allow_nan=False) + "\n" for one in shown)
        return Response(text, media_type=NDJSON)
    return Response(json.dumps(shown, ensure_ascii=False, allow_nan=False), media_type=JSON)


class _Unread:
    """An item of a batch that is no visit: what could be told of it, and what is wrong."""

    def __init__(self, problem: ShuntbookError, item: Any = None) -> None:
        self.problem = problem
        named = item if isinstance(item, dict) else {}
        self.visit = _name(named.get("visit"))
        self.section = _name(named.get("section"))


def _name(value: Any) -> str | None:
    """A name only if it has the length of one: answers do not echo whatever was sent."""
    return value if isinstance(value, str) and len(value) <= 40 and value.isprintable() else None


def _counted(items: list[Any]) -> list[Any]:
    if len(items) > bounds.BATCH_VISITS:
        raise TooLargeError(f"A batch holds at most {bounds.BATCH_VISITS} visits.")
    return items


def _read(text: bytes, item: Any = None) -> Draft | _Unread:
    try:
        return bodies.parse(VisitSent, text).draft()
    except ShuntbookError as error:
        return _Unread(error, item)


def _lines(raw: bodies.Raw) -> Iterator[Draft | _Unread]:
    for line in _counted([line for line in raw.content.splitlines() if line.strip()]):
        read = _read(line)
        if isinstance(read, _Unread) and not isinstance(read.problem, UnparsableError):
            read = _Unread(read.problem, pydantic_core.from_json(line))
        yield read


def _array(raw: bodies.Raw) -> Iterator[Draft | _Unread]:
    try:
        items = json.loads(raw.content.decode(), parse_int=float, parse_constant=_no_number)
    except (ValueError, RecursionError):
        raise UnparsableError("The body is not JSON in UTF-8 of a reasonable depth.") from None
    if not isinstance(items, list):
        raise UnparsableError("A batch is a JSON array of visits, or one visit a line.")
    for item in _counted(items):
        # the standard library passes on half a surrogate pair or a number too large for a double, so that
        # the strict parser refuses that item alone
        yield _read(json.dumps(item).encode(), item)


def _no_number(constant: str) -> None:
    raise ValueError(f"{constant} is not JSON")


@router.get(
    "/v1/depots/{depot}/visits", dependencies=READER, response_model=Page[VisitAnswer], responses={304: {}}
)
def list_visits(
    request: Request,
    depot: PathName,
    paged: Annotated[Paging, Depends(paging)],
    section: Annotated[str | None, Query(max_length=40)] = None,
    received_after: Annotated[UtcInstant | None, Query()] = None,
) -> Response:
    """Visits in the order in which they were received."""
    return _page(request, depot, paged, section, received_after)


@router.get(
    "/v1/depots/{depot}/sections/{section}/visits",
    dependencies=READER,
    response_model=Page[VisitAnswer],
    responses={304: {}},
)
def list_section_visits(
    request: Request,
    depot: PathName,
    section: PathName,
    paged: Annotated[Paging, Depends(paging)],
) -> Response:
    """The visits to one track circuit, in the order in which they were received."""
    return _page(request, depot, paged, section, None, known=True)


def _page(
    request: Request,
    depot: str,
    paged: Paging,
    section: str | None,
    received_after: datetime | None,
    *,
    known: bool = False,
) -> Response:
    service = service_of(request)
    after = None
    if paged.after is not None:
        after = (datetime.fromisoformat(str(paged.after[0])), str(paged.after[1]))
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        if known and section is not None:
            visit_records.require_section(connection, depot, section)
        found = visit_records.page(
            connection, depot, section=section, received_after=received_after, after=after, most=paged.most
        )
    rows, following = paged.cut(found, lambda row: (row["received_at"], row["visit"]))
    content = canonical({"items": rows, "next": following})
    return Response(content, headers=fresh.headers | link(following), media_type=JSON)


@router.get(
    "/v1/depots/{depot}/visits/{visit}", dependencies=READER, response_model=VisitAnswer, responses={304: {}}
)
def get_visit(request: Request, depot: PathName, visit: PathId) -> Response:
    """One visit, its readings as they were given."""
    service = service_of(request)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = visit_records.get(connection, depot, visit)
    return Response(canonical(found), headers=fresh.headers, media_type=JSON)


@router.post("/v1/depots/{depot}/visits/{visit}/void", response_model=VisitAnswer, responses={409: {}})
def void_visit(
    request: Request,
    caller: Annotated[Caller, Depends(needs("readings"))],
    depot: PathName,
    visit: PathId,
    sent: Annotated[VoidSent, Depends(body_of(VoidSent))],
) -> Response:
    """Declare a visit void: it stays on record and counts no longer."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        content = visits.void(tx, depot, visit, sent.why)
    return Response(canonical(content), media_type=JSON)
