"""A real HTTP server in a thread of the test process, on a free port of this machine."""

from __future__ import annotations

import socket
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
    config = uvicorn.Config(app, lifespan="on", log_config=None, timeout_graceful_shutdown=5)
    server = uvicorn.Server(config)
    with socket.create_server(("127.0.0.1", 0), backlog=512) as listener:
        thread = threading.Thread(target=_run, args=(server, listener), name="test-server")
        thread.start()
        try:
            deadline = time.monotonic() + STARTS_WITHIN_S
            while thread.is_alive() and not server.started:
                if time.monotonic() > deadline:
                    raise TimeoutError(f"the app did not start within {STARTS_WITHIN_S} s")
                time.sleep(0.005)
            if not server.started:
                raise RuntimeError("the app's start-up failed; its log is in the captured output")
            yield f"http://127.0.0.1:{listener.getsockname()[1]}"
        finally:
            server.should_exit = True
            thread.join()


def _run(server: uvicorn.Server, listener: socket.socket) -> None:
    with suppress(SystemExit):  # uvicorn's way to report a failed start-up, which `serve` reports itself
        server.run(sockets=[listener])
