"""`shuntbook serve` as a process of its own, that can be killed."""

from __future__ import annotations

import os
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import httpx

SHUNTBOOK = Path(sys.executable).parent / "shuntbook"
STARTS_WITHIN_S = 60


def free_port() -> int:
    """A port that is free now."""
    with socket.create_server(("127.0.0.1", 0)) as listener:
        return int(listener.getsockname()[1])


@contextmanager
def serving(database_url: str) -> Iterator[tuple[subprocess.Popen[bytes], str]]:
    """The process and its base URL, once it answers; killed at the end if it is still there."""
    port = free_port()
    environment = os.environ | {"SHUNTBOOK_DATABASE_URL": database_url, "SHUNTBOOK_LOG_LEVEL": "error"}
    process = subprocess.Popen([SHUNTBOOK, "serve", "--port", str(port)], env=environment)
    base_url = f"http://127.0.0.1:{port}"
    try:
        deadline = time.monotonic() + STARTS_WITHIN_S
        while not _answers(base_url):
            if process.poll() is not None or time.monotonic() > deadline:
                raise RuntimeError("the server did not start; its log is in the captured output")
            time.sleep(0.05)
        yield process, base_url
    finally:
        process.kill()
        process.wait()


def _answers(base_url: str) -> bool:
    try:
        return httpx.get(f"{base_url}/health/live").status_code == 200
    except httpx.TransportError:
        return False
