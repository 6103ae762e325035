"""What all wire schemas share: strict JSON numbers, nothing unknown, no NaN, names that fit a URL.

Requests are validated from the body's bytes (pydantic's JSON mode), where strict takes ISO times and
enumeration words but neither `true` nor "1.5" for a number.
"""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, AwareDatetime, BaseModel, ConfigDict, PlainSerializer, StringConstraints

from service.records.journal import instant_text


class Request(BaseModel):
    """A request body, or a part of one."""

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, frozen=True)


class Answer(BaseModel):
    """An answer: every documented member present, null where there is no value."""

    model_config = ConfigDict(extra="forbid", allow_inf_nan=False, frozen=True, from_attributes=True)


def _printable(text: str) -> str:
    """No control characters but tab and line breaks, no lone surrogates: neither database keeps them."""
    if any((ord(sign) < 32 and sign not in "\t\n\r") or 0xD800 <= ord(sign) <= 0xDFFF for sign in text):
        raise ValueError("holds a control character")
    return text


NAME_PATTERN = r"^[A-Za-z0-9._()-]{1,40}$"
Name = Annotated[str, StringConstraints(pattern=NAME_PATTERN)]
"""A name that other records refer to and that stands in a URL."""

Line = Annotated[str, StringConstraints(min_length=1, max_length=200), AfterValidator(_printable)]
"""One line of free text."""

Remarks = Annotated[str, StringConstraints(max_length=2000), AfterValidator(_printable)]
"""Free text of up to 2,000 characters."""

Instant = Annotated[
    AwareDatetime,
    PlainSerializer(instant_text, return_type=str, when_used="json"),
]
"""RFC 3339 instant; any offset accepted, `Z` answered."""
