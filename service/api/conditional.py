"""Entity tags: what has not changed is not sent again, and no edit overwrites another unseen.

A GET under a depot is tagged by the journal's sequence, the depot's date and the query, so 304 is answered
from one row. A record's tag begins with its version, which is all that `If-Match` compares.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import date, datetime
from typing import Annotated

from fastapi import Header, Request
from sqlalchemy.engine import Connection
from starlette.responses import Response

from service.application import depots
from service.errors import PreconditionMissingError, StaleError, UnparsableError
from service.records.engine import digest_of
from service.records.unit_of_work import local_day

_TAG = re.compile(r'"(?:v(?P<version>[0-9]{1,9})\.?)?(?P<state>[0-9a-f]{0,32})"')


@dataclass(frozen=True, slots=True)
class Fresh:
    """What a GET under a depot would answer from: journal sequence, the depot's day, and their tag."""

    sequence: int
    today: date
    state: str
    known: str | None
    """The tag the client has, if it still holds."""

    @property
    def not_modified(self) -> Response | None:
        """The answer to send at once if the client has everything already."""
        return None if self.known is None else Response(status_code=304, headers={"ETag": self.known})

    @property
    def headers(self) -> dict[str, str]:
        """For a list or a report."""
        return {"ETag": f'"{self.state}"'}

    def of_record(self, version: int) -> dict[str, str]:
        """For one record that can be edited."""
        return {"ETag": f'"v{version}.{self.state}"'}


def under_depot(request: Request, connection: Connection, depot: str, now: datetime) -> Fresh:
    """Read the one row that says whether anything changed; NotFoundError if there is no such depot."""
    pulse = depots.pulse(connection, depot)
    today = local_day(now, pulse.time_zone)
    asked = f"{request.url.path}?{request.url.query}"
    accept = request.headers.get("accept", "*/*")
    parts = (request.app.version, pulse.sequence, today, asked, accept)
    state = digest_of("\n".join(map(str, parts)))[:32]
    sent = request.headers.get("if-none-match", "")
    known = next((tag.group() for tag in _TAG.finditer(sent) if tag["state"] == state), None)
    return Fresh(pulse.sequence, today, state, known)


def written(version: int) -> dict[str, str]:
    """The tag of a record that was just written, good for the next edit."""
    return {"ETag": f'"v{version}"'}


async def edits(if_match: Annotated[str | None, Header()] = None) -> int:
    """A dependency: the version that an edit was made from.

    Raises
    ------
    PreconditionMissingError
        Without `If-Match`, or with `*`, which says nothing of what was read.
    """
    if if_match is None or if_match.strip() == "*":
        raise PreconditionMissingError("Send the ETag of the record as you read it in If-Match.")
    return _version(if_match)


async def edits_or_creates(
    if_match: Annotated[str | None, Header()] = None, if_none_match: Annotated[str | None, Header()] = None
) -> int | None:
    """A dependency: the version that an edit was made from; None to create (`If-None-Match: *`)."""
    if if_none_match is None:
        return await edits(if_match)
    if if_match is not None or if_none_match.strip() != "*":
        raise UnparsableError("Send either If-Match with an ETag, or If-None-Match: * to create.")
    return None


def _version(sent: str) -> int:
    tag = _TAG.fullmatch(sent.strip())
    if tag is None or tag["version"] is None:
        raise StaleError("If-Match does not hold the ETag of a version of this record.")
    return int(tag["version"])
