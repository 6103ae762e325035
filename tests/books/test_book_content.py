"""What a book may say: units end at its edge, and what does not fit is refused with its place."""

from __future__ import annotations

import json
from typing import Any

import pytest

from service.api import bodies
from service.application import editions
from service.application.book_content import Content, Draft, unit_faults
from service.errors import NotAcceptableError
from service.rules.limits import Bound
from service.rules.words import Hazard
from support.limit_books import draft_of, edition, limit, task


def parsed(body: dict[str, Any]) -> Draft:
    return bodies.parse(Draft, json.dumps(body).encode())


def faults_of(**changes: Any) -> set[tuple[str, str | None]]:
    """(code, pointer) of every fault for which a draft is refused, shape and consistency alike."""

    def take() -> None:
        new = parsed(edition(**changes))
        editions.checked(new.book, new.edition, new.content())

    with pytest.raises(NotAcceptableError) as refused:
        take()
    return {(fault.code, fault.pointer) for fault in refused.value.faults}


def test_bounds_and_margins_reach_the_rules_in_base_units() -> None:
    given = limit(unit="mOhm", minimum={"value": 700, "hazard": "wrong_side", "near_margin": 100})
    [rule] = draft_of(edition(limits=[given])).rules().limits
    assert rule.minimum == Bound(0.7, Hazard.WRONG_SIDE, 0.1)


def test_bounds_of_a_relative_limit_are_factors_and_its_unit_is_the_margins() -> None:
    relative = limit(
        quantity="relay_voltage",
        unit="mV",
        relative_to="relay_pick_up",
        minimum={"value": 1.25, "hazard": "right_side", "near_margin": 100},
    )
    [rule] = draft_of(edition(limits=[relative])).rules().limits
    assert rule.minimum == Bound(1.25, Hazard.RIGHT_SIDE, 0.1)


def test_a_shortened_interval_is_in_base_units() -> None:
    insulation = task(
        interval="P10Y",
        needs=[],
        shortened={"quantity": "insulation_resistance", "unit": "kOhm", "under": 500, "interval": "P1Y"},
    )
    [rule] = draft_of(edition(tasks=[insulation])).rules().tasks
    assert rule.shortened is not None
    assert rule.shortened.under == 500_000


def test_null_absent_and_empty_are_one_content() -> None:
    bare = draft_of(edition()).content()
    empty = draft_of(edition(tasks=[], notes=[], combinations=[], dry_ballast_ohm_km=None)).content()
    null = draft_of(edition(tasks=None, notes=None, combinations=None)).content()
    assert bare == empty == null
    assert draft_of(edition(tasks=[task(needs=None)])).tasks[0].needs == ()


def test_content_that_was_kept_reads_back_the_same() -> None:
    for new in editions.bundled():
        text = editions.checked(new.book, new.edition, new.content())
        assert Content.model_validate_json(text) == new.content()


@pytest.mark.parametrize(
    ("changes", "pointer"),
    [
        ({"limits": [{name: value for name, value in limit().items() if name != "unit"}]}, "/limits/0/unit"),
        ({"limits": [limit(), limit(limit="b", unit=None)]}, "/limits/1/unit"),
        ({"limits": [limit(confirmed="yes")]}, "/limits/0/confirmed"),
        ({"limits": [limit(minimum={"value": True, "hazard": "wrong_side"})]}, "/limits/0/minimum/value"),
        ({"limits": [limit(minimum={"value": "0.5", "hazard": "wrong_side"})]}, "/limits/0/minimum/value"),
        ({"limits": [limit(minimum={"value": 0.5, "hazard": "bad"})]}, "/limits/0/minimum/hazard"),
        ({"limits": [limit(minimum={"value": 0.5})]}, "/limits/0/minimum/hazard"),
        ({"limits": [limit(standing="hearsay")]}, "/limits/0/standing"),
        ({"limits": [limit(clause=None)]}, "/limits/0/clause"),
        ({"limits": [limit(limit="Not A Word")]}, "/limits/0/limit"),
        ({"limits": [limit(test_points=["somewhere"])]}, "/limits/0/test_points/0"),
        ({"limits": [limit(applies={"circuit_kinds": []})]}, "/limits/0/applies/circuit_kinds"),
        ({"limits": [limit(applies={"circuit_kinds": ["steam"]})]}, "/limits/0/applies/circuit_kinds/0"),
        ({"limits": [limit(applies={"return_rails": [3]})]}, "/limits/0/applies/return_rails/0"),
        ({"limits": [limit(aplies={})]}, "/limits/0/aplies"),
        ({"limits": [limit(ballast="wet")]}, "/limits/0/ballast"),
        ({"limits": [limit(relative_to="hope")]}, "/limits/0/relative_to"),
        ({"tasks": [task(interval="3 months")]}, "/tasks/0/interval"),
        ({"tasks": [task(window={"first": "6-1", "last": "09-30"})]}, "/tasks/0/window/first"),
        ({"tasks": [task(after_work=["prayed"])]}, "/tasks/0/after_work/0"),
        ({"combinations": [{"circuit_kind": "dc"}]}, "/combinations/0/traction"),
        ({"title": ""}, "/title"),
        ({"dry_ballast_ohm_km": 0}, "/dry_ballast_ohm_km"),
        ({"edition": "a/b"}, "/edition"),
        ({"book": "x" * 41}, "/book"),
    ],
)
def test_what_has_the_wrong_shape_is_refused_with_its_place(changes: dict[str, Any], pointer: str) -> None:
    assert pointer in {place for _, place in faults_of(**changes)}


