"""The demo's depot, built once for the whole run, whatever number of processes works on it."""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from demo.depot import NOW, Demo, built, opened
from filelock import FileLock


@pytest.fixture(scope="session")
def demo(sqlite_template: Path, tmp_path_factory: pytest.TempPathFactory, worker_id: str) -> Iterator[Demo]:
    """The demo as of `NOW`; two processes of one run share the folder above their own."""
    own = tmp_path_factory.getbasetemp()
    shared = own if worker_id == "master" else own.parent
    path, said = shared / "demo.db", shared / "demo.json"
    with FileLock(shared / "demo.lock"):
        if not said.exists():
            shutil.copy(sqlite_template, path)
            said.write_text(json.dumps(built(path, NOW)))
    found = opened(path, NOW, json.loads(said.read_text()))
    yield found
    found.service.database.close()
