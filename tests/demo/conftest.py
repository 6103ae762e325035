"""The demo's depot, built once for the whole run, whatever number of processes works on it."""

from __future__ import annotations

import json
from collections.abc import Iterator

import pytest
from demo.depot import NOW, Demo, built, opened
from filelock import FileLock


@pytest.fixture(scope="session")
def demo(tmp_path_factory: pytest.TempPathFactory, worker_id: str) -> Iterator[Demo]:
    """The demo as of `NOW`; two processes of one run share the folder above their own."""
    own = tmp_path_factory.getbasetemp()
    shared = own if worker_id == "master" else own.parent
    directory, said = shared / "demo", shared / "demo.json"
    with FileLock(shared / "demo.lock"):
        if not said.exists():
            said.write_text(json.dumps(built(directory, NOW)))
    found = opened(directory, NOW, json.loads(said.read_text()))
    yield found
    found.service.database.close()
