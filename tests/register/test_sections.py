"""Sections of the register and their versions, on both databases."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta
from threading import Barrier, Thread
from typing import Any

import pytest

from service.api.schemas.sections import section_answer
from service.application import equipment, facts, sections, status
from service.application.section_content import Boundary, Configuration, json_value
from service.errors import ConflictError, NotAcceptableError, NotFoundError, ShuntbookError, StaleError
from service.records import journal
from service.rules.words import Bonding, CircuitKind, SectionState, Separation, Traction
from support.register import ENGINEER, OTHER, Depot, kept_status, lines, plain


def codes(error: ShuntbookError) -> set[tuple[str, str | None]]:
    return {(fault.code, fault.pointer) for fault in error.faults}


def joint(boundary: str, neighbour: str | None, polarity: str | None) -> Boundary:
    return Boundary(boundary, neighbour, Separation.JOINT, polarity)


def test_a_section_is_read_as_it_was_recorded(depot: Depot) -> None:
    made = depot.section(
        "TV114",
        title="TV 114",
        length_m=812.5,
        from_km=12.0,
        to_km=12.8125,
        configuration=Configuration(insulated_joints=4, bonding=Bonding.SERIES, interrupter_fitted=False),
        adjacent=(joint("J1", None, "+"),),
        equipment=equipment.DcEquipment(circuit_kind="dc", relay=equipment.Relay(serial="R-9")),
    )
    found = depot.read(sections.get, "TV114")
    assert found == made
    assert (found.version, found.content.valid_from_on) == (1, depot.today)
    assert found.content.equipment is not None
    assert found.content.equipment.relay.serial == "R-9"


def test_recording_is_journalled_as_the_wire_shows_it_and_judged(depot: Depot) -> None:
    made = depot.section("TV114")
    line = lines(depot)[-1]
    assert (line["action"], line["subject_kind"], line["subject_name"]) == (
        "section_created",
        "section",
        "TV114",
    )
    shown = section_answer(made).model_dump(mode="json")
    assert shown.pop("sequence") == line["sequence"] == made.sequence
    assert journal.canonical(shown) == line["content"]
    assert kept_status(depot, "TV114").sequence == line["sequence"]


def test_names_are_unique_without_regard_to_case_and_never_reused(depot: Depot) -> None:
    depot.section("TV114")
    for taken in ("TV114", "tv114"):
        with pytest.raises(ConflictError):
            depot.section(taken)
    depot.write(sections.edit, "TV114", 1, plain(state=SectionState.RECOVERED))
    with pytest.raises(ConflictError):
        depot.section("TV114")


def test_another_depot_may_use_the_name_and_sees_nothing_of_it(depot: Depot) -> None:
    depot.section("TV114", title="ours")
    depot.depot = "birchfield"
    with pytest.raises(NotFoundError):
        depot.read(sections.get, "TV114")
    with pytest.raises(NotFoundError):
        depot.write(sections.edit, "TV114", 1, plain())
    depot.section("TV114", title="theirs")
    depot.depot = "ashby"
    assert depot.read(sections.get, "TV114").content.title == "ours"


def test_an_edit_makes_the_next_version_and_keeps_the_last(depot: Depot) -> None:
    depot.section("TV114", length_m=800.0)
    depot.later(days=3)
    edited = depot.write(sections.edit, "TV114", 1, plain(length_m=790.0), actor=OTHER)
    first, second = depot.read(sections.versions, "TV114", after=None, most=10)
    assert (first.version, first.content.length_m, first.recorded_by) == (1, 800.0, ENGINEER.holder)
    assert (second.version, second.content.length_m, second.recorded_by) == (2, 790.0, OTHER.holder)
    assert second.content.valid_from_on == first.content.valid_from_on + timedelta(days=3)
    assert edited.sequence == lines(depot)[-1]["sequence"]
    assert [one.version for one in depot.read(sections.versions, "TV114", after=1, most=10)] == [2]
    assert len(depot.read(sections.versions, "TV114", after=None, most=1)) == 1


def test_as_of_a_day_the_highest_version_that_holds_from_then_or_earlier(depot: Depot) -> None:
    """The second version, recorded last, corrects the record since before the third's day."""
    first_day = depot.today
    depot.section("TV114", length_m=1.0)
    depot.later(days=20)
    depot.write(sections.edit, "TV114", 1, plain(length_m=2.0))
    depot.write(sections.edit, "TV114", 2, plain(length_m=3.0, valid_from_on=first_day + timedelta(days=10)))

    def on(day: date) -> float | None:
        with depot.service.read() as connection:
            moment = facts.Moment(depot.depot, "UTC", day)
            found = list(facts.gather(connection, moment, ["TV114"]))
        return found[0].facts.record.length_m if found else None

    assert on(first_day - timedelta(days=1)) is None
    assert on(first_day + timedelta(days=9)) == 1.0
    assert on(first_day + timedelta(days=10)) == 3.0
    assert on(first_day + timedelta(days=20)) == 3.0


