"""A depot with a journal worth reading, on either database."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from service.application import visits
from service.records.unit_of_work import Actor
from support.world import World, lived_in


@pytest.fixture
def world(database_url: str) -> Iterator[World]:
    with lived_in(database_url) as made:
        yield made


@pytest.fixture
def lived(world: World) -> World:
    """Two track circuits, three weeks: failures, a correction, a void, findings that come and go."""
    world.section("A1", title="Up Main, 100 Ω plate")
    world.section("A2")
    first = world.visit("A1", 0.3, "as_found", remarks='feed "found" up → put back')
    wrong = world.visit("A2", 0.4)
    world.visit("A2", 0.7, replaces=wrong, work_done=("tamped", "adjusted"))
    world.audit()
    world.week()
    world.visit("A1", 0.8, work_done=("adjusted",))
    world.write(visits.void, first, "wrong section", actor=Actor("field-2", "J. Abara"))
    world.audit()
    world.week()
    world.audit()
    return world
