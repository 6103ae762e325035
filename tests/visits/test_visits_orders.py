"""Whatever the order and repetition of visits, voids and replacements, the status is the same.

Judged against the visits as they were sent, put together here without a database, and against a depot
where everything came once and in order.
"""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import UTC, date, datetime, timedelta
from itertools import count
from pathlib import Path
from typing import Any

import pytest
import sqlalchemy as sa
from hypothesis import HealthCheck, Phase, event, given, settings
from hypothesis import strategies as st
from visits.field import (
    POINTS,
    Field,
    days_around,
    drops,
    furnish,
    issue_book,
    opened,
    reading,
    visit,
    visit_id,
    wetness,
)

from service.application import facts, status, visits
from service.application.fact_rows import reading_of
from service.records.unit_of_work import Actor
from service.rules import facts as rules
from service.rules.quantities import to_base
from service.rules.status import Status, judge
from service.rules.words import Ballast, Rail, TaskDone, Work

NOW = datetime(2026, 5, 25, 23, 58, tzinfo=UTC)
AHEAD = NOW + timedelta(minutes=3)
"""Of a handheld ahead of the depot's midnight."""

DAYS = [NOW - timedelta(days=days, hours=12) for days in (1, 2, 3, 30)]
LATER = [NOW, AHEAD, *(datetime(2026, m, d, 12, tzinfo=UTC) for m, d in ((7, 25), (8, 24), (12, 1)))]
"""Tasks fall due in three months of the visits; the instruments are due on 1 December."""


@dataclass(frozen=True)
class Story:
    """Visits by number, those to be voided, and the order in which all of it comes, in batches."""

    bodies: tuple[dict[str, Any], ...]
    voided: frozenset[int]
    arrivals: tuple[tuple[int, ...], ...]
    voids_after: tuple[int, ...]
    """For each of `voided`, in order: after how many batches at the earliest."""


def _ohms(as_found: bool) -> st.SearchStrategy[list[dict[str, Any]]]:
    """No failure as found: taking that back would need a second holder, and be refused."""
    stage = "as_found" if as_found else "as_left"
    return st.builds(
        lambda value, points, step: drops(value, *points, stage=stage, **step) if points else [],
        st.sampled_from([0.5, 0.6, 0.8] if as_found else [0.3, 0.5, 0.8]),
        st.sampled_from([(), POINTS, POINTS, ("relay_end",), ("feed_end", "middle")]),
        st.sampled_from([{}, {}, {"instrument": None}, {"comparison": "ge"}]),
    )


def _volts(as_found: bool) -> st.SearchStrategy[list[dict[str, Any]]]:
    stage = "as_found" if as_found else "as_left"
    return st.builds(
        lambda value, meter: [] if value is None else [reading("relay_voltage", value, stage=stage) | meter],
        st.sampled_from([None, 1.5, 2.0] if as_found else [None, 2.1, 4.5]),
        st.sampled_from([{}, {}, {"instrument": "VM-OLD"}, {"unit": "mV", "value": 2100}]),
    )


@st.composite
def _bodies(draw: st.DrawFn) -> tuple[dict[str, Any], ...]:
    made = []
    for number in range(draw(st.integers(1, 6))):
        readings = [
            one for as_found in (True, False) for kind in (_ohms, _volts) for one in draw(kind(as_found))
        ]
        # one that comes later may be replaced too, and one that never comes; never in a circle
        replaces = draw(st.sampled_from([None, None, *range(number), 99]))
        body = visit(
            number,
            draw(st.sampled_from([*DAYS, *DAYS, AHEAD])),
            *readings,
            **wetness(draw(st.sampled_from(["dry", "dry", "wet", "damp", None]))),
            tasks=draw(st.sampled_from([[], [{"task": "shunt_test", "done": "done"}]])),
            work_done=draw(st.sampled_from([[], [], ["tamped"], ["adjusted"]])),
            replaces=None if replaces is None else visit_id(replaces),
        )
        body["conditions"]["rail"] = draw(st.sampled_from([None, None, "clean", "rusty"]))
        made.append(body)
    return tuple(made)


@st.composite
def stories(draw: st.DrawFn) -> Story:
    bodies = draw(_bodies())
    numbers = list(range(len(bodies)))
    order = draw(st.permutations([*numbers, *draw(st.lists(st.sampled_from(numbers), max_size=3))]))
    arrivals: list[list[int]] = []
    for number in order:
        if arrivals and draw(st.booleans()):
            arrivals[-1].append(number)
        else:
            arrivals.append([number])
    voided = draw(st.frozensets(st.sampled_from(numbers), max_size=3))
    after = tuple(draw(st.integers(0, len(arrivals))) for _ in voided)
    return Story(bodies, voided, tuple(map(tuple, arrivals)), after)


def live(field: Field, story: Story) -> Iterator[None]:
    """Post and void as the story goes; yields after each step."""
    holder = count()
    stored: set[int] = set()
    waiting = list(zip(sorted(story.voided), story.voids_after, strict=True))
    for step, batch in enumerate([*story.arrivals, ()], start=1):
        if batch:
            actor = Actor("handheld", f"holder-{next(holder)}")
            outcomes = field.post(*(story.bodies[number] for number in batch), actor=actor)
            assert [one.outcome for one in outcomes if one.visit is not None] == [
                "already_stored" if number in (*stored, *batch[:place]) else "stored"
                for place, number in enumerate(batch)
            ]
            stored.update(batch)
            tick(field)
            yield
        for number, after in list(waiting):
            if number in stored and step >= after:
                field.void(number, Actor("desk", "S. Quill"))
                waiting.remove((number, after))
                tick(field)
                yield
    assert not waiting


def tick(field: Field) -> None:
    field.clock.move(seconds=1)


