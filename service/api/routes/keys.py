"""The caller's own key. Keys are issued and revoked by an operator's command, not over HTTP.

Keys are made and revoked by the operator on the command line, not over HTTP.
"""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Depends
from starlette.responses import Response

from service.api.answers import answer
from service.api.deps import Caller, needs
from service.api.schemas.keys import KeyAnswer

router = APIRouter(tags=["keys"])


@router.get("/v1/key", response_model=KeyAnswer)
def get_key(caller: Annotated[Caller, Depends(needs(None))]) -> Response:
    """What this key is good for."""
    key = caller.key
    return answer(
        KeyAnswer(
            label=key.label,
            holder=key.holder,
            scopes=sorted(key.scopes),
            depot=key.depot,
            device=key.device,
            created_at=key.created_at,
            expires_at=key.expires_at,
        )
    )
