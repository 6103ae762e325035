"""A database full of rows, on either database: every table has some."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import timedelta

import pytest

from service.application import access, concessions, findings, visits
from service.records.unit_of_work import Actor
from support.world import World, lived_in, visit_id


@pytest.fixture
def full(database_url: str) -> Iterator[World]:
    with lived_in(database_url) as world:
        fill(world)
        yield world


def fill(world: World) -> None:
    """Visits replaced and voided, findings answered, a concession, audits and a key."""
    today = world.clock.now.date()
    world.section("A1")
    world.section("A2")
    first = world.visit("A1", 0.3, "as_found")
    wrong = world.visit("A2", 0.4)
    world.visit("A2", 0.7, replaces=wrong)
    world.write(visits.void, first, "wrong section", actor=Actor("field-2", "J. Abara"))
    asked = concessions.Content(
        section="A1",
        limit="drop_shunt",
        task=None,
        test_point=None,
        allowed_min=0.3,
        allowed_max=None,
        conditions="speed",
        protection="hand signals",
        asked_by="T. Marlow",
        approved_by=None,
        from_on=today,
        until_on=today + timedelta(days=9),
    )
    world.write(concessions.grant, visit_id(99), asked)
    world.audit()
    row = world.read(findings.page, state=None, section=None, kind=None, after=None, most=1)[0]
    said = dict.fromkeys(findings.RESPONSE) | {"owner": "R. Ashdown"}
    world.write(findings.respond, row.finding, said, row.version)
    with world.service.unit_of_work(Actor("setup", "R. Ashdown")) as tx:
        access.create(tx, access.Wanted("k", "T. Marlow", ("read",), "harrow"), b"k" * 32)