def in_order(story: Story) -> Story:
    """The same, each visit once and by itself, oldest first; voids at the end."""
    numbers = sorted(
        range(len(story.bodies)), key=lambda n: (story.bodies[n]["visited_at"], story.bodies[n]["visit"])
    )
    return replace(
        story,
        arrivals=tuple((number,) for number in numbers),
        voids_after=(len(numbers),) * len(story.voided),
    )


def from_scratch(field: Field, story: Story, as_of: date) -> Status:
    """The status by the visits as sent; record, instruments and editions as the depot has them.

    A visit counts unless it is voided, or one that is not voided replaces it (contract, "Visits").
    """
    with field.service.read(snapshot=True) as connection:
        (gathered,) = facts.gather(connection, facts.Moment(field.depot, "UTC", as_of), ["TV114"])
    standing = [body for number, body in enumerate(story.bodies) if number not in story.voided]
    replaced = {body["replaces"] for body in standing}
    counting = [body for body in standing if body["visit"] not in replaced]
    past = [body for body in counting if at(body).date() <= as_of]
    ahead = [at(body).date() for body in counting if at(body).date() > as_of]
    known = rules.SectionFacts(
        record=gathered.facts.record,
        visits=tuple(_visit(body) for body in past),
        readings=tuple(_reading(body, one) for body in past for one in body["readings"]),
        instruments=gathered.facts.instruments,
        concessions=(),
        next_version_on=min(ahead, default=None),
    )
    return judge(known, gathered.book, gathered.editions, as_of)


def at(body: dict[str, Any]) -> datetime:
    return datetime.fromisoformat(body["visited_at"])


def _visit(body: dict[str, Any]) -> rules.Visit:
    ballast, rail = body["conditions"]["ballast"], body["conditions"]["rail"]
    return rules.Visit(
        visit=body["visit"],
        visited_at=at(body),
        visited_on=at(body).date(),
        ballast=None if ballast is None else Ballast(ballast),
        rail=None if rail is None else Rail(rail),
        tasks=tuple(rules.TaskClaim(one["task"], TaskDone(one["done"])) for one in body["tasks"]),
        work=frozenset(map(Work, body["work_done"])),
    )


def _reading(body: dict[str, Any], sent: dict[str, Any]) -> rules.Reading:
    return reading_of(
        body["visit"],
        sent["quantity"],
        sent["test_point"],
        sent["stage"],
        to_base(sent["value"], sent["unit"]),
        sent.get("comparison", "eq"),
        sent["instrument"],
        None,
        None,
        None,
    )


@pytest.fixture(scope="module")
def depots(sqlite_template: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    """Makes one furnished depot after another, on one database."""
    path = tmp_path_factory.mktemp("orders") / "shuntbook.db"
    shutil.copy(sqlite_template, path)
    service, clock = opened(f"sqlite:///{path}")
    issue_book(service, clock)
    sa.event.listen(service.database.engine, "connect", _hurried)
    service.database.engine.dispose()  # connections made from here on hurry
    beginning, names = clock.now, count()

    def make() -> Field:
        clock.now = beginning
        made = furnish(Field(service, clock, f"depot-{next(names)}"))
        clock.now = NOW
        return made

    yield make
    service.database.close()


def _hurried(connection: Any, _record: Any) -> None:
    """Nothing here rests on what survives a power cut."""
    connection.execute("PRAGMA synchronous=OFF")


def by_all_readings(field: Field, as_of: date) -> Status:
    """The status by all readings, without `latest`."""
    moment = facts.Moment(field.depot, "UTC", as_of)
    with field.service.read(snapshot=True) as connection:
        ((_, found),) = status.judge_sections(connection, moment, ["TV114"])
    return found


def check_kept(field: Field, found: Status) -> None:
    """The row of `status` says what the status says."""
    kept = field.kept()
    assert kept == {name: getattr(found, name) for name in kept}


def check(depots: Any, story: Story) -> None:
    told, plain = depots(), depots()
    known: list[tuple[datetime, Status]] = []
    for _ in live(told, story):
        known.append((told.clock.now - timedelta(seconds=1), told.judged().status))
        assert by_all_readings(told, NOW.date()) == known[-1][1]
        check_kept(told, known[-1][1])
    told.clock.now = NOW
    for _ in live(plain, in_order(story)):
        pass
    assert told.latest() == plain.latest()
    assert told.kept() == plain.kept()
    rows = told.latest()
    told.write(visits.rebuild_latest)
    assert told.latest() == rows
    told.clock.move(minutes=1)
    for instant, then in known:
        assert told.judged(NOW.date(), instant).status == then
    for day in days_around(*DAYS, NOW):
        if day <= NOW.date():
            expected = from_scratch(told, story, day)
            assert told.judged(day).status == plain.judged(day).status == expected
    for day in days_around(*LATER):
        if day > NOW.date():
            told.clock.now = datetime(day.year, day.month, day.day, tzinfo=UTC)
            expected = from_scratch(told, story, day)
            assert told.judged().status == expected
            assert by_all_readings(told, day) == expected
            status.roll_due(told.service, told.depot)
            check_kept(told, replace(expected, as_of=told.kept()["as_of"]))
    event(f"compliance {expected.compliance}")


ANY = settings(
    deadline=None, suppress_health_check=[HealthCheck.too_slow], phases=set(Phase) - {Phase.explain}
)


@settings(ANY, max_examples=20)
@given(story=stories())
def test_any_order_gives_one_status(depots: Any, story: Story) -> None:
    check(depots, story)


@pytest.mark.slow
@settings(ANY, max_examples=200)
@given(story=stories())
def test_any_order_gives_one_status_in_many_stories(depots: Any, story: Story) -> None:
    check(depots, story)
