"""Sections: list as JSON or CSV, record, read, edit, import.

Their statuses, limits and visits have routes of their own.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated

from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.api import bounds, conditional, section_files
from service.api.answers import JSON, answer, chosen, file
from service.api.bodies import Raw, RawBody
from service.api.deps import Caller, PathName, QueryFormat, QueryText, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.schemas.sections import (
    ImportAnswer,
    ListedAnswer,
    SectionAnswer,
    SectionDraft,
    SectionEdit,
    SectionVersionAnswer,
    listed_answer,
    section_answer,
    version_answer,
)
from service.api.whole import refuse_partial
from service.application import section_lists, sections, sections_csv, sections_import, status
from service.application.section_content import json_value
from service.application.section_lists import Filters
from service.errors import Fault, NotAcceptableError
from service.rules.words import CircuitKind, Compliance, Hazard, SectionState, Traction

router = APIRouter(tags=["sections"])

CSV = "text/csv"
FORMATS = {"json": JSON, "csv": CSV}


async def filters(
    circuit_kind: Annotated[CircuitKind | None, Query()] = None,
    traction: Annotated[Traction | None, Query()] = None,
    line_name: QueryText | None = None,
    state: Annotated[SectionState | None, Query()] = None,
    compliance: Annotated[Compliance | None, Query()] = None,
    overdue: Annotated[bool | None, Query()] = None,
    hazard: Annotated[Hazard | None, Query()] = None,
    due_before: Annotated[date | None, Query()] = None,
    asset_reference: QueryText | None = None,
) -> Filters:
    """A dependency: what the list is narrowed to."""
    return Filters(
        circuit_kind, traction, line_name, state, compliance, overdue, hazard, due_before, asset_reference
    )


@router.get(
    "/v1/depots/{depot}/sections",
    response_model=Page[ListedAnswer],
    dependencies=[Depends(needs("read"))],
    responses={200: {"content": {CSV: {"schema": {"type": "string"}}}}, 304: {}, 406: {}},
)
def list_sections(
    request: Request,
    depot: PathName,
    wanted: Annotated[Filters, Depends(filters)],
    paged: Annotated[Paging, Depends(paging)],
    named: QueryFormat = None,
) -> Response:
    """Sections in order of name, each with its status in short; as CSV, all of them in one file."""
    service = service_of(request)
    form = chosen(request, named, FORMATS)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
    if fresh.not_modified is not None:
        return fresh.not_modified
    if form == "csv":
        _refuse_paging(request)
    status.roll_due(service, depot)
    with service.read(snapshot=True) as connection:
        if form == "csv":
            content = "".join(
                sections_csv.write(map(_document, section_lists.every(connection, depot, wanted)))
            )
            return file(content, f"{CSV}; charset=utf-8", f"sections-{depot}.csv", fresh.headers)
        after = None if paged.after is None else str(paged.after[0])
        found = section_lists.page(connection, depot, wanted, after=after, most=paged.most)
    rows, following = paged.cut(found, lambda listed: (listed.section.section,))
    page = Page(items=[listed_answer(row) for row in rows], next=following)
    return answer(page, fresh.headers | link(following))


def _refuse_paging(request: Request) -> None:
    """A file has no pages."""
    given = [name for name in ("page_size", "cursor") if name in request.query_params]
    if given:
        faults = tuple(
            Fault("not_of_a_file", "a CSV file holds the whole list", parameter=name) for name in given
        )
        raise NotAcceptableError("A CSV file has no pages.", faults)


def _document(listed: section_lists.Listed) -> dict[str, object]:
    named = {"sequence": listed.section.sequence, "status": json_value(listed.status)}
    return listed.section.document() | named


@router.post(
    "/v1/depots/{depot}/sections", status_code=201, response_model=SectionAnswer, responses={409: {}}
)
def create_section(
    request: Request,
    caller: Annotated[Caller, Depends(needs("register"))],
    depot: PathName,
    sent: Annotated[SectionDraft, Depends(body_of(SectionDraft))],
) -> Response:
    """Record a new section."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        made = sections.create(tx, depot, sent.section, sent.content())
    headers = {"Location": f"/v1/depots/{depot}/sections/{made.section}"} | conditional.written(made.version)
    return answer(section_answer(made), headers, status=201)


@router.post("/v1/depots/{depot}/sections/import", response_model=ImportAnswer)
def import_sections(
    request: Request,
    caller: Annotated[Caller, Depends(needs("register"))],
    depot: PathName,
    raw: Annotated[Raw, Depends(RawBody((CSV,), bounds.IMPORT_BYTES))],
    dry_run: Annotated[bool, Query(description="Say what it would do, and write nothing.")] = False,
) -> Response:
    """Record a whole file of sections: all of it or nothing, every bad line named."""
    service = service_of(request)
    given = section_files.read(raw.content)
    if dry_run:
        with service.read(snapshot=True) as connection:
            done = sections_import.rehearse(connection, depot, given, service.clock())
    else:
        with service.unit_of_work(caller.actor) as tx:
            done = sections_import.run(tx, depot, given)
    counts = {"created": done.created, "changed": done.changed, "unchanged": done.unchanged}
    return answer(ImportAnswer(dry_run=dry_run, sequence=done.sequence, **counts))


@router.get(
    "/v1/depots/{depot}/sections/{section}",
    response_model=SectionAnswer,
    dependencies=[Depends(needs("read"))],
    responses={304: {}},
)
def get_section(request: Request, depot: PathName, section: PathName) -> Response:
    """A section's present record."""
    service = service_of(request)
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = sections.get(connection, depot, section)
    return answer(section_answer(found), fresh.of_record(found.version))


@router.put("/v1/depots/{depot}/sections/{section}", response_model=SectionAnswer)
def edit_section(
    request: Request,
    caller: Annotated[Caller, Depends(needs("register"))],
    depot: PathName,
    section: PathName,
    version: Annotated[int, Depends(conditional.edits)],
    sent: Annotated[SectionEdit, Depends(body_of(SectionEdit))],
) -> Response:
    """Record the next version of a section. It holds from `valid_from_on`, not stated from today."""
    refuse_partial(sent)
    with service_of(request).unit_of_work(caller.actor) as tx:
        edited = sections.edit(tx, depot, section, version, sent.content())
    return answer(section_answer(edited), conditional.written(edited.version))


@router.get(
    "/v1/depots/{depot}/sections/{section}/versions",
    response_model=Page[SectionVersionAnswer],
    dependencies=[Depends(needs("read"))],
    responses={304: {}},
)
def list_versions(
    request: Request, depot: PathName, section: PathName, paged: Annotated[Paging, Depends(paging)]
) -> Response:
    """Every version of a section's record, oldest first."""
    service = service_of(request)
    after = None if paged.after is None else int(paged.after[0])
    with service.read() as connection:
        fresh = conditional.under_depot(request, connection, depot, service.clock())
        if fresh.not_modified is not None:
            return fresh.not_modified
        found = sections.versions(connection, depot, section, after=after, most=paged.most)
    rows, following = paged.cut(found, lambda recorded: (recorded.version,))
    page = Page(items=[version_answer(row) for row in rows], next=following)
    return answer(page, fresh.headers | link(following))
