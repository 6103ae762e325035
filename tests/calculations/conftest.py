"""A served app with one depot, kept for all tests of a module: calculations write nothing."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest

from support.api import served
from support.calculations import Bench


@pytest.fixture(scope="module")
def bench(sqlite_template: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Bench]:
    path = tmp_path_factory.mktemp("calculations") / "shuntbook.db"
    shutil.copy(sqlite_template, path)
    with served(f"sqlite:///{path}") as api:
        api.depot("ashby")
        api.depot("birchfield")
        yield Bench(api, api.client("read"))
