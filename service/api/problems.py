"""Errors as problems (RFC 9457): the one table from error class to type, and the handlers that use it.

No text here repeats what a client sent. The types themselves are in `problem_kinds`.
"""

from __future__ import annotations

import json
from datetime import datetime
from http import HTTPStatus
from typing import Any

from fastapi import FastAPI, Request
from fastapi.exceptions import RequestValidationError
from starlette.exceptions import HTTPException
from starlette.responses import Response
from starlette.routing import Match

from service import errors
from service.api.bodies import told
from service.api.problem_kinds import KINDS, Kind
from service.errors import Fault, ShuntbookError

MEDIA_TYPE = "application/problem+json"
RETRY_AFTER_S = 5


_BY_CLASS: dict[type[ShuntbookError], str] = {
    errors.UnparsableError: "unparsable",
    errors.UnknownKeyError: "unknown-key",
    errors.ForbiddenError: "forbidden",
    errors.NotFoundError: "not-found",
    errors.ConflictError: "conflict",
    errors.StaleError: "stale",
    errors.TooLargeError: "too-large",
    errors.NotAcceptableError: "not-acceptable",
    errors.NonPhysicalError: "not-acceptable",
    errors.NoAnswerError: "no-answer",
    errors.PreconditionMissingError: "precondition-missing",
    errors.StorageFaultError: "storage-fault",
    errors.UnavailableError: "unavailable",
}

_BY_HTTP_STATUS = {
    400: "unparsable",
    404: "not-found",
    405: "method-not-allowed",
    406: "not-producible",
    413: "too-large",
    415: "unsupported-media-type",
}


def kind_of(error: ShuntbookError) -> Kind:
    """The problem type of an error: by its class, its conflict kind, or the one fault it consists of."""
    if isinstance(error, errors.ConflictError):
        return KINDS[error.kind]
    codes = {fault.code.replace("_", "-") for fault in error.faults}
    if isinstance(error, errors.NotAcceptableError) and len(codes) == 1 and (only := codes.pop()) in KINDS:
        return KINDS[only]
    return KINDS[_BY_CLASS[type(error)]]


def problem_of(error: ShuntbookError, instance: str, now: datetime) -> dict[str, Any]:
    """The problem document of an error; a batch puts the same into each refused outcome."""
    problem = _document(kind_of(error), error.detail, instance, error.faults)
    if isinstance(error, errors.ConflictError) and error.stored_digest is not None:
        problem["stored_digest"] = error.stored_digest
    if any(fault.code == "in_the_future" for fault in error.faults):
        problem["server_time"] = now.isoformat().replace("+00:00", "Z")
    return problem


def _document(kind: Kind, detail: str, instance: str, faults: tuple[Fault, ...] = ()) -> dict[str, Any]:
    return {
        "type": f"/problems/{kind.type}",
        "title": kind.title,
        "status": kind.status,
        "detail": detail,
        "instance": instance,
        "errors": [_fault_document(fault) for fault in faults],
    }


def _fault_document(fault: Fault) -> dict[str, Any]:
    places = {name: getattr(fault, name) for name in ("pointer", "parameter", "line", "column")}
    return {"code": fault.code, "reason": fault.reason} | {
        name: place for name, place in places.items() if place is not None
    }


def _response(problem: dict[str, Any], headers: dict[str, str] | None = None) -> Response:
    status = problem["status"]
    more = dict(headers or {})
    if status == HTTPStatus.SERVICE_UNAVAILABLE:
        more["Retry-After"] = str(RETRY_AFTER_S)
    return Response(json.dumps(problem, ensure_ascii=False), status, more, media_type=MEDIA_TYPE)


def _challenge(request: Request) -> dict[str, str]:
    """How to send a key (RFC 6750, RFC 7617): Basic is for a browser or calendar that reads."""
    basic = ', Basic realm="shuntbook", charset="UTF-8"' if request.method == "GET" else ""
    return {"WWW-Authenticate": f'Bearer realm="shuntbook"{basic}'}


def _on_shuntbook_error(request: Request, error: Exception) -> Response:
    assert isinstance(error, ShuntbookError)
    problem = problem_of(error, request.state.request_id, request.app.state.service.clock())
    return _response(problem, _challenge(request) if problem["status"] == 401 else None)


def _on_parameters(request: Request, error: Exception) -> Response:
    """A path that no record can have is not found; any other parameter is named."""
    assert isinstance(error, RequestValidationError)
    found = [(str(one["loc"][0]), str(one["loc"][-1]), one) for one in error.errors()]
    if any(place == "path" for place, _, _ in found):
        return _on_shuntbook_error(request, errors.NotFoundError("There is no such record."))
    faults = tuple(Fault(*told(one["type"], one["msg"]), parameter=name) for _, name, one in found)
    refused = errors.NotAcceptableError("A parameter cannot be taken as it is.", faults)
    return _on_shuntbook_error(request, refused)


def _on_http_exception(request: Request, error: Exception) -> Response:
    assert isinstance(error, HTTPException)
    kind = KINDS[_BY_HTTP_STATUS[error.status_code]]
    if kind.status == HTTPStatus.METHOD_NOT_ALLOWED:
        detail, headers = kind.meaning, {"Allow": ", ".join(_allowed(request))}
    elif kind.status == HTTPStatus.NOT_FOUND:
        detail, headers = "There is nothing at this address.", {}
    else:
        detail, headers = str(error.detail), {}
    return _response(_document(kind, detail, request.state.request_id), headers)


def _allowed(request: Request) -> list[str]:
    """Every method of every route at this path: the router itself names only the first route's."""
    matching = (route for route in request.app.routes if route.matches(request.scope)[0] is not Match.NONE)
    return sorted(set().union(*(getattr(route, "methods", None) or () for route in matching)))


def internal(instance: str) -> Response:
    """The answer to a fault of our own: nothing of it is shown."""
    return _response(_document(KINDS["internal"], "Something went wrong in this service.", instance))


def install(app: FastAPI) -> None:
    """Answer every error of this service and of the router as a problem."""
    app.add_exception_handler(ShuntbookError, _on_shuntbook_error)
    app.add_exception_handler(RequestValidationError, _on_parameters)
    app.add_exception_handler(HTTPException, _on_http_exception)
