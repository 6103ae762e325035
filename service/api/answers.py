"""Answers: models as JSON, files with names, and which format was asked for.

Models are written once, without the framework validating them again.
"""

from __future__ import annotations

from collections.abc import Mapping

from fastapi import HTTPException, Request
from pydantic import BaseModel
from starlette.responses import Response

JSON = "application/json"
NDJSON = "application/x-ndjson"


def answer(model: BaseModel, headers: Mapping[str, str] | None = None, *, status: int = 200) -> Response:
    """A model as a JSON answer."""
    return Response(model.model_dump_json(), status, headers, media_type=JSON)


def file(
    content: bytes | str, media_type: str, name: str, headers: Mapping[str, str] | None = None
) -> Response:
    """A file to be saved under `name`."""
    more = {**(headers or {}), "Content-Disposition": f'attachment; filename="{name}"'}
    return Response(content, 200, more, media_type=media_type)


def chosen(request: Request, named: str | None, offered: Mapping[str, str]) -> str:
    """The format to answer in: `?format=` wins over `Accept`, the first of `offered` is the default.

    `offered` is format → media type.

    Raises
    ------
    HTTPException
        406 if it is none of those offered.
    """
    if named is not None:
        if named in offered:
            return named
    else:
        for wanted in _accepted(request.headers.get("accept") or "*/*"):
            for name, media_type in offered.items():
                if wanted in (media_type, "*/*", f"{media_type.partition('/')[0]}/*"):
                    return name
    raise HTTPException(406, f"This address answers in the formats {', '.join(offered)}.")


def _accepted(header: str) -> list[str]:
    """The media ranges of an Accept header (RFC 9110, 12.5.1), the most wanted first."""
    ranked = []
    for part in header.split(","):
        media_range, *parameters = (piece.strip().lower() for piece in part.split(";"))
        weight = next((p[2:] for p in parameters if p.startswith("q=")), "1")
        try:
            quality = float(weight)
        except ValueError:
            quality = 0.0
        if quality > 0:
            ranked.append((-quality, media_range))
    return [media_range for _, media_range in sorted(ranked, key=lambda pair: pair[0])]
