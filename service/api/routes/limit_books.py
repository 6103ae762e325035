"""Limit books: list, draft, read, edit, issue, withdraw.

They belong to the service: any reader reads them, only a key for every depot writes them.
"""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends, Request
from starlette.responses import Response

from service.api import conditional
from service.api.answers import answer
from service.api.deps import Caller, PathName, body_of, needs, service_of
from service.api.paging import Page, Paging, link, paging
from service.api.schemas.limit_books import (
    BookAnswer,
    EditionAnswer,
    EditionDraft,
    EditionEdit,
    IssueSent,
    WithdrawalSent,
    book_answer,
    edition_answer,
)
from service.api.whole import refuse_partial
from service.application import books, editions

router = APIRouter(tags=["limit books"])

Editor = Annotated[Caller, Depends(needs("limits", every_depot=True))]
READER = [Depends(needs("read"))]
Version = Annotated[int, Depends(conditional.edits)]


@router.get("/v1/limit-books", response_model=Page[BookAnswer], dependencies=READER)
def list_limit_books(request: Request, paged: Annotated[Paging, Depends(paging)]) -> Response:
    """The limit books with their editions, in order of name."""
    after = None if paged.after is None else str(paged.after[0])
    with service_of(request).read() as connection:
        found = books.page(connection, after=after, most=paged.most)
    rows, following = paged.cut(found, lambda book: (book.book,))
    return answer(Page(items=[book_answer(row) for row in rows], next=following), link(following))


@router.post("/v1/limit-books", status_code=201, response_model=EditionAnswer, responses={409: {}})
def draft_edition(
    request: Request, caller: Editor, sent: Annotated[EditionDraft, Depends(body_of(EditionDraft))]
) -> Response:
    """Keep a new edition as a draft, and its book if it is the first."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        kept = editions.draft(tx, sent)
    location = {"Location": f"/v1/limit-books/{kept.book}/{kept.edition}"}
    return answer(edition_answer(kept), location | conditional.written(kept.version), status=201)


@router.get("/v1/limit-books/{book}/{edition}", response_model=EditionAnswer, dependencies=READER)
def get_edition(request: Request, book: PathName, edition: PathName) -> Response:
    """One edition with all it says."""
    with service_of(request).read() as connection:
        found = books.get(connection, book, edition)
    return answer(edition_answer(found), conditional.written(found.version))


@router.put("/v1/limit-books/{book}/{edition}", response_model=EditionAnswer, responses={409: {}})
def edit_edition(
    request: Request,
    caller: Editor,
    book: PathName,
    edition: PathName,
    version: Version,
    sent: Annotated[EditionEdit, Depends(body_of(EditionEdit))],
) -> Response:
    """Replace what a draft says. An issued edition never changes: draft another."""
    refuse_partial(sent)
    with service_of(request).unit_of_work(caller.actor) as tx:
        kept = editions.edit(tx, book, edition, sent.content(), expected=version)
    return answer(edition_answer(kept), conditional.written(kept.version))


@router.post("/v1/limit-books/{book}/{edition}/issue", response_model=EditionAnswer, responses={409: {}})
def issue_edition(
    request: Request,
    caller: Editor,
    book: PathName,
    edition: PathName,
    version: Version,
    sent: Annotated[IssueSent, Depends(body_of(IssueSent))],
) -> Response:
    """Put a draft in force from a later day on; only a holder who had no part in drafting it can."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        kept = editions.issue(tx, book, edition, sent.effective_on, expected=version)
    return answer(edition_answer(kept), conditional.written(kept.version))


@router.post("/v1/limit-books/{book}/{edition}/withdraw", response_model=EditionAnswer, responses={409: {}})
def withdraw_edition(
    request: Request,
    caller: Editor,
    book: PathName,
    edition: PathName,
    version: Version,
    sent: Annotated[WithdrawalSent, Depends(body_of(WithdrawalSent))],
) -> Response:
    """Take an issued edition out of force from a later day on. The one before it does not come back."""
    with service_of(request).unit_of_work(caller.actor) as tx:
        kept = editions.withdraw(tx, book, edition, sent.withdrawn_on, expected=version)
    return answer(edition_answer(kept), conditional.written(kept.version))
