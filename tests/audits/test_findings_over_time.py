"""Findings from audit to audit: new, open for weeks, cleared, back again; answered for, and in what order."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, datetime, timedelta
from typing import Any

import pytest

from service.application import findings, sections, visits
from service.errors import NotAcceptableError, NotFoundError, StaleError
from service.records import journal
from service.records.unit_of_work import Actor
from service.rules.words import SectionState
from support.world import ENGINEER, World

MONDAY = date(2026, 11, 2)
OTHER = Actor("field-2", "J. Abara")
FULL = {
    "reported_at": datetime.fromisoformat("2026-11-02T08:00:00Z"),
    "report_reference": "WSF-1",
    "reported_to": "control",
    "protection": "line blocked",
    "cause": "feed turned up",
    "restored_by": "T. Marlow",
}


def kept(world: World, **wanted: Any) -> list[dict[str, Any]]:
    asked = {"state": None, "section": None, "kind": None, "after": None, "most": 1000} | wanted
    rows = world.read(findings.page, **asked)
    return [findings.wire(row, world.clock.now.date()) for row in rows]


def only(world: World, **wanted: Any) -> dict[str, Any]:
    (found,) = kept(world, **wanted)
    return found


def respond(world: World, finding: dict[str, Any], actor: Actor = ENGINEER, **said: Any) -> dict[str, Any]:
    response = dict.fromkeys(findings.RESPONSE) | said
    day, row = world.write(findings.respond, finding["finding"], response, finding["version"], actor=actor)
    return findings.wire(row, day)


def test_from_new_to_cleared_and_back(world: World) -> None:
    world.section("A1")
    world.visit("A1", 0.4)
    world.audit()
    first = only(world)
    assert (first["kind"], first["state"], first["weeks_open"]) == ("outside", "new", 0)
    assert (first["opened_on"], first["last_seen_on"], first["cleared_on"]) == ("2026-11-02",) * 2 + (None,)

    world.week()
    assert world.audit()["counts"]["findings_opened"] == 0
    second = only(world)
    assert (second["finding"], second["state"], second["weeks_open"]) == (first["finding"], "open", 1)
    assert (second["opened_on"], second["last_seen_on"]) == ("2026-11-02", "2026-11-09")

    world.visit("A1", 0.8)
    assert only(world)["state"] == "open"  # until an audit has seen it
    world.week()
    assert world.audit()["counts"]["findings_cleared"] == 1
    gone = only(world)
    assert (gone["state"], gone["cleared_on"], gone["weeks_open"]) == ("cleared", "2026-11-16", 2)
    assert gone["last_seen_on"] == "2026-11-09"
    assert world.weekly() == []

    world.visit("A1", 0.3)
    world.week()
    world.audit()
    before, back = kept(world)
    assert before == gone
    assert (back["state"], back["reopens"], back["opened_on"]) == ("new", first["finding"], "2026-11-23")
    assert back["finding"] != first["finding"]


def test_one_that_returns_twice_names_the_last_before_it(world: World) -> None:
    world.section("A1")
    for _ in range(3):
        world.visit("A1", 0.4)
        world.audit()
        world.week()
        world.visit("A1", 0.8)
        world.audit()
        world.week()
    first, second, third = kept(world)
    assert (first["reopens"], second["reopens"], third["reopens"]) == (
        None,
        first["finding"],
        second["finding"],
    )


def test_a_finding_is_the_same_whatever_its_figures(world: World) -> None:
    """Its version goes up when it says something new, not because another week has passed."""
    world.section("A1")
    world.visit("A1", 0.4)
    world.audit()
    versions = [only(world)["version"]]
    for reading in (0.2, None, None):
        world.week()
        if reading is not None:
            world.visit("A1", reading)
        world.audit()
        versions.append(only(world)["version"])
    assert versions == [1, 2, 2, 2]
    found = only(world)
    assert (found["verdict"]["measured"], found["last_seen_on"]) == (0.2, "2026-11-23")


def test_a_response_survives_audits(world: World) -> None:
    world.section("A1")
    world.visit("A1", 0.4)
    world.audit()
    said = respond(world, only(world), owner="R. Ashdown", action="ballast", planned_on=date(2026, 12, 1))
    assert (said["state"], said["response"]["planned_on"]) == ("new", "2026-12-01")
    assert said["response"]["updated_by"] == ENGINEER.holder
    world.week()
    world.audit()
    assert only(world)["response"] == said["response"]
    assert world.weekly()[0]["findings"][0]["response"] == said["response"]
    world.visit("A1", 0.8)
    world.week()
    world.audit()
    assert (only(world)["state"], only(world)["response"]) == ("cleared", said["response"])


def test_two_who_answer_for_the_same_finding(world: World) -> None:
    world.section("A1")
    world.audit()
    read = only(world)
    respond(world, read, owner="one")
    with pytest.raises(StaleError):
        respond(world, read, owner="two")
    assert only(world)["response"]["owner"] == "one"
    with pytest.raises(NotFoundError):
        respond(world, read | {"finding": "0197c0de-0000-7000-8000-00000000ffff"})


def test_an_audit_during_an_answer_does_not_make_it_stale(world: World) -> None:
    """Nothing that the answer rests on was changed by it."""
    world.section("A1")
    world.audit()
    world.week()
    world.audit()
    read = only(world)
    world.week()
    world.audit()
    assert respond(world, read, owner="one")["response"]["owner"] == "one"


class TestFoundOutside:
    @pytest.fixture
    def failed(self, world: World) -> dict[str, Any]:
        """As found outside, put right in the same visit."""
        world.section("A1")
        good = world.draft("A1", 0.8).readings
        bad = world.draft("A1", 0.3, "as_found").readings
        world.visit("A1", readings=bad + good, work_done=("adjusted",))
        return only(world)

    def test_the_visit_raises_it_and_the_next_list_calls_it_new(
        self, world: World, failed: dict[str, Any]
    ) -> None:
        assert (failed["kind"], failed["hazard"], failed["state"]) == ("found_outside", "wrong_side", "new")
        assert failed["verdict"]["measured"] == 0.3
        world.clock.move(days=1)
        world.audit()
        assert (only(world)["state"], only(world)["opened_on"]) == ("new", "2026-11-02")
        world.week()
        world.audit()
        assert (only(world)["state"], only(world)["weeks_open"]) == ("open", 1)

    def test_audits_never_clear_it(self, world: World, failed: dict[str, Any]) -> None:
        for _ in range(3):
            world.audit()
            assert world.weekly()[0]["section"] == "A1"
            assert world.weekly()[0]["compliance"] == "yes"
            world.week()
        assert only(world)["verdict"] == failed["verdict"]

    def test_nor_does_recovering_the_section(self, world: World, failed: dict[str, Any]) -> None:
        recorded = world.read(sections.get, "A1")
        world.write(
            sections.edit, "A1", recorded.version, replace(recorded.content, state=SectionState.RECOVERED)
        )
        world.week()
        world.audit()
        assert [one["section"] for one in world.weekly()] == ["A1"]

    def test_nor_does_a_void(self, world: World, failed: dict[str, Any]) -> None:
        world.write(visits.void, failed["visit"], "wrong section", actor=OTHER)
        world.audit()
        assert only(world, kind="found_outside")["state"] == "new"

    @pytest.mark.parametrize("missing", findings.CLEARING)
    def test_an_answer_that_lacks_anything_does_not_clear_it(
        self, world: World, failed: dict[str, Any], missing: str
    ) -> None:
        answered = respond(world, failed, **(FULL | {missing: None}))
        assert (answered["state"], answered["cleared_on"]) == ("new", None)

    def test_a_full_answer_clears_it(self, world: World, failed: dict[str, Any]) -> None:
        world.clock.move(days=1)
        answered = respond(world, failed, **FULL)
        assert (answered["state"], answered["cleared_on"]) == ("cleared", "2026-11-03")
        world.audit()
        assert world.weekly() == []

    def test_what_cleared_it_cannot_be_taken_back(self, world: World, failed: dict[str, Any]) -> None:
        answered = respond(world, failed, **FULL)
        with pytest.raises(NotAcceptableError) as refused:
            respond(world, answered, **(FULL | {"cause": None}))
        assert [fault.pointer for fault in refused.value.faults] == ["/cause"]
        assert respond(world, answered, **(FULL | {"cause": "bond off"}))["response"]["cause"] == "bond off"

    def test_no_report_from_the_future(self, world: World, failed: dict[str, Any]) -> None:
        with pytest.raises(NotAcceptableError) as refused:
            respond(world, failed, reported_at=world.clock.now + timedelta(seconds=1))
        assert [fault.pointer for fault in refused.value.faults] == ["/reported_at"]

    def test_a_second_failure_before_the_answer_is_the_same_finding(
        self, world: World, failed: dict[str, Any]
    ) -> None:
        world.clock.move(days=1)
        world.visit("A1", 0.2, "as_found")
        assert only(world) == failed

    def test_one_after_the_answer_is_new_and_names_it(self, world: World, failed: dict[str, Any]) -> None:
        respond(world, failed, **FULL)
        world.clock.move(days=1)
        world.visit("A1", 0.2, "as_found")
        _, again = kept(world, kind="found_outside")
        assert (again["state"], again["reopens"], again["verdict"]["measured"]) == (
            "new",
            failed["finding"],
            0.2,
        )

    def test_an_audit_of_the_day_before_lists_it_all_the_same(self, world: World) -> None:
        """Whoever reads the list reads it today; A2 has no record yet on that day."""
        world.section("A1")
        world.clock.move(days=1)
        world.section("A2")
        world.visit("A1", 0.3, "as_found")
        world.visit("A2", 0.3, "as_found")
        world.audit(MONDAY)
        assert [(one["section"], one["state"]) for one in world.weekly()] == [
            ("A1", "in_use"),
            ("A2", "in_use"),
        ]
        for found in kept(world, kind="found_outside"):
            assert (found["opened_on"], found["last_seen_on"]) == ("2026-11-03", "2026-11-03")
            assert (found["state"], found["weeks_open"]) == ("new", 0)


def test_the_gravest_first_and_what_was_found_outside_unreported_at_the_top(world: World) -> None:
    world.section("D-not-tested")
    for name in ("C-reported", "A-left-outside", "B-found-outside"):
        world.section(name)
    world.section("E-out", state=SectionState.OUT_OF_USE)
    for name in ("C-reported", "B-found-outside"):
        good, bad = world.draft(name, 0.8).readings, world.draft(name, 0.3, "as_found").readings
        world.visit(name, readings=bad + good, work_done=("adjusted",))
    world.visit("A-left-outside", 0.3)
    respond(world, only(world, section="C-reported"), **(FULL | {"cause": None}))
    world.audit()
    assert [one["section"] for one in world.weekly()] == [
        "B-found-outside",
        "A-left-outside",
        "C-reported",
        "D-not-tested",
        "E-out",
    ]


def test_a_list_stays_as_it_was_printed(world: World) -> None:
    world.section("A1")
    world.visit("A1", 0.4)
    world.audit()
    printed = world.weekly(MONDAY)
    respond(world, only(world), owner="R. Ashdown")
    world.visit("A1", 0.8)
    world.week()
    world.audit()
    assert world.weekly(MONDAY) == printed
    assert world.weekly() == []


def test_the_journal_has_a_line_for_each_change_of_a_finding(world: World) -> None:
    """New, open (once), its figures, cleared; and the audit names those that only stood."""
    world.section("A1")
    world.visit("A1", 0.4)
    for reading in (None, None, None, 0.3, 0.8):
        if reading is not None:
            world.visit("A1", reading)
        world.audit()
        world.week()
    (finding,) = kept(world)
    lines = [
        line for line in world.read(lambda *at: list(journal.lines(*at))) if line["subject_kind"] == "finding"
    ]
    assert [line["action"] for line in lines] == [
        "finding_opened",
        "finding_seen",
        "finding_seen",
        "finding_cleared",
    ]
    assert {(line["subject_name"], line["section"]) for line in lines} == {(finding["finding"], "A1")}
