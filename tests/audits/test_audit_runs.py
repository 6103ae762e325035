"""An audit is made once for a depot and a date, goes forward, and judges what can be judged."""

from __future__ import annotations

import threading
from concurrent.futures import ThreadPoolExecutor
from datetime import date, datetime, timedelta
from typing import Any

import pytest
import sqlalchemy as sa

from service.application import audit_survey, audits, findings
from service.errors import ConflictError, NotAcceptableError, NotFoundError
from service.records import journal
from service.records.tables import Audit
from service.records.unit_of_work import Actor
from service.rules.words import SectionState
from support.world import ENGINEER, World

MONDAY = date(2026, 11, 2)


def held(world: World) -> list[date]:
    audit = Audit.__table__  # type: ignore[attr-defined]
    with world.service.read() as connection:
        return list(connection.execute(sa.select(audit.c.audit).order_by(audit.c.audit)).scalars())


def test_what_an_audit_says_of_itself(world: World) -> None:
    world.section("A1")
    world.visit("A1")
    head, digest = world.read(journal.head)
    shown = world.audit()
    assert shown["audit"] == "2026-11-02"
    assert (shown["sequence"], shown["digest"]) == (head, digest)
    assert shown["known_at"] == shown["started_at"] == "2026-11-02T09:00:00.000000Z"
    assert shown["started_by"] == ENGINEER.holder
    assert [(one["book"], one["edition"], len(one["digest"])) for one in shown["editions"]] == [
        ("house", "1", 64)
    ]
    assert (shown["sections_judged"], shown["sections_not_judged"]) == (1, 0)
    assert "competent, licensed person" in shown["caution"]


def test_the_same_date_gives_the_stored_audit(world: World) -> None:
    world.section("A1")
    first = world.audit()
    world.clock.move(hours=3)
    world.visit("A1")
    assert world.audit(actor=Actor("other", "J. Abara")) == first
    assert world.audit(MONDAY) == first
    assert held(world) == [MONDAY]


