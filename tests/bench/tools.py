"""What several measurements need: a served app, a line of the report, statistics as in real use."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import psycopg

HERE = Path(__file__).parent


def say(name: str, text: str) -> None:
    """One line of the report."""
    print(f"{name}  {text}", flush=True)


def plain(url: str) -> str:
    """The URL as psycopg takes it."""
    return url.replace("postgresql+psycopg", "postgresql")


@contextmanager
def served(module: str, url: str) -> Iterator[str]:
    """A server process of `serving.py` on a free port."""
    process = subprocess.Popen(
        [sys.executable, HERE / "serving.py", module, url], stdout=subprocess.PIPE, text=True
    )
    try:
        assert process.stdout is not None
        yield process.stdout.readline().strip()
    finally:
        process.terminate()
        process.wait()


def analyze(url: str) -> None:
    """What autovacuum does within a minute, and the tests' server never: without it the plans of foreign
    key checks, made while tables were empty, scan them whole."""
    with psycopg.connect(plain(url), autocommit=True) as connection:
        connection.execute("ANALYZE")


def empty(_url: str) -> None:
    """A template with nothing in it: worlds migrate it themselves."""
