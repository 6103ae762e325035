"""A server killed in mid-stream, again and again: what it acknowledged is there, once, and verifies."""

from __future__ import annotations

import random
import threading
from collections.abc import Iterator
from typing import Any

import httpx
import pytest

from service.app import make_service
from service.application import access, depots, sections, verification
from service.application.context import Service
from service.application.section_content import Content
from service.records.unit_of_work import Actor
from service.rules.words import CircuitKind, SectionState, Traction
from service.settings import Settings
from support.api import TERMS
from support.process import Served, serving

ACTOR = Actor("setup", "R. Ashdown")
SECTIONS = ("TV114", "TV115", "TV116")
STREAMS = 4


@pytest.fixture
def service(database_url: str) -> Iterator[Service]:
    """A depot with a few sections, seen past the server."""
    made = make_service(Settings(database_url=database_url))
    content = Content(
        state=SectionState.IN_USE,
        circuit_kind=CircuitKind.DC,
        traction=Traction.NONE,
        required_test_points=("relay_end",),
    )
    with made.unit_of_work(ACTOR) as tx:
        depots.create(tx, "harrow", TERMS)
    for name in SECTIONS:
        with made.unit_of_work(ACTOR) as tx:
            sections.create(tx, "harrow", name, content)
    yield made
    made.database.close()


def visit(number: int) -> dict[str, Any]:
    reading = {"quantity": "drop_shunt", "test_point": "relay_end", "stage": "as_left", "unit": "Ohm"}
    return {
        "visit": f"0197c0de-0000-7000-8000-{number:012d}",
        "section": SECTIONS[number % len(SECTIONS)],
        "visited_at": f"2026-01-{1 + number % 28:02d}T08:12:00Z",
        "readings": [reading | {"value": 0.5 + number % 7 / 10}],
    }


class Handheld(threading.Thread):
    """Posts visits one after the other until the server is gone; keeps what it has no 201 or 200 for."""

    def __init__(self, served: Served, headers: dict[str, str], numbers: list[int]) -> None:
        super().__init__()
        self.served, self.headers, self.waiting = served, headers, numbers
        self.acknowledged: list[int] = []

    def run(self) -> None:
        with httpx.Client(base_url=self.served.base_url, headers=self.headers, timeout=10) as client:
            while self.waiting:
                try:
                    answer = client.post("/v1/depots/harrow/visits", json=visit(self.waiting[0]))
                except httpx.TransportError:
                    return
                assert answer.status_code in (200, 201), answer.text
                self.acknowledged.append(self.waiting.pop(0))


def stored(service: Service) -> list[int]:
    """The visits that are kept, by the journal and the tables alike."""
    with service.read(snapshot=True) as connection:
        assert list(verification.broken_chains(connection)) == []
        assert list(verification.mismatched_visits(connection)) == []
        rows = connection.exec_driver_sql("SELECT visit FROM visit").scalars().all()
    return sorted(int(found[-12:]) for found in rows)


@pytest.mark.parametrize("rounds", [5, pytest.param(30, marks=pytest.mark.slow)])
def test_nothing_acknowledged_is_lost(service: Service, rounds: int) -> None:
    with service.unit_of_work(ACTOR) as tx:
        key = access.create(tx, access.Wanted("handheld", "T. Marlow", ("readings",)), bytes(32))
    headers, chance, following = {"Authorization": f"Bearer {key}"}, random.Random(7), 0
    acknowledged: set[int] = set()
    unsure: set[int] = set()
    for _ in range(rounds):
        with serving(service.database.url) as served:
            handhelds = []
            for _ in range(STREAMS):
                handhelds.append(Handheld(served, headers, list(range(following, following + 1000))))
                following += 1000
            for handheld in handhelds:
                handheld.start()
            enough = chance.randint(1, 40)
            while sum(len(handheld.acknowledged) for handheld in handhelds) < enough:
                assert any(handheld.is_alive() for handheld in handhelds)
                handhelds[0].join(0.002)
            served.kill()
            for handheld in handhelds:
                handheld.join()
                acknowledged |= set(handheld.acknowledged)
                unsure |= set(handheld.waiting[:1])
        assert acknowledged <= set(stored(service))
    sent = sorted(acknowledged | unsure)
    with serving(service.database.url) as served:
        again = Handheld(served, headers, list(sent))
        again.run()
    assert again.acknowledged == sent
    assert stored(service) == sent
