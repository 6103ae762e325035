"""A served app on either database."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from support.api import Api, served


@pytest.fixture
def api(database_url: str) -> Iterator[Api]:
    with served(database_url) as found:
        yield found
