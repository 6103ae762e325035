"""The columns of the register as CSV, taken from the types of a section's record.

A column is a JSON path joined by dots. Lists are joined by `;`, those of objects column by column; a
layout is one cell of JSON.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, is_dataclass
from enum import Enum
from types import NoneType, UnionType
from typing import Annotated, Any, Literal, Union, get_args, get_origin, get_type_hints

from pydantic import BaseModel

from service.application import equipment
from service.application.layouts import Layout
from service.application.section_content import Content


@dataclass(frozen=True, slots=True)
class Column:
    """`kind` is text, number, integer, boolean or json; `listed` joins values by `;`, and `inside` names
    the list of objects that the column runs through."""

    path: tuple[str, ...]
    kind: str
    listed: bool = False
    inside: tuple[str, ...] | None = None

    @property
    def name(self) -> str:
        return ".".join(self.path)


def _bare(hint: Any) -> Any:
    """A type without `None` and annotations."""
    if get_origin(hint) is Annotated:
        return _bare(get_args(hint)[0])
    if get_origin(hint) in (Union, UnionType):
        rest = [part for part in get_args(hint) if part is not NoneType]
        return _bare(rest[0]) if len(rest) == 1 else hint
    return hint


def _members(hint: Any) -> dict[str, Any] | None:
    """Name → type of the members of a record, a model or a union of models; None for anything else."""
    if get_origin(hint) in (Union, UnionType):
        members: dict[str, Any] = {}
        for model in get_args(hint):
            members |= _members(model) or {}
        return members
    if isinstance(hint, type) and issubclass(hint, BaseModel):
        return {field.alias or name: field.annotation for name, field in hint.model_fields.items()}
    return get_type_hints(hint, include_extras=True) if is_dataclass(hint) else None


def _walk(path: tuple[str, ...], hint: Any, inside: tuple[str, ...] | None = None) -> Iterator[Column]:
    hint = equipment.Kinds if path == ("equipment",) else _bare(hint)
    if hint is Layout:
        yield Column(path, "json")
    elif (members := _members(hint)) is not None:
        for name, member in members.items():
            yield from _walk((*path, name), member, inside)
    elif get_origin(hint) is tuple:
        item = _bare(get_args(hint)[0])
        if _members(item) is None:
            yield Column(path, _scalar(item), listed=True)
        else:
            yield from _walk(path, item, inside=path)
    else:
        yield Column(path, _scalar(hint), listed=inside is not None, inside=inside)


def _scalar(hint: Any) -> str:
    if get_origin(hint) is Literal:
        hint = type(get_args(hint)[0])
    if isinstance(hint, type) and issubclass(hint, Enum):
        return "text"
    return {float: "number", int: "integer", bool: "boolean"}.get(hint, "text")


CONTENT = tuple(_walk((), Content))
NAMES = (Column(("section",), "text"), Column(("version",), "integer"))
OWN = (
    Column(("depot",), "text"),
    Column(("sequence",), "integer"),
    *(
        Column(("status", name), kind)
        for name, kind in (
            ("compliance", "text"),
            ("overdue", "boolean"),
            ("worst_hazard", "text"),
            ("next_due_on", "text"),
            ("holds_until", "text"),
            ("sequence", "integer"),
        )
    ),
)
"""Columns that the service fills; an import passes over them."""

COLUMNS = (OWN[0], *NAMES, *CONTENT, *OWN[1:])
