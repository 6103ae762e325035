"""What applies to a section on a day: in figures, from which clause or concession, and why."""

from __future__ import annotations

from datetime import date
from typing import Any

import pytest

from service.application import concessions, section_limits
from service.application.equipment import DcEquipment
from service.application.section_limits import AppliedLimit, SectionLimits
from service.errors import NotFoundError
from service.rules.words import Sleepers
from support.limit_books import DRAFTER, ISSUER, Shelf, limit, task

DAY = date(2026, 4, 1)
RELATIVE = limit(
    limit="excitation",
    clause="2.1",
    quantity="relay_voltage",
    unit="V",
    test_points=["relay_end"],
    relative_to="relay_pick_up",
    minimum={"value": 1.25, "hazard": "right_side", "near_margin": 0.1},
    maximum={"value": 3, "hazard": "wrong_side"},
)
LENGTH = limit(
    limit="length",
    quantity="length",
    unit="m",
    test_points=[],
    minimum=None,
    maximum={"value": 900, "hazard": "right_side"},
    applies={"sleepers": ["concrete"], "length_from_m": 100},
)


def shelved(shelf: Shelf, **changes: Any) -> None:
    """An issued book of three limits and a task, and a section judged by it."""
    shelf.draft(limits=[limit(), RELATIVE, LENGTH], tasks=[task()])
    shelf.section("AS1", **changes)
    shelf.issue(DAY)


def applied(shelf: Shelf, as_of: date | None = DAY) -> SectionLimits:
    found: SectionLimits = shelf.read(section_limits.of_section, "ashby", "AS1", shelf.clock[0], as_of)
    return found


def by_name(found: SectionLimits, name: str) -> AppliedLimit:
    [one] = [one for one in found.limits if one.limit.limit == name]
    return one


def relay(**figures: float) -> DcEquipment:
    return DcEquipment.model_validate({"schema": 1, "circuit_kind": "dc", "relay": figures})


def test_before_the_first_edition_nothing_applies(shelf: Shelf) -> None:
    shelved(shelf)
    found = applied(shelf, None)
    assert (found.book, found.edition, found.limits, found.tasks) == ("house", None, (), ())


def test_limits_in_figures_at_every_test_point(shelf: Shelf) -> None:
    shelved(shelf, equipment=relay(rated_pick_up_v=1.4))
    found = applied(shelf)
    shunt = by_name(found, "drop_shunt")
    assert [(one.test_point, one.min, one.near_min, one.max) for one in shunt.bounds] == [
        ("feed_end", 0.5, 0.6, None),
        ("relay_end", 0.5, 0.6, None),
    ]
    [excitation] = by_name(found, "excitation").bounds
    assert (excitation.min, excitation.near_min, excitation.max) == (1.75, 1.85, 4.2)
    assert [one.task.task for one in found.tasks] == ["shunt_test"]


def test_a_relative_limit_without_its_base_says_why_it_has_no_figures(shelf: Shelf) -> None:
    shelved(shelf)
    [excitation] = by_name(applied(shelf), "excitation").bounds
    assert (excitation.min, excitation.max) == (None, None)
    assert excitation.reason is not None
    assert excitation.reason.code == "no_rated_value"


def test_why_it_applies(shelf: Shelf) -> None:
    shelved(shelf, sleepers=Sleepers.CONCRETE, length_m=250.0)
    length = by_name(applied(shelf), "length")
    assert [(one.attribute, one.value) for one in length.because] == [
        ("sleepers", "concrete"),
        ("length_m", 250.0),
    ]
    assert length.missing is None
    assert [(one.test_point, one.max) for one in length.bounds] == [(None, 900)]


def test_an_attribute_that_the_register_lacks_is_named(shelf: Shelf) -> None:
    shelved(shelf, length_m=250.0)
    length = by_name(applied(shelf), "length")
    assert length.missing == "sleepers"
    assert ("sleepers", None) in [(one.attribute, one.value) for one in length.because]


def test_what_the_register_rules_out_is_left_out(shelf: Shelf) -> None:
    shelved(shelf, sleepers=Sleepers.WOOD, length_m=250.0)
    assert [one.limit.limit for one in applied(shelf).limits] == ["drop_shunt", "excitation"]


def test_a_live_concession_is_shown_on_its_days_only(shelf: Shelf) -> None:
    shelved(shelf)
    shelf.at(date(2026, 4, 2))
    terms = concessions.Content(
        section="AS1",
        limit="drop_shunt",
        task=None,
        test_point=None,
        allowed_min=0.4,
        allowed_max=None,
        conditions="weekly test",
        protection="trains are hand-signalled",
        asked_by=DRAFTER.holder,
        approved_by=ISSUER.holder,
        from_on=date(2026, 4, 10),
        until_on=date(2026, 4, 20),
    )
    name = "0197c0de-0000-7000-8000-000000000001"
    shelf.write(concessions.grant, "ashby", name, terms, actor=ISSUER)
    shown = {
        day: [one.concession for one in by_name(applied(shelf, date(2026, 4, day)), "drop_shunt").concessions]
        for day in (9, 10, 20, 21)
    }
    assert shown == {9: [], 10: [name], 20: [name], 21: []}


def test_an_unknown_section_or_one_without_a_record_yet_is_not_found(shelf: Shelf) -> None:
    shelved(shelf)
    with pytest.raises(NotFoundError):
        shelf.read(section_limits.of_section, "ashby", "AS2", shelf.clock[0], DAY)
    with pytest.raises(NotFoundError):
        shelf.read(section_limits.of_section, "birchfield", "AS1", shelf.clock[0], DAY)
    with pytest.raises(NotFoundError):
        applied(shelf, date(2020, 1, 1))
