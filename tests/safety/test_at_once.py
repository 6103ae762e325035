"""What happens at once, on connections of their own, held together by barriers and events, never by sleep."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from datetime import date, timedelta
from functools import partial
from typing import Any

import pytest
import sqlalchemy as sa

from service.application import instruments, sections, status, verification, visits
from service.errors import ConflictError, ShuntbookError, StaleError, UnavailableError
from service.records import engine, journal
from service.records.tables import Status as StatusRow
from service.records.tables import VisitRow
from service.records.unit_of_work import Actor
from service.rules.words import CalibrationResult
from support.world import BOX, World, lived_in

SUMMARY = ("as_of", "compliance", "overdue", "worst_hazard", "next_due_on", "holds_until")
STATUS, VISIT = StatusRow.__table__, VisitRow.__table__  # type: ignore[attr-defined]


@pytest.fixture
def world(database_url: str) -> Iterator[World]:
    with lived_in(database_url, threads=16) as made:
        for number in range(4):
            made.section(f"A{number}")
        yield made


def at_once(*actions: Callable[[], Any]) -> list[Any]:
    """What each gave or raised; all begin together."""
    barrier = threading.Barrier(len(actions), timeout=30)

    def run(action: Callable[[], Any]) -> Any:
        barrier.wait()
        try:
            return action()
        except ShuntbookError as error:
            return error

    with ThreadPoolExecutor(len(actions)) as pool:
        return list(pool.map(run, actions))


def stored(world: World) -> list[str]:
    with world.service.read() as connection:
        return list(connection.execute(sa.select(VISIT.c.visit).order_by(VISIT.c.visit)).scalars())


def sound(world: World) -> None:
    """The journal holds, and every kept status is what a judgement from scratch gives."""
    with world.service.read(snapshot=True) as connection:
        assert list(verification.broken_chains(connection)) == []
        assert list(verification.mismatched_visits(connection)) == []
        kept = {row.section: row for row in connection.execute(sa.select(STATUS))}
        moment = status.present(status.depot_row(connection, world.depot), world.clock.now)
        judged = list(status.judge_sections(connection, moment, None))
    assert len(judged) == len(kept)
    for _, found in judged:
        row = kept[found.section]
        assert {name: getattr(row, name) for name in SUMMARY} == {
            name: getattr(found, name) for name in SUMMARY
        }


def test_two_devices_on_one_section(world: World) -> None:
    drafts = [world.draft("A0", ohm) for ohm in (0.4, 0.8, 0.7)]
    outcomes = at_once(*(lambda draft=draft: world.post(draft)[0] for draft in drafts))
    assert [one.outcome for one in outcomes] == ["stored"] * 3
    assert len({one.sequence for one in outcomes}) == 3
    sound(world)


def test_the_same_visit_from_two_connections(world: World) -> None:
    draft = world.draft("A0")
    outcomes = at_once(*[lambda: world.post(draft)[0]] * 3)
    assert sorted(one.outcome for one in outcomes) == ["already_stored", "already_stored", "stored"]
    assert stored(world) == [draft.visit]
    sound(world)


def test_one_id_for_two_sections(world: World) -> None:
    """One is stored. The other is told that the id is taken, if need be when it posts again."""
    drafts = [world.draft("A0", visit=world.draft("A0").visit)]
    drafts.append(replace(drafts[0], section="A1"))
    outcomes = at_once(*(lambda draft=draft: world.post(draft)[0] for draft in drafts))
    refused = [
        draft
        for draft, one in zip(drafts, outcomes, strict=True)
        if isinstance(one, ShuntbookError) or one.outcome != "stored"
    ]
    assert len(refused) == 1
    for one in outcomes:
        assert not isinstance(one, ShuntbookError) or isinstance(one, UnavailableError)
    (again,) = world.post(refused[0])
    assert again.outcome == "refused"
    assert isinstance(again.problem, ConflictError)
    assert again.problem.kind == "id-reused"
    assert stored(world) == [drafts[0].visit]
    sound(world)


def test_batches_that_cross(world: World) -> None:
    """The same sections in opposite orders: locks are taken in one order, so nobody waits for a circle."""
    drafts = [[world.draft(f"A{number}") for number in order] for order in ((0, 1, 2, 3), (3, 2, 1, 0))]
    outcomes = at_once(*(lambda batch=batch: world.post(*batch) for batch in drafts))
    assert [one.outcome for batch in outcomes for one in batch] == ["stored"] * 8
    sound(world)


def test_two_editors_of_one_section(world: World) -> None:
    recorded = world.read(sections.get, "A0")
    contents = [replace(recorded.content, title=title) for title in ("First", "Second")]
    outcomes = at_once(
        *(
            lambda content=content: world.write(sections.edit, "A0", recorded.version, content)
            for content in contents
        )
    )
    assert [isinstance(one, StaleError) for one in outcomes].count(True) == 1
    (kept,) = [one for one in outcomes if not isinstance(one, ShuntbookError)]
    assert world.read(sections.get, "A0") == kept
    sound(world)


def test_a_void_against_the_visit_that_replaces_it(world: World) -> None:
    first = world.visit("A0", 0.8)
    second = world.draft("A0", 0.7, replaces=first)
    outcomes = at_once(
        lambda: world.write(visits.void, first, "wrong section"), lambda: world.post(second)[0].outcome
    )
    assert not any(isinstance(one, ShuntbookError) for one in outcomes)
    sound(world)


def visited(world: World, section: str) -> None:
    for ohm, stage in ((0.3, "as_found"), (0.8, "as_left")):
        world.visit(section, ohm, stage)


def calibrated(world: World, number: int) -> None:
    calibration = replace(
        BOX.calibrations[0],
        calibrated_on=date(2026, 10, 1 + number),
        due_on=date(2027, 10, 1),
        result=CalibrationResult.OUT_OF_TOLERANCE if number % 2 else CalibrationResult.PASS,
    )
    stored = world.read(instruments.get, "SB")
    content = replace(stored.content, calibrations=(*stored.content.calibrations, calibration))
    world.write(instruments.put, "SB", stored.version, content)


def retitled(world: World, title: str) -> None:
    recorded = world.read(sections.get, "A3")
    world.write(sections.edit, "A3", recorded.version, replace(recorded.content, title=title))


def looked_at(world: World) -> None:
    with world.service.read(snapshot=True) as connection:
        assert list(verification.broken_chains(connection)) == []
    status.roll_due(world.service, world.depot)


def test_everything_at_once(world: World) -> None:
    """Visits, calibrations, audits, edits and readers for a while: no circle of locks, and all is sound."""

    rounds = [
        *([partial(visited, world, f"A{number}")] * 5 for number in range(4)),
        [partial(calibrated, world, number) for number in range(4)],
        [partial(retitled, world, f"{number}") for number in range(4)],
        [partial(world.audit, date(2026, 10, 29) + timedelta(days=number)) for number in range(5)],
        [partial(looked_at, world)] * 5,
    ]
    outcomes = at_once(*(lambda actions=actions: [action() for action in actions] for actions in rounds))
    assert [one for one in outcomes if isinstance(one, Exception)] == []
    assert len(stored(world)) == 40
    sound(world)


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_writers_on_sqlite_queue_and_wait_no_longer_than_the_bound(
    world: World, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(engine, "WAIT_S", 0.2)
    inside, leave = threading.Event(), threading.Event()

    def hold() -> None:
        with world.service.unit_of_work(Actor("slow", "slow")):
            inside.set()
            assert leave.wait(30)

    with ThreadPoolExecutor(2) as pool:
        holding = pool.submit(hold)
        assert inside.wait(30)
        with pytest.raises(UnavailableError, match="at once"):
            world.visit("A0")
        assert world.read(journal.head)[0] > 0  # who reads does not wait
        monkeypatch.setattr(engine, "WAIT_S", 30)
        waiting = pool.submit(world.visit, "A0")
        leave.set()
        holding.result()
        late = waiting.result()
    assert stored(world) == [late]


@pytest.mark.postgres
@pytest.mark.parametrize("database_url", [pytest.param("postgres")], indirect=True)
def test_writers_of_one_depot_do_not_wait_for_each_other_before_the_journal(world: World) -> None:
    """Shared on the depot, each its own section: both are inside before either appends."""
    barrier = threading.Barrier(2, timeout=30)

    def write(section: str) -> int:
        with world.service.unit_of_work(Actor("k", "h")) as tx:
            tx.lock_depot(world.depot)
            tx.lock_sections(world.depot, [section])
            barrier.wait()
            return tx.append(world.depot, [journal.Entry("tested", "test", section, (section,), {})])

    first, second = sorted(at_once(lambda: write("A0"), lambda: write("A1")))
    assert second == first + 1


@pytest.mark.postgres
@pytest.mark.parametrize("database_url", [pytest.param("postgres")], indirect=True)
def test_who_moves_many_waits_for_who_touches_one(world: World) -> None:
    inside, trying = threading.Event(), threading.Event()
    order: list[str] = []

    def shared() -> None:
        with world.service.unit_of_work(Actor("k", "h")) as tx:
            tx.lock_depot(world.depot)
            inside.set()
            assert trying.wait(30)
            order.append("shared")

    def exclusive() -> None:
        assert inside.wait(30)
        with world.service.unit_of_work(Actor("k", "h")) as tx:
            trying.set()
            tx.lock_depot(world.depot, exclusive=True)
            order.append("exclusive")

    assert at_once(shared, exclusive) == [None, None]
    assert order == ["shared", "exclusive"]
