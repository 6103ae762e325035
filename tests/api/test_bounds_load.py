"""A hundred clients at once, each with a key of its own: every one is answered."""

from __future__ import annotations

import threading
from concurrent.futures import ThreadPoolExecutor

from service.application import sections
from service.application.section_content import Content
from service.records import journal
from service.rules.words import CircuitKind, SectionState, Traction
from support.api import ACTOR, Api

CLIENTS = 100
CONTENT = Content(
    state=SectionState.IN_USE,
    circuit_kind=CircuitKind.DC,
    traction=Traction.NONE,
    required_test_points=("relay_end",),
)


def visit(number: int) -> dict[str, object]:
    reading = {
        "quantity": "drop_shunt",
        "test_point": "relay_end",
        "stage": "as_left",
        "value": 0.7,
        "unit": "Ohm",
    }
    return {
        "visit": f"0197c0de-0000-7000-8000-{number:012d}",
        "section": "TV114",
        "visited_at": "2026-11-30T08:12:00Z",
        "readings": [reading],
    }


def test_a_hundred_clients_post_at_once_and_all_are_answered(api: Api) -> None:
    api.depot("harrow")
    with api.service.unit_of_work(ACTOR) as tx:
        sections.create(tx, "harrow", "TV114", CONTENT)
    clients = [api.client("readings", "read") for _ in range(CLIENTS)]
    together = threading.Barrier(CLIENTS, timeout=60)

    def post(number: int) -> list[int]:
        together.wait()
        answers = [clients[number].post("/v1/depots/harrow/visits", json=visit(number))]
        answers.append(clients[number].get("/v1/depots/harrow/sections/TV114/status"))
        return [answer.status_code for answer in answers]

    with ThreadPoolExecutor(CLIENTS) as pool:
        assert list(pool.map(post, range(CLIENTS))) == [[201, 200]] * CLIENTS
    with api.service.read(snapshot=True) as connection:
        assert journal.verify(connection, "harrow") is None
        lines = list(journal.lines(connection, "harrow", subject_kind="visit"))
    assert len({line["subject_name"] for line in lines}) == len(lines) == CLIENTS
