"""What the service says of itself: version, limits, quantities, tasks, and the pages of its problems.

Nothing here belongs to a depot.
"""

from __future__ import annotations

from html import escape
from typing import Annotated

from fastapi import APIRouter, Depends, Path, Request
from starlette.responses import HTMLResponse, Response

from service.api import bounds
from service.api.answers import answer
from service.api.deps import needs, service_of
from service.api.paging import Page
from service.api.problem_kinds import KINDS
from service.api.schemas.service import (
    EditionName,
    KnownTaskAnswer,
    QuantityAnswer,
    ServiceAnswer,
    UnitAnswer,
)
from service.application import tasks, visit_cautions, visit_content
from service.errors import NotFoundError
from service.rules.quantities import QUANTITIES, UNITS

router = APIRouter(tags=["service"])

ANY_KEY = [Depends(needs(None))]


@router.get("/v1", response_model=ServiceAnswer, dependencies=ANY_KEY)
def get_service(request: Request) -> Response:
    """Version and bounds."""
    return answer(
        ServiceAnswer(
            service="shuntbook",
            version=request.app.version,
            body_bytes=bounds.BODY_BYTES,
            batch_visits=bounds.BATCH_VISITS,
            import_lines=bounds.IMPORT_LINES,
            page_size=bounds.PAGE_SIZE,
            remarks_characters=bounds.REMARKS_CHARACTERS,
            clock_skew_s=int(visit_content.AHEAD.total_seconds()),
            clock_offset_caution_s=visit_cautions.CLOCK_OFFSET_S,
            caution=request.app.description,
        )
    )


@router.get("/v1/quantities", response_model=Page[QuantityAnswer], dependencies=ANY_KEY)
def list_quantities() -> Response:
    """Every quantity, its base unit, the units it may be given in, and the values that cannot be."""
    items = [
        QuantityAnswer(
            quantity=known.quantity,
            title=known.title,
            unit=known.unit,
            units=[
                UnitAnswer(unit=unit, factor=str(factor))
                for unit, (base, factor) in UNITS.items()
                if base == known.unit
            ],
            lowest=known.lowest,
            highest=known.highest,
            from_register=known.from_register,
            needs_shunt=known.needs_shunt,
        )
        for known in QUANTITIES.values()
    ]
    return answer(Page(items=items, next=None))


@router.get("/v1/tasks", response_model=Page[KnownTaskAnswer], dependencies=ANY_KEY)
def list_tasks(request: Request) -> Response:
    """Every task that an edition kept here names, drafts included."""
    with service_of(request).read() as connection:
        found = tasks.known(connection)
    items = [
        KnownTaskAnswer(
            task=task.task,
            title=task.title,
            editions=[EditionName(book=book, edition=edition) for book, edition in task.editions],
        )
        for task in found
    ]
    return answer(Page(items=items, next=None))


@router.get("/problems/{type}", response_class=HTMLResponse)
def explain_problem(type: Annotated[str, Path(pattern="^[a-z-]{1,40}$")]) -> Response:  # noqa: A002
    """What a problem type means and what a client does next."""
    kind = KINDS.get(type)
    if kind is None:
        raise NotFoundError("There is no such problem type.")
    title = escape(kind.title)
    return HTMLResponse(
        f'<!doctype html><html lang="en"><meta charset="utf-8">'
        f'<meta name="viewport" content="width=device-width"><title>{title}</title>'
        f"<h1>{title}</h1><p>Status {kind.status}, type <code>/problems/{escape(kind.type)}</code></p>"
        f"<p>{escape(kind.meaning)}</p></html>"
    )
