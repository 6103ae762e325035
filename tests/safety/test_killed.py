"""kill -9 of the server in a stream of posts: what was acknowledged is there, and posting again mends all."""

from __future__ import annotations

import random
import threading
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager, suppress
from datetime import UTC, datetime, timedelta
from typing import Any

import httpx
import pytest
import sqlalchemy as sa

from service.app import make_service
from service.application import access, depots, sections, verification
from service.application.context import Service
from service.application.section_content import Content
from service.records.tables import ReadingRow, VisitRow
from service.records.unit_of_work import Actor
from service.rules.words import CircuitKind, SectionState, Traction
from service.settings import Settings
from support.api import TERMS
from support.process import serving
from support.world import visit_id

SETUP = Actor("setup", "R. Ashdown")
POSTERS = 4
VISITS = "/v1/depots/harrow/visits"
VISIT, READING = VisitRow.__table__, ReadingRow.__table__  # type: ignore[attr-defined]


@contextmanager
def opened(database_url: str) -> Iterator[Service]:
    service = make_service(Settings(database_url=database_url, threads=4))
    try:
        yield service
    finally:
        service.database.close()


def prepared(database_url: str) -> str:
    """A depot with a track circuit for each who posts; the text of their key."""
    content = Content(SectionState.IN_USE, CircuitKind.DC, Traction.NONE, ("relay_end",))
    with opened(database_url) as service, service.unit_of_work(SETUP) as tx:
        depots.create(tx, "harrow", TERMS)
        for poster in range(POSTERS):
            sections.create(tx, "harrow", f"K{poster}", content)
        return access.create(tx, access.Wanted("field", "T. Marlow", ("readings",)), b"k" * 32)


def body(number: int) -> dict[str, Any]:
    visited_at = datetime(2024, 1, 1, tzinfo=UTC) + timedelta(minutes=number)
    reading = {
        "quantity": "drop_shunt",
        "test_point": "relay_end",
        "stage": "as_left",
        "comparison": "eq",
        "value": 0.7,
        "unit": "Ohm",
    }
    return {
        "visit": visit_id(number),
        "section": f"K{number % POSTERS}",
        "visited_at": visited_at.isoformat(),
        "readings": [reading, reading | {"test_point": "feed_end"}],
    }


class Stream:
    """Everything that was ever sent, and what was acknowledged."""

    def __init__(self, key: str) -> None:
        self.headers = {"Authorization": f"Bearer {key}"}
        self.sent: list[int] = []
        self.stored: set[int] = set()
        self.changed = threading.Condition()

    def post(self, base_url: str, first: int) -> None:
        """One of those who post: one visit after the other until the server is gone."""
        with httpx.Client(base_url=base_url, headers=self.headers, timeout=60) as client:
            for number in range(first, 10**9, POSTERS):
                with self.changed:
                    self.sent.append(number)
                with suppress(httpx.TransportError):
                    answer = client.post(VISITS, json=body(number))
                    assert answer.status_code == 201, answer.text
                    with self.changed:
                        self.stored.add(number)
                        self.changed.notify_all()
                    continue
                return

    def post_all_again(self, base_url: str) -> None:
        with httpx.Client(base_url=base_url, headers=self.headers, timeout=60) as client:
            bodies = [body(number) for number in sorted(self.sent)]
            batches = [bodies[start : start + 400] for start in range(0, len(bodies), 400)]
            answers = [client.post(f"{VISITS}/batch", json=batch) for batch in batches]
        outcomes = {one["visit"]: one["outcome"] for answer in answers for one in answer.json()}
        assert set(outcomes.values()) <= {"stored", "already_stored"}
        assert {outcomes[visit_id(number)] for number in self.stored} <= {"already_stored"}
        self.stored.update(self.sent)


def killed_in_mid_stream(database_url: str, stream: Stream, after: int) -> None:
    """Serve, post all again, post on; kill once `after` more are acknowledged."""
    with serving(database_url) as (process, base_url):
        stream.post_all_again(base_url)
        enough = len(stream.stored) + after
        begin = max(stream.sent, default=-1) + 1
        begin += -begin % POSTERS
        with ThreadPoolExecutor(POSTERS) as pool:
            posting = [pool.submit(stream.post, base_url, begin + poster) for poster in range(POSTERS)]
            with stream.changed:
                assert stream.changed.wait_for(lambda: len(stream.stored) >= enough, timeout=60)
            process.kill()
            for one in posting:
                one.result()


def kept(service: Service) -> tuple[list[str], int]:
    with service.read() as connection:
        visits = connection.execute(sa.select(VISIT.c.visit).order_by(VISIT.c.visit)).scalars().all()
        readings = connection.execute(sa.select(sa.func.count()).select_from(READING)).scalar_one()
    return list(visits), readings


def survives(database_url: str, rounds: int) -> None:
    stream = Stream(prepared(database_url))
    draw = random.Random(rounds)
    for _ in range(rounds):
        killed_in_mid_stream(database_url, stream, draw.randint(2, 12))
        with opened(database_url) as service:
            visits, readings = kept(service)
            assert {visit_id(number) for number in stream.stored} <= set(visits)
            assert readings == 2 * len(visits)
            with service.read(snapshot=True) as connection:
                assert list(verification.broken_chains(connection)) == []
    with serving(database_url) as (_, base_url):
        stream.post_all_again(base_url)
    with opened(database_url) as service:
        visits, readings = kept(service)
        assert visits == sorted(visit_id(number) for number in stream.sent)
        assert readings == 2 * len(visits)
        with service.read(snapshot=True) as connection:
            assert list(verification.broken_chains(connection)) == []
            assert list(verification.mismatched_visits(connection)) == []


def test_killed_five_times(database_url: str) -> None:
    survives(database_url, 5)


@pytest.mark.slow
def test_killed_thirty_times(database_url: str) -> None:
    survives(database_url, 30)
