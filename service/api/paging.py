"""Pages of lists: a bounded size, and an opaque cursor that is good for the same filters only.

A cursor holds the last key of the page and a checksum over that, the address and the filters. It guards
against slips, not secrets: it leads only to what the same key could have listed anyway.
"""

from __future__ import annotations

import base64
import binascii
import json
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Annotated, Generic, TypeVar
from urllib.parse import urlencode

from fastapi import Query, Request

from service.api.bounds import PAGE_SIZE
from service.api.schemas.base import Answer
from service.errors import Fault, NotAcceptableError
from service.records.engine import digest_of

Row = TypeVar("Row")
Item = TypeVar("Item")
Key = tuple[str | int, ...]


class Page(Answer, Generic[Item]):
    """A page of a list; `next` is null on the last."""

    items: list[Item]
    next: str | None


@dataclass(frozen=True, slots=True)
class Paging:
    """What page is asked for: ask the records for `most` rows after `after`, then `cut` them."""

    page_size: int
    after: Key | None
    address: str
    filters: tuple[tuple[str, str], ...]

    @property
    def most(self) -> int:
        """One row more than the page holds, to know whether another follows."""
        return self.page_size + 1

    def cut(self, rows: Sequence[Row], key: Callable[[Row], Key]) -> tuple[list[Row], str | None]:
        """The page's rows and the address of the next page; `key` is what the list is ordered by."""
        page = list(rows[: self.page_size])
        if len(rows) <= self.page_size:
            return page, None
        cursor = _encode(key(page[-1]), self.address, self.filters)
        query = urlencode([*self.filters, ("page_size", self.page_size), ("cursor", cursor)])
        return page, f"{self.address}?{query}"


async def paging(
    request: Request,
    page_size: Annotated[int, Query(ge=1, le=PAGE_SIZE, description="Items on a page.")] = 100,
    cursor: Annotated[
        str | None, Query(max_length=2000, description="From `next` of the page before.")
    ] = None,
) -> Paging:
    """A dependency: `Annotated[Paging, Depends(paging)]`."""
    address = request.url.path
    own = ("page_size", "cursor")
    filters = tuple(sorted((name, value) for name, value in request.query_params.items() if name not in own))
    after = None if cursor is None else _decode(cursor, address, filters)
    return Paging(page_size, after, address, filters)


def link(next_page: str | None) -> dict[str, str]:
    """The `Link` header (RFC 8288) of a page."""
    return {} if next_page is None else {"Link": f'<{next_page}>; rel="next"'}


def _checksum(key: str, address: str, filters: tuple[tuple[str, str], ...]) -> str:
    return digest_of(json.dumps([key, address, filters]))[:16]


def _encode(key: Key, address: str, filters: tuple[tuple[str, str], ...]) -> str:
    text = json.dumps(key, separators=(",", ":"))
    return (
        base64.urlsafe_b64encode(f"{_checksum(text, address, filters)}{text}".encode()).decode().rstrip("=")
    )


def _decode(cursor: str, address: str, filters: tuple[tuple[str, str], ...]) -> Key:
    try:
        plain = base64.urlsafe_b64decode(cursor + "=" * (-len(cursor) % 4)).decode()
    except (binascii.Error, ValueError):
        plain = ""
    checksum, text = plain[:16], plain[16:]
    if not text or checksum != _checksum(text, address, filters):
        fault = Fault("cursor", "is no cursor of this list with these filters", parameter="cursor")
        raise NotAcceptableError("The cursor cannot be used here; begin again without one.", (fault,))
    return tuple(json.loads(text))
