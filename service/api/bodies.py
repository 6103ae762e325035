"""Request bodies: bounded bytes in, strict models or named faults out.

Bodies are validated from their bytes (pydantic's JSON mode): there strict models take ISO times but no
`"1.5"` for a number. Pointers follow RFC 6901 into the document as it was sent.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any, Generic, TypeVar

from fastapi import HTTPException, Request
from pydantic import BaseModel, ValidationError

from service.errors import Fault, NotAcceptableError, TooLargeError, UnparsableError

M = TypeVar("M", bound=BaseModel)

_DRAIN = 8
"""So many times the bound is read and dropped, so that a client still sending hears the answer."""

_POINTER_LENGTH = 200

_REASONS = {
    "extra_forbidden": ("unknown_member", "is no member here"),
    "missing": ("missing", "must be given"),
    "union_tag_invalid": ("unknown_word", "is none of the words known here"),
    "union_tag_not_found": ("missing", "lacks the member that says which kind it is"),
    "uuid_parsing": ("uuid", "must be a UUID"),
    "enum": ("unknown_word", ""),
    "literal_error": ("unknown_word", ""),
}


def parse(model: type[M], body: bytes) -> M:
    """Validate a JSON body.

    Raises
    ------
    UnparsableError
        If it is not JSON in UTF-8, or nested too deeply.
    NotAcceptableError
        If it does not fit the model, with a pointer to each fault.
    """
    try:
        return model.model_validate_json(body)
    except ValidationError as error:
        if any(one["type"] == "json_invalid" for one in error.errors(include_input=False)):
            raise UnparsableError("The body is not JSON in UTF-8 of a reasonable depth.") from None
        raise NotAcceptableError("The body cannot be taken as it is.", _faults(error, body)) from None


def _faults(error: ValidationError, body: bytes) -> tuple[Fault, ...]:
    document = json.loads(body, parse_int=float)  # an int of 5,000 digits is refused by int()
    return tuple(
        _fault(one["type"], one["loc"], one["msg"], document)
        for one in error.errors(include_input=False, include_url=False)[:100]
    )


def told(kind: str, message: str) -> tuple[str, str]:
    """Code and reason of what pydantic found, in our words where its own repeat the input."""
    code, reason = _REASONS.get(kind, (kind, ""))
    return code, reason or message.removeprefix("Value error, ")


def _fault(kind: str, loc: tuple[int | str, ...], message: str, document: Any) -> Fault:
    code, reason = told(kind, message)
    return Fault(code, reason, pointer=_pointer(kind, loc, document))


def _pointer(kind: str, loc: tuple[int | str, ...], document: Any) -> str:
    """`loc` without what pydantic puts in of its own (tags of unions, names of validators)."""
    parts: list[str] = []
    at = document
    for position, part in enumerate(loc):
        in_list = isinstance(at, list) and isinstance(part, int) and part < len(at)
        if in_list or (isinstance(at, dict) and part in at):
            at = at[part]
        elif not (kind == "missing" and position == len(loc) - 1):
            continue
        parts.append(str(part).replace("~", "~0").replace("/", "~1"))
    while parts and sum(len(part) + 1 for part in parts) > _POINTER_LENGTH:
        parts.pop()
    return "".join(f"/{part}" for part in parts)


async def read(request: Request, media_types: tuple[str, ...], most: int) -> tuple[str, bytes]:
    """The media type and bytes of a body; 415 if it is of no kind taken here.

    Raises
    ------
    TooLargeError
        If it holds more than `most` bytes.
    """
    media_type = request.headers.get("content-type", "").partition(";")[0].strip().lower()
    if media_type not in media_types:
        raise HTTPException(415, f"Send it as {' or '.join(media_types)}.")
    kept, total = [], 0
    async for chunk in request.stream():
        total += len(chunk)
        if total <= most:
            kept.append(chunk)
        elif total > most * _DRAIN:
            break
    if total > most:
        raise TooLargeError(f"The body holds more than {most} bytes.")
    return media_type, b"".join(kept)


@dataclass(frozen=True, slots=True)
class JsonBody(Generic[M]):
    """A dependency that gives the body as a model; `api/openapi.py` documents it."""

    model: type[M]
    most: int

    async def __call__(self, request: Request) -> M:
        _, content = await read(request, ("application/json",), self.most)
        return parse(self.model, content)


@dataclass(frozen=True, slots=True)
class Raw:
    """A body as it came."""

    media_type: str
    content: bytes


@dataclass(frozen=True, slots=True)
class RawBody:
    """A dependency that gives the body's bytes, for what is read line by line or item by item."""

    media_types: tuple[str, ...]
    most: int

    async def __call__(self, request: Request) -> Raw:
        return Raw(*await read(request, self.media_types, self.most))
