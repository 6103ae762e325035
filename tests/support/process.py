"""A real `shuntbook serve` in a process of its own, to be stopped as an operator does, or killed."""

from __future__ import annotations

import json
import os
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import httpx

SHUNTBOOK = Path(sys.executable).parent / "shuntbook"
STARTS_WITHIN_S = 60
STOPS_WITHIN_S = 30


@dataclass
class Served:
    """A server that answers."""

    base_url: str
    process: subprocess.Popen[str]

    def kill(self) -> None:
        """End it as a power cut does, and wait until it is gone."""
        self.process.kill()
        self.process.wait()


def free_port() -> int:
    """A port that nobody listened on a moment ago."""
    with socket.create_server(("127.0.0.1", 0)) as listener:
        return int(listener.getsockname()[1])


@contextmanager
def serving(url: str, *arguments: str) -> Iterator[Served]:
    """Serve a migrated database; unless it was killed, it must stop when told to and log JSON only."""
    port = free_port()
    process = subprocess.Popen(
        [SHUNTBOOK, "serve", "--port", str(port), *arguments],
        env=os.environ | {"SHUNTBOOK_DATABASE_URL": url, "SHUNTBOOK_LOG_LEVEL": "warning"},
        stderr=subprocess.PIPE,
        text=True,
    )
    served = Served(f"http://127.0.0.1:{port}", process)
    try:
        _wait(served)
        yield served
        if process.returncode is None:
            process.send_signal(signal.SIGTERM)
            _, err = process.communicate(timeout=STOPS_WITHIN_S)
            assert all(isinstance(json.loads(line), dict) for line in err.splitlines()), err
    finally:
        served.kill()
        if process.stderr is not None:
            process.stderr.close()


def _wait(served: Served) -> None:
    deadline = time.monotonic() + STARTS_WITHIN_S
    while served.process.poll() is None and time.monotonic() < deadline:
        try:
            httpx.get(f"{served.base_url}/health/live")
        except httpx.TransportError:
            time.sleep(0.02)
        else:
            return
    served.process.kill()
    raise AssertionError(served.process.communicate()[1])
