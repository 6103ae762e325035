"""The journal as a change feed: follow it from the sequence of a snapshot.

It only reads: lines are appended by whatever changes a record.
"""

from __future__ import annotations

from typing import Annotated, Any
from urllib.parse import urlencode

from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import JSON, NDJSON, chosen
from service.api.bounds import PAGE_SIZE
from service.api.deps import PathName, QueryFormat, QueryText, needs, service_of
from service.api.paging import Page, link
from service.api.schemas.base import NAME_PATTERN
from service.api.schemas.journal import LineAnswer
from service.application import feed

router = APIRouter(tags=["journal"])

_FORMATS = {"json": JSON, "ndjson": NDJSON}


@router.get(
    "/v1/depots/{depot}/journal",
    response_model=Page[LineAnswer],
    dependencies=[Depends(needs("read"))],
    responses={200: {"content": {NDJSON: {"schema": {}}}}, 304: {}, 406: {}, 409: {}},
)
def follow_journal(
    request: Request,
    depot: PathName,
    after: Annotated[int, Query(ge=0, le=2**31 - 1, description="Last sequence you have.")] = 0,
    after_digest: Annotated[str | None, Query(pattern="^[0-9a-f]{64}$", description="Its digest.")] = None,
    subject_kind: QueryText | None = None,
    section: Annotated[str | None, Query(pattern=NAME_PATTERN)] = None,
    page_size: Annotated[int, Query(ge=1, le=PAGE_SIZE, description="Lines on a page.")] = 100,
    named: QueryFormat = None,
) -> Response:
    """Lines after `after`, in commit order; 409 `feed-diverged` if the journal does not hold that line."""
    service = service_of(request)
    wanted = chosen(request, named, _FORMATS)
    with service.read(snapshot=True) as connection:  # lines are streamed, which needs a transaction
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        rows = feed.page(
            connection,
            depot,
            feed.Followed(after, after_digest),
            most=page_size + 1,
            subject_kind=subject_kind,
            section=section,
        )
    following = _following(request, rows[:page_size]) if len(rows) > page_size else None
    lines = [feed.line_text(row) for row in rows[:page_size]]
    if wanted == "ndjson":
        content = "".join(f"{line}\n" for line in lines)
    else:
        shown = "null" if following is None else f'"{following}"'
        content = f'{{"items":[{",".join(lines)}],"next":{shown}}}'
    return Response(content, 200, fresh.headers | link(following), media_type=_FORMATS[wanted])


def _following(request: Request, page: list[dict[str, Any]]) -> str:
    """The next page begins after the last line of this one, whose digest it must still find there."""
    own = ("after", "after_digest")
    kept = [(name, value) for name, value in request.query_params.items() if name not in own]
    last = [("after", str(page[-1]["sequence"])), ("after_digest", page[-1]["digest"])]
    return f"{request.url.path}?{urlencode([*kept, *last])}"