def test_what_is_stored_already_stores_nothing(depot: Depot) -> None:
    made = depot.section("TV114", length_m=800.0)
    before = len(lines(depot))
    depot.later(days=1)
    again = depot.write(sections.edit, "TV114", 1, plain(length_m=800.0))
    assert again == made
    assert len(lines(depot)) == before


def test_a_stale_edit_is_refused(depot: Depot) -> None:
    depot.section("TV114")
    depot.write(sections.edit, "TV114", 1, plain(title="second"))
    with pytest.raises(StaleError):
        depot.write(sections.edit, "TV114", 1, plain(title="third"))
    assert depot.read(sections.get, "TV114").content.title == "second"


def test_of_two_editors_at_once_one_is_told(depot: Depot) -> None:
    depot.section("TV114")
    barrier = Barrier(2)
    outcomes: list[str] = []

    def edit(title: str) -> None:
        barrier.wait(timeout=10)
        try:
            depot.write(sections.edit, "TV114", 1, plain(title=title))
        except StaleError:
            outcomes.append("stale")
        else:
            outcomes.append("stored")

    editors = [Thread(target=edit, args=(title,)) for title in ("one", "two")]
    for editor in editors:
        editor.start()
    for editor in editors:
        editor.join()
    assert sorted(outcomes) == ["stale", "stored"]
    assert depot.read(sections.get, "TV114").version == 2


IMPOSSIBLE: list[tuple[dict[str, Any], tuple[str, str]]] = [
    ({"from_km": 2.0, "to_km": 1.0}, ("out_of_order", "/to_km")),
    ({"book": "nowhere"}, ("unknown_book", "/book")),
    ({"succeeds": "TV1"}, ("unknown_section", "/succeeds")),
    ({"succeeds": "tv114"}, ("own_name", "/succeeds")),
    ({"return_rails": 2}, ("contradiction", "/return_rails")),
    ({"required_test_points": ()}, ("none_given", "/required_test_points")),
    ({"required_test_points": ("middle", "end")}, ("unknown_test_point", "/required_test_points/1")),
    ({"required_test_points": ("middle", "middle")}, ("duplicate", "/required_test_points/1")),
    ({"adjacent": (joint("J", "tv114", "+"),)}, ("own_name", "/adjacent/0/neighbour")),
    (
        {"adjacent": (joint("J", "A", "+"), joint("J", "B", "+"))},
        ("duplicate", "/adjacent/1/boundary"),
    ),
    ({"valid_from_on": date(2026, 3, 3)}, ("in_the_future", "/valid_from_on")),
    ({"commissioned_on": date(2026, 3, 3)}, ("in_the_future", "/commissioned_on")),
]


def test_what_cannot_be_is_refused(depot: Depot) -> None:
    for changes, expected in IMPOSSIBLE:
        with pytest.raises(NotAcceptableError) as refused:
            depot.section("TV114", **changes)
        assert expected in codes(refused.value)
    with pytest.raises(NotFoundError):
        depot.read(sections.get, "TV114")


def test_a_planned_section_is_commissioned_later(depot: Depot) -> None:
    depot.section("TV114", state=SectionState.PLANNED, commissioned_on=depot.today + timedelta(days=90))


STATES = [
    (SectionState.PLANNED, SectionState.IN_USE, True),
    (SectionState.IN_USE, SectionState.OUT_OF_USE, True),
    (SectionState.OUT_OF_USE, SectionState.IN_USE, True),
    (SectionState.IN_USE, SectionState.RECOVERED, True),
    (SectionState.IN_USE, SectionState.PLANNED, False),
    (SectionState.OUT_OF_USE, SectionState.PLANNED, False),
    (SectionState.RECOVERED, SectionState.IN_USE, False),
    (SectionState.RECOVERED, SectionState.OUT_OF_USE, False),
]


def test_states_follow_one_another(depot: Depot) -> None:
    for number, (before, after, taken) in enumerate(STATES):
        name = f"S{number}"
        depot.section(name, state=before)
        if taken:
            depot.write(sections.edit, name, 1, plain(state=after))
        else:
            with pytest.raises(NotAcceptableError) as refused:
                depot.write(sections.edit, name, 1, plain(state=after))
            assert ("final_state", "/state") in codes(refused.value)


