"""Instruments: list, read, record with their calibrations.

What a calibration moves is judged in the application; readings come with visits.
"""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import answer
from service.api.deps import Caller, PathName, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.schemas.instruments import InstrumentAnswer, InstrumentSent, instrument_answer
from service.api.whole import refuse_partial
from service.application import instruments

router = APIRouter(tags=["instruments"])


@router.get(
    "/v1/depots/{depot}/instruments",
    response_model=Page[InstrumentAnswer],
    dependencies=[Depends(needs("read"))],
    responses={304: {}},
)
def list_instruments(
    request: Request, depot: PathName, paged: Annotated[Paging, Depends(paging)]
) -> Response:
    """Instruments in order of name."""
    service = service_of(request)
    after = None if paged.after is None else str(paged.after[0])
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = instruments.page(connection, depot, after=after, most=paged.most)
    rows, following = paged.cut(found, lambda kept: (kept.instrument,))
    page = Page(items=[instrument_answer(row) for row in rows], next=following)
    return answer(page, fresh.headers | link(following))


@router.get(
    "/v1/depots/{depot}/instruments/{instrument}",
    response_model=InstrumentAnswer,
    dependencies=[Depends(needs("read"))],
    responses={304: {}},
)
def get_instrument(request: Request, depot: PathName, instrument: PathName) -> Response:
    """One instrument with its calibrations."""
    service = service_of(request)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = instruments.get(connection, depot, instrument)
    return answer(instrument_answer(found), fresh.of_record(found.version))


@router.put(
    "/v1/depots/{depot}/instruments/{instrument}",
    response_model=InstrumentAnswer,
    responses={201: {"model": InstrumentAnswer}},
)
def put_instrument(
    request: Request,
    caller: Annotated[Caller, Depends(needs("register"))],
    depot: PathName,
    instrument: PathName,
    version: Annotated[int | None, Depends(conditional.edits_or_creates)],
    sent: Annotated[InstrumentSent, Depends(body_of(InstrumentSent))],
) -> Response:
    """Record an instrument, or add to it. Every section measured with it is judged again."""
    refuse_partial(sent)
    with service_of(request).unit_of_work(caller.actor) as tx:
        kept, new = instruments.put(tx, depot, instrument, version, sent.content())
    return answer(instrument_answer(kept), conditional.written(kept.version), status=201 if new else 200)
