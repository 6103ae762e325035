"""A real HTTP server in a thread of the test process, on a free port of this machine."""

from __future__ import annotations

import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress

import uvicorn
from uvicorn._types import ASGIApplication

STARTS_WITHIN_S = 20


@contextmanager
def serve(app: ASGIApplication) -> Iterator[str]:
    """Serve `app` and give its base URL, without a slash at the end."""
    # The server opens its own socket: on one that is handed to it asyncio does not switch Nagle's algorithm
    # off, and every answer then waits 40 ms for the client's acknowledgement.
    config = uvicorn.Config(
        app,
        host="127.0.0.1",
        port=0,
        backlog=512,
        lifespan="on",
        log_config=None,
        timeout_graceful_shutdown=5,
    )
    server = uvicorn.Server(config)
    thread = threading.Thread(target=_run, args=(server,), name="test-server")
    thread.start()
    try:
        deadline = time.monotonic() + STARTS_WITHIN_S
        while thread.is_alive() and not server.started:
            if time.monotonic() > deadline:
                raise TimeoutError(f"the app did not start within {STARTS_WITHIN_S} s")
            time.sleep(0.005)
        if not server.started:
            raise RuntimeError("the app's start-up failed; its log is in the captured output")
        yield f"http://127.0.0.1:{server.servers[0].sockets[0].getsockname()[1]}"
    finally:
        server.should_exit = True
        thread.join()


def _run(server: uvicorn.Server) -> None:
    with suppress(SystemExit):  # uvicorn's way to report a failed start-up, which `serve` reports itself
        server.run()
