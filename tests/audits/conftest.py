"""A depot to audit, on either database."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from support.world import World, lived_in


@pytest.fixture
def world(database_url: str) -> Iterator[World]:
    with lived_in(database_url) as made:
        yield made
