"""What every route asks for: the service, a caller with the scope it needs, a body, names in the path.

No dependency keeps a connection or a lock: a route opens its own unit of work in its body. Every route
has exactly one `Needs`, which also refuses query parameters that the route does not declare.
"""

from __future__ import annotations

import base64
import binascii
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Annotated, Any

from fastapi import BackgroundTasks, Path, Query, Request
from fastapi.dependencies.models import Dependant
from pydantic import BaseModel

from service.api.bodies import JsonBody, M
from service.api.bounds import BODY_BYTES
from service.api.schemas.base import NAME_PATTERN, Line
from service.application import access
from service.application.context import Service
from service.errors import Fault, ForbiddenError, NotAcceptableError, NotFoundError, UnknownKeyError
from service.records.unit_of_work import Actor

PathName = Annotated[str, Path(pattern=NAME_PATTERN)]
"""A name in the path; one that no record can have is not found."""

PathId = Annotated[str, Path(pattern=r"^[0-9a-f]{8}(-[0-9a-f]{4}){3}-[0-9a-f]{12}$")]
"""A UUID in the path, in lower case as this service writes them."""

QueryFormat = Annotated[
    str | None, Query(alias="format", pattern="^[a-z]{1,10}$", description="Wins over Accept.")
]
"""The format to answer in, as `answers.chosen` takes it."""

QueryText = Annotated[Line, Query()]
"""A text to filter by."""


@dataclass(frozen=True, slots=True)
class Caller:
    """Who asks, by a key that is good now."""

    key: access.Key

    @property
    def actor(self) -> Actor:
        """As whom writes are journalled."""
        return Actor(self.key.label, self.key.holder, self.key.device)

    @property
    def scopes(self) -> frozenset[str]:
        """What the key may do."""
        return self.key.scopes

    @property
    def depot(self) -> str | None:
        """The only depot the key is good for; None is every depot."""
        return self.key.depot


@dataclass(frozen=True, slots=True)
class Needs:
    """A dependency that gives the caller of a route, or refuses.

    `scope` None asks for any good key. A key of another depot than the path's finds nothing, whatever
    its scopes. `every_depot` is for what belongs to no depot.
    """

    scope: str | None
    every_depot: bool = False

    def __call__(self, request: Request, background: BackgroundTasks) -> Caller:
        service = service_of(request)
        now = service.clock()
        with service.read() as connection:
            key = access.authenticate(connection, _secret(request), now)
        request.state.key = key.label
        asked = request.path_params.get("depot")
        if key.depot is not None and asked not in (None, key.depot):
            raise NotFoundError("There is no such depot.")
        if self.scope is not None and self.scope not in key.scopes:
            raise ForbiddenError(f"This needs a key with the scope '{self.scope}'.")
        if self.every_depot and key.depot is not None:
            raise ForbiddenError("This needs a key for every depot; this one is bound to one.")
        refuse_unknown_parameters(request)
        if access.use_is_due(key, now):
            background.add_task(access.note_use, service, key.label)
        return Caller(key)


def needs(scope: str | None, *, every_depot: bool = False) -> Needs:
    """For `Annotated[Caller, Depends(needs("read"))]`; None: any good key."""
    assert scope is None or scope in access.SCOPES
    return Needs(scope, every_depot)


def service_of(request: Request) -> Service:
    """The running service."""
    service: Service = request.app.state.service
    return service


def body_of(model: type[M], *, most: int = BODY_BYTES) -> JsonBody[M]:
    """For `Annotated[Model, Depends(body_of(Model))]`: the JSON body, validated strictly."""
    return JsonBody(model, most)


def refuse_unknown_parameters(request: Request) -> None:
    """422 for a query parameter that the route does not declare, or that is given twice."""
    known: frozenset[str] = request.app.state.parameters[request.scope["endpoint"]]
    given = [name for name, _ in request.query_params.multi_items()]
    faults = [
        Fault("unknown_parameter", "is no parameter of this address", parameter=name[:40])
        for name in given
        if name not in known
    ]
    if faults:
        raise NotAcceptableError("A query parameter is unknown here.", tuple(faults))
    twice = {name for name in given if given.count(name) > 1}
    if twice:
        faults = [Fault("given_twice", "may be given once", parameter=name) for name in sorted(twice)]
        raise NotAcceptableError("A query parameter is given more than once.", tuple(faults))


def parameters_of(dependant: Dependant) -> frozenset[str]:
    """Every query parameter that a route and its dependencies declare."""
    return frozenset(_parameters(dependant))


def _parameters(dependant: Dependant) -> Iterator[str]:
    for field in dependant.query_params:
        model: Any = field.field_info.annotation
        if isinstance(model, type) and issubclass(model, BaseModel):
            yield from model.model_fields
        else:
            yield field.alias
    for inner in dependant.dependencies:
        yield from _parameters(inner)


def _secret(request: Request) -> str:
    """The key from the Authorization header: Bearer, or on GET the password of Basic."""
    scheme, _, credentials = request.headers.get("authorization", "").partition(" ")
    if scheme.lower() == "bearer":
        return credentials.strip()
    if scheme.lower() == "basic" and request.method == "GET":
        try:
            text = base64.b64decode(credentials.strip(), validate=True).decode()
        except (binascii.Error, UnicodeDecodeError):
            raise UnknownKeyError("The Basic credentials cannot be read.") from None
        return text.partition(":")[2]
    raise UnknownKeyError("Send an access key in the Authorization header.")
