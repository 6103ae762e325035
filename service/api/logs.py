"""One log line and one count a request, with its id; never a key, a reading or a body.

Of an unexpected error only its class and where it happened are logged: messages of drivers and of
validation repeat what was sent.
"""

from __future__ import annotations

import logging
import time
import traceback
from collections.abc import Callable

import structlog
from prometheus_client import CollectorRegistry, Counter, Histogram
from starlette.datastructures import MutableHeaders
from starlette.requests import ClientDisconnect
from starlette.types import ASGIApp, Message, Receive, Scope, Send
from structlog.types import EventDict, Processor

from service.api.problems import internal

log = structlog.get_logger()

_STAMPS: list[Processor] = [
    structlog.stdlib.add_log_level,
    structlog.processors.TimeStamper(fmt="iso", utc=True),
]


def configure() -> None:
    """Hand our lines to the standard library's logging, which drops them until `to_stderr` is called."""
    structlog.configure(
        processors=[
            structlog.stdlib.filter_by_level,
            structlog.contextvars.merge_contextvars,
            *_STAMPS,
            structlog.stdlib.ProcessorFormatter.wrap_for_formatter,
        ],
        wrapper_class=structlog.stdlib.BoundLogger,
        logger_factory=structlog.stdlib.LoggerFactory(),
        cache_logger_on_first_use=True,
    )


def to_stderr(level: str) -> None:
    """JSON lines on the standard error stream, other libraries' too; for a process that serves or works."""
    configure()
    formatter = structlog.stdlib.ProcessorFormatter(
        processors=[
            structlog.stdlib.ProcessorFormatter.remove_processors_meta,
            _without_messages,
            structlog.processors.JSONRenderer(ensure_ascii=False),
        ],
        foreign_pre_chain=_STAMPS,
    )
    handler = logging.StreamHandler()
    handler.setFormatter(formatter)
    logging.basicConfig(level=level.upper(), handlers=[handler], force=True)


def _without_messages(_logger: object, _name: str, event: EventDict) -> EventDict:
    """An error that another library logs is told by its class and place only."""
    error = event.pop("exc_info", None)
    if isinstance(error, tuple):
        error = error[1]
    if error is not None:
        event.update(whereabouts(error))
    return event


def whereabouts(error: BaseException) -> dict[str, object]:
    """Class and place of an error and of what caused it, without their messages."""
    classes: list[str] = []
    at: BaseException | None = error
    while at is not None and len(classes) < 20:  # a chain can be a ring
        classes.append(type(at).__name__)
        at = at.__cause__ or at.__context__
    frames = traceback.extract_tb(error.__traceback__)
    return {
        "error": " from ".join(classes),
        "frames": [f"{frame.filename}:{frame.lineno} {frame.name}" for frame in frames[-12:]],
    }


class Metrics:
    """What `/metrics` shows of this process."""

    def __init__(self) -> None:
        self.registry = CollectorRegistry()
        labels = ("method", "route", "status")
        self.requests = Counter("shuntbook_requests", "Requests answered", labels, registry=self.registry)
        self.seconds = Histogram(
            "shuntbook_request_seconds", "Time to answer", ("method", "route"), registry=self.registry
        )


class Frame:
    """Around every request: its id, its headers, its line in the log, its count, and a last resort."""

    def __init__(self, app: ASGIApp, *, new_id: Callable[[], str], metrics: Metrics) -> None:
        self.app = app
        self.new_id = new_id
        self.metrics = metrics

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """The ASGI call."""
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        request_id = self.new_id()
        state = scope.setdefault("state", {})
        state["request_id"] = request_id
        status = 0

        async def framed(message: Message) -> None:
            nonlocal status
            if message["type"] == "http.response.start":
                status = message["status"]
                headers = MutableHeaders(scope=message)
                headers["X-Request-Id"] = request_id
                headers.setdefault("Cache-Control", "private, no-cache")
                headers.setdefault("Vary", "Authorization, Accept")
            await send(message)

        began = time.perf_counter()
        with structlog.contextvars.bound_contextvars(request=request_id):
            try:
                await self.app(scope, receive, framed)
            except ClientDisconnect:
                log.info("client went away")
            except Exception as error:
                log.error("fault", **whereabouts(error))  # noqa: TRY400, the message may repeat what was sent
                if status:
                    raise
                await internal(request_id)(scope, receive, framed)
            self._record(scope, status, time.perf_counter() - began)

    def _record(self, scope: Scope, status: int, seconds: float) -> None:
        """Log and count by the route's template, never the address itself: it may name what is private."""
        route = getattr(scope.get("route"), "path", "none")
        method = scope["method"] if route != "none" else "any"
        self.metrics.requests.labels(method, route, str(status)).inc()
        self.metrics.seconds.labels(method, route).observe(seconds)
        key = scope["state"].get("key")
        log.info("request", method=method, route=route, status=status, seconds=round(seconds, 4), key=key)
