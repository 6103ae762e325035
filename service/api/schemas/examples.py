"""Answers of calculations shown in the OpenAPI document: those that the request's example gets.

Long lists are cut short in them. A test posts every example and compares.
"""

from __future__ import annotations

from typing import Any

_ANSWERS: dict[str, Any] = {}


def shown(calculation: str) -> dict[int | str, dict[str, Any]]:
    """The example of a calculation's answer, as the framework takes it."""
    return {200: {"content": {"application/json": {"example": _ANSWERS.get(calculation)}}}}
