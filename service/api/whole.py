"""PUT names every editable member, so that an older client cannot wipe a newer one it does not know.

Which members a record has is said by its schema; what is the service's own is typed `object` there.
"""

from __future__ import annotations

from collections.abc import Iterator

from pydantic import BaseModel

from service.errors import Fault, NotAcceptableError

IGNORED = "The service's own; ignored when sent."


def refuse_partial(sent: BaseModel) -> None:
    """Raise NotAcceptableError, with a pointer to each member that a body, or a part of it, leaves out."""
    faults = tuple(_unnamed(sent, ""))
    if faults:
        raise NotAcceptableError("A PUT names every editable member, if only with null.", faults)


def _unnamed(part: BaseModel, pointer: str) -> Iterator[Fault]:
    for name, field in type(part).model_fields.items():
        at = f"{pointer}/{field.alias or name}"
        if field.annotation is object:
            continue
        if name not in part.model_fields_set:
            yield Fault("missing", "must be given, if only as null", at)
        value = getattr(part, name)
        if isinstance(value, BaseModel):
            yield from _unnamed(value, at)
        elif isinstance(value, list | tuple):
            for index, item in enumerate(value):
                if isinstance(item, BaseModel):
                    yield from _unnamed(item, f"{at}/{index}")