def both(low: float, high: float, near: float | None = None) -> dict[str, Any]:
    bound = {"hazard": "wrong_side", "near_margin": near}
    return {"minimum": {"value": low, **bound}, "maximum": {"value": high, **bound}}


REGISTERED = {"quantity": "length", "unit": "m", "minimum": {"value": 26, "hazard": "wrong_side"}}
RELAY_VOLTS = {"quantity": "relay_voltage", "unit": "V", "test_points": ["relay_end"]}
OTHER_TRACTION = {"tractions": ["none"]}


@pytest.mark.parametrize(
    ("changes", "fault"),
    [
        ({"limits": [limit(unit="furlong")]}, ("unknown_unit", "/limits/0/unit")),
        ({"limits": [limit(unit="mV")]}, ("wrong_unit", "/limits/0/unit")),
        ({"limits": [limit(quantity="mood")]}, ("unknown_quantity", "/limits/0/quantity")),
        ({"limits": [limit(minimum=None)]}, ("no_bound", "/limits/0")),
        ({"limits": [limit(**both(1.0, 0.5))]}, ("contradictory", "/limits/0/minimum")),
        ({"limits": [limit(**both(0.5, 1.0, 0.3))]}, ("nothing_within", "/limits/0")),
        ({"limits": [limit(), limit()]}, ("duplicate", "/limits/1/limit")),
        ({"limits": [limit(), limit(limit="again")]}, ("duplicate", "/limits/1/minimum")),
        (
            {"limits": [limit(minimum={"value": 0.5, "hazard": "wrong_side", "near_margin": -0.1})]},
            ("impossible", "/limits/0/minimum/near_margin"),
        ),
        (
            {"limits": [limit(minimum={"value": -1, "hazard": "wrong_side"})]},
            ("impossible", "/limits/0/minimum/value"),
        ),
        ({"limits": [limit(relative_to="relay_pick_up")]}, ("no_rated_base", "/limits/0/relative_to")),
        ({"limits": [limit(**RELAY_VOLTS, shunt_ohm=0.5)]}, ("no_shunt", "/limits/0/shunt_ohm")),
        ({"limits": [limit(test_points=[])]}, ("no_test_point", "/limits/0/test_points")),
        (
            {"limits": [limit(**REGISTERED, test_points=["relay_end"])]},
            ("not_measured", "/limits/0/test_points"),
        ),
        ({"limits": [limit(**REGISTERED, ballast="dry")]}, ("not_measured", "/limits/0/ballast")),
        ({"limits": [limit(limit="circuit_kind_permitted")]}, ("reserved", "/limits/0/limit")),
        (
            {"limits": [limit(applies={"length_from_m": 100, "length_below_m": 100})]},
            ("applies_to_nothing", "/limits/0/applies/length_below_m"),
        ),
        ({"tasks": [task(interval="P3MM")]}, ("bad_duration", "/tasks/0/interval")),
        ({"tasks": [task(interval="P0D")]}, ("bad_duration", "/tasks/0/interval")),
        (
            {"tasks": [task(window={"first": "06-01", "last": "09-30"})]},
            ("contradictory", "/tasks/0/window"),
        ),
        (
            {"tasks": [task(interval=None, window={"first": "11-01", "last": "02-28"})]},
            ("contradictory", "/tasks/0/window/last"),
        ),
        (
            {"tasks": [task(interval=None, window={"first": "02-29", "last": "09-30"})]},
            ("unknown_day", "/tasks/0/window/first"),
        ),
        ({"tasks": [task(needs=["mood"])]}, ("unknown_quantity", "/tasks/0/needs/0")),
        ({"tasks": [task(needs_anywhere=["length"])]}, ("not_measured", "/tasks/0/needs_anywhere/0")),
        ({"tasks": [task(), task()]}, ("duplicate", "/tasks/1/task")),
        (
            {
                "tasks": [
                    task(shortened={"quantity": "drop_shunt", "unit": "mV", "under": 500, "interval": "P1M"})
                ]
            },
            ("wrong_unit", "/tasks/0/shortened/unit"),
        ),
        (
            {
                "tasks": [
                    task(shortened={"quantity": "drop_shunt", "unit": "Ohm", "under": 1, "interval": "P4M"})
                ]
            },
            ("contradictory", "/tasks/0/shortened/interval"),
        ),
    ],
)
def test_a_book_that_contradicts_itself_is_refused_and_the_fault_named(
    changes: dict[str, Any], fault: tuple[str, str]
) -> None:
    assert fault in faults_of(**changes)


def test_limits_for_different_sections_do_not_contradict_each_other() -> None:
    apart = edition(limits=[limit(), limit(limit="other", applies=OTHER_TRACTION)])
    assert editions.checked("house", "1", draft_of(apart).content())


def test_every_fault_is_named_at_once() -> None:
    found = faults_of(limits=[limit(unit="furlong"), limit(limit="b", unit="mV")])
    assert found == {("unknown_unit", "/limits/0/unit"), ("wrong_unit", "/limits/1/unit")}


def test_unit_faults_of_a_sound_book_are_none() -> None:
    assert all(not list(unit_faults(new)) for new in editions.bundled())