def test_another_state_has_a_day_of_its_own(depot: Depot) -> None:
    """Sent back with the day it came with, a return to use would rewrite when it was out of use."""
    out_of_use = depot.section("TV114", state=SectionState.OUT_OF_USE).content
    depot.later(days=30)
    back = replace(out_of_use, state=SectionState.IN_USE)
    with pytest.raises(NotAcceptableError) as refused:
        depot.write(sections.edit, "TV114", 1, back)
    assert codes(refused.value) == {("state_day", "/valid_from_on")}
    depot.write(sections.edit, "TV114", 1, replace(back, valid_from_on=None))


def test_changed_polarity_judges_the_neighbours_anew(depot: Depot) -> None:
    depot.section("A", adjacent=(joint("J1", "B", "+"),))
    depot.section("C")
    made = depot.section("B", adjacent=(joint("J1", "A", "+"), joint("J2", "C", "-"), joint("J3", "X", "-")))
    assert lines(depot)[-1]["sections"] == '["A","B","C"]'
    assert kept_status(depot, "A").sequence == made.sequence
    content = made.content
    turned = replace(content, adjacent=(joint("J1", "A", "-"), *content.adjacent[1:]))
    edited = depot.write(sections.edit, "B", 1, turned)
    assert lines(depot)[-1]["sections"] == '["A","B"]'
    assert kept_status(depot, "A").sequence == edited.sequence
    assert kept_status(depot, "C").sequence == made.sequence
    away = depot.write(sections.edit, "B", 2, replace(turned, adjacent=()))
    assert lines(depot)[-1]["sections"] == '["A","B","C"]'
    assert kept_status(depot, "C").sequence == away.sequence


def test_the_record_that_is_judged_knows_what_the_neighbour_says(depot: Depot) -> None:
    depot.section("A", adjacent=(joint("J1", "B", "+"), joint("J9", "B", "-")))
    depot.section("B", adjacent=(joint("J1", "A", "-"),))
    with depot.service.read() as connection:
        judged = status.of_section(connection, depot.depot, "A", depot.clock[0])
    assert [(one.boundary, one.neighbour_polarity) for one in judged.facts.record.adjacent] == [
        ("J1", "-"),
        ("J9", None),
    ]


def test_what_the_rules_take_from_the_equipment(depot: Depot) -> None:
    relay = equipment.ImmuneRelay(
        type="9 ohm AC-immune",
        serial="R-9",
        fitted_on=date(2024, 5, 1),
        tested_on=date(2024, 4, 1),
        overhauled_on=date(2024, 4, 20),
        rated_pick_up_v=1.40,
        rated_drop_away_v=0.95,
        bench_pick_up_v=1.38,
    )
    stated = equipment.DcAcImmuneEquipment(
        circuit_kind="dc_ac_immune",
        relay=relay,
        feed=equipment.Feed(serial="F-1", emf_v=6.0),
        receivers=1,
        choke=True,
        catenary_current_a=300,
        set_up=(equipment.SetUp(quantity="relay_voltage", test_point="relay_end", value=2.1),),
    )
    depot.section(
        "TV114",
        circuit_kind=CircuitKind.DC_AC_IMMUNE,
        traction=Traction.AC_OVERHEAD,
        return_rails=1,
        equipment=stated,
    )
    with depot.service.read() as connection:
        record = status.of_section(connection, depot.depot, "TV114", depot.clock[0]).facts.record
    assert (record.relay_type, record.relay_pick_up_v, record.relay_drop_away_v) == (relay.type, 1.38, 0.95)
    assert (record.receivers, record.choke, record.catenary_current_a) == (1, True, 300)
    assert record.items["relay"].serial == "R-9"
    assert record.items["relay"].tested_on == date(2024, 4, 20)
    assert record.items["feed"].fitted_on is None
    assert record.set_up == {("relay_voltage", "relay_end"): 2.1}
    assert record.return_rails == 1


def test_kept_versions_are_never_rewritten(depot: Depot) -> None:
    made = depot.section("TV114", configuration=Configuration(points_ends=2))
    for version in range(1, 5):
        depot.later(days=1)
        depot.write(sections.edit, "TV114", version, plain(title=f"title {version}"))
    found = depot.read(sections.versions, "TV114", after=None, most=10)
    assert json_value(found[0].content) == json_value(made.content)
    assert [one.version for one in found] == [1, 2, 3, 4, 5]