def test_two_at_once_keep_one_and_both_are_answered_with_it(
    world: World, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Both have judged the depot before either keeps what it found."""
    world.section("A1")
    barrier, survey = threading.Barrier(2, timeout=20), audit_survey.survey

    def together(*arguments: Any) -> Any:
        made = survey(*arguments)
        barrier.wait()
        return made

    monkeypatch.setattr(audit_survey, "survey", together)
    actors = [Actor("one", "R. Ashdown"), Actor("two", "J. Abara")]
    with ThreadPoolExecutor(2) as pool:
        answers = list(pool.map(lambda actor: world.audit(actor=actor), actors))
    assert answers[0] == answers[1]
    assert held(world) == [MONDAY]
    lines = [
        line for line in world.read(lambda *at: list(journal.lines(*at))) if line["subject_kind"] == "audit"
    ]
    assert len(lines) == 1


@pytest.mark.parametrize("later_first", [True, False])
def test_two_dates_at_once_never_leave_the_earlier_after_the_later(
    world: World, monkeypatch: pytest.MonkeyPatch, later_first: bool
) -> None:
    """The earlier is judged, then the other is kept (or not) before it can keep what it found."""
    world.section("A1")
    yesterday = MONDAY - timedelta(days=1)
    survey = audit_survey.survey

    def overtaken(*arguments: Any) -> Any:
        made = survey(*arguments)
        monkeypatch.setattr(audit_survey, "survey", survey)
        world.audit(MONDAY if later_first else MONDAY - timedelta(days=2))
        return made

    monkeypatch.setattr(audit_survey, "survey", overtaken)
    if later_first:
        with pytest.raises(ConflictError):
            world.audit(yesterday)
        assert held(world) == [MONDAY]
    else:
        world.audit(yesterday)
        assert held(world) == [MONDAY - timedelta(days=2), yesterday]


def test_no_audit_of_the_future_nor_before_the_last(world: World) -> None:
    with pytest.raises(NotAcceptableError) as refused:
        world.audit(MONDAY + timedelta(days=1))
    assert [fault.pointer for fault in refused.value.faults] == ["/as_of"]
    world.audit(MONDAY - timedelta(days=3))
    with pytest.raises(ConflictError) as passed:
        world.audit(MONDAY - timedelta(days=4))
    assert passed.value.kind == "before-last-audit"
    world.audit(MONDAY - timedelta(days=3))
    assert held(world) == [MONDAY - timedelta(days=3)]


def test_today_is_the_depots(world: World) -> None:
    """23:30 UTC on 28 March 2027 is past midnight in London: summer time began that morning."""
    world.clock.now = datetime.fromisoformat("2027-03-28T23:30:00Z")
    assert world.audit(date(2027, 3, 29))["audit"] == "2027-03-29"
    world.clock.now = datetime.fromisoformat("2026-11-02T23:30:00Z")
    with pytest.raises(NotAcceptableError):
        world.audit(date(2026, 11, 3))


def test_an_audit_of_a_depot_that_is_not(world: World) -> None:
    with pytest.raises(NotFoundError):
        audits.run(world.service, ENGINEER, "nowhere")


def test_what_is_not_judged_is_listed_and_said_so(world: World) -> None:
    world.section("A1")
    world.section("A2", state=SectionState.OUT_OF_USE)
    world.section("A3", state=SectionState.PLANNED)
    world.visit("A1")
    shown = world.audit()
    assert (shown["sections_judged"], shown["sections_not_judged"]) == (1, 2)
    listed = [(one["section"], one["state"], one["compliance"], one["findings"]) for one in world.weekly()]
    assert listed == [("A2", "out_of_use", None, []), ("A3", "planned", None, [])]


def test_a_section_in_order_is_not_listed(world: World) -> None:
    world.section("A1")
    world.visit("A1")
    shown = world.audit()
    assert world.weekly() == []
    assert shown["counts"]["compliance_yes"] == 1
    assert shown["counts"]["sections_listed"] == 0


def test_an_audit_of_an_empty_depot(world: World) -> None:
    assert world.audit()["sections_judged"] == 0
    assert world.weekly() == []


def test_an_audit_of_a_past_day_goes_by_what_held_then(world: World) -> None:
    """Visits after the day do not count; those of the day do, though they came later."""
    world.section("A1")
    world.clock.move(days=2)
    world.visit("A1")
    world.audit(MONDAY)
    assert [one["kind"] for one in world.weekly()[0]["findings"]] == ["not_shown"]
    world.visit("A1", visited_at=world.clock.now - timedelta(days=1))
    world.audit(MONDAY + timedelta(days=1))
    assert world.weekly() == []


def test_visits_posted_while_an_audit_judges(world: World, monkeypatch: pytest.MonkeyPatch) -> None:
    """The audit goes by its snapshot; what a visit found outside meanwhile is not left off the list."""
    world.section("A1")
    world.section("A2")
    world.visit("A1")
    survey = audit_survey.survey

    def interrupted(*arguments: Any) -> Any:
        made = survey(*arguments)
        world.visit("A1", 0.3, "as_found")
        world.visit("A2", 0.8)
        return made

    monkeypatch.setattr(audit_survey, "survey", interrupted)
    head, _ = world.read(journal.head)
    shown = world.audit()
    assert (shown["sequence"], shown["counts"]["compliance_yes"]) == (head, 1)
    listed = {one["section"]: [finding["kind"] for finding in one["findings"]] for one in world.weekly()}
    assert listed == {"A1": ["found_outside"], "A2": ["not_shown"]}
    kept = world.read(findings.page, state=None, section="A1", kind=None, after=None, most=9)
    assert [(row.state, row.opened_on, row.last_seen_on) for row in kept] == [("new", MONDAY, MONDAY)]
    world.week()
    world.audit()
    assert [one["section"] for one in world.weekly()] == ["A1"]
