"""Every fault of a limit book, by its code and path; and that the bundled kinds of book have none."""

from __future__ import annotations

from dataclasses import replace
from math import inf, nan
from typing import Any

import pytest

from service.rules.limits import Applicability, Bound, Edition, Shortened, YearlyWindow, faults
from service.rules.words import RelativeTo, Work
from support.rule_cases import RIGHT, WRONG, combination, edition, limit, task

RELATIVE = {"quantity": "relay_voltage", "relative_to": RelativeTo.RELAY_PICK_UP}


def found(made: Edition) -> list[tuple[tuple[str | int, ...], str]]:
    return [(fault.path, fault.code) for fault in faults(made)]


def test_a_sound_book_has_none() -> None:
    sound = edition(
        limit(),
        limit(limit="dry", ballast_dry=True),
        limit(limit="yard", applies=Applicability(length_from_m=100.0, length_below_m=200.0)),
        limit(
            limit="excitation", minimum=Bound(1.25, RIGHT, 0.1), maximum=Bound(3.0, WRONG, 0.1), **RELATIVE
        ),
        limit(
            limit="residual",
            quantity="residual_current",
            minimum=None,
            maximum=Bound(0.85, WRONG),
            relative_to=RelativeTo.RELAY_DROP_AWAY,
            shunt_ohm=0.5,
            test_points=("relay_end", "legs", "leg:12A"),
        ),
        limit(limit="left", quantity="feed_voltage", test_points=("feed_end",)),
        limit(limit="right", quantity="feed_voltage", test_points=("relay_end",)),
        limit(limit="length", quantity="length", test_points=()),
        limit(limit="set", quantity="relay_voltage", relative_to=RelativeTo.SET_UP),
        task(needs=("drop_shunt",), grace="P14D"),
        task(applies=Applicability(relay_types=frozenset({"ac_vane"}))),
        task(task="dry_round", interval=None, window=YearlyWindow((5, 1), (9, 30)), grace="P14D"),
        task(task="after", interval=None, after_work=frozenset({Work.ADJUSTED}), grace="P1D"),
        task(task="none", interval=None),
        task(task="insulation", interval="P10Y", shortened=Shortened("insulation_resistance", 5e5, "P1Y")),
        combination("dc", "none"),
        combination("dc", "dc_third_rail", [1]),
        combination("dc", "dc_third_rail", [2]),
        dry_ballast_ohm_km=10.0,
    )
    assert faults(sound) == ()


@pytest.mark.parametrize(
    ("given", "path", "code"),
    [
        ({"quantity": "colour"}, ("quantity",), "unknown_quantity"),
        ({"clause": " "}, ("clause",), "missing"),
        ({"source": ""}, ("source",), "missing"),
        ({"standing": ""}, ("standing",), "missing"),
        ({"minimum": None}, (), "no_bound"),
        ({"limit": "circuit_kind_permitted"}, ("limit",), "reserved"),
        ({"quantity": "circuit_kind_permitted"}, ("limit",), "reserved"),
        ({"minimum": Bound(nan, WRONG)}, ("minimum", "value"), "impossible"),
        ({"minimum": Bound(-0.1, WRONG)}, ("minimum", "value"), "impossible"),
        ({"minimum": None, "maximum": Bound(2e4, WRONG)}, ("maximum", "value"), "impossible"),
        ({"minimum": Bound(0.5, WRONG, -0.1)}, ("minimum", "near_margin"), "impossible"),
        ({"minimum": Bound(0.5, WRONG, inf)}, ("minimum", "near_margin"), "impossible"),
        ({"minimum": Bound(0.0, WRONG), **RELATIVE}, ("minimum", "value"), "impossible"),
        ({"maximum": Bound(0.4, WRONG)}, ("minimum",), "contradictory"),
        (
            {"minimum": Bound(3.0, RIGHT), "maximum": Bound(1.25, WRONG), **RELATIVE},
            ("minimum",),
            "contradictory",
        ),
        ({"maximum": Bound(0.65, WRONG, 0.1)}, (), "nothing_within"),
        ({"maximum": Bound(0.55, WRONG)}, (), "nothing_within"),
        ({"quantity": "length", "test_points": ("relay_end",)}, ("test_points",), "not_measured"),
        ({"quantity": "length", "ballast_dry": True}, ("ballast_dry",), "not_measured"),
        ({"quantity": "length", "shunt_ohm": 0.5}, ("shunt_ohm",), "not_measured"),
        ({"quantity": "length", "relative_to": RelativeTo.SET_UP}, ("relative_to",), "not_measured"),
        ({"test_points": ()}, ("test_points",), "no_test_point"),
        ({"test_points": ("nowhere",)}, ("test_points",), "unknown_test_point"),
        ({"relative_to": RelativeTo.RELAY_PICK_UP}, ("relative_to",), "no_rated_base"),
        ({"shunt_ohm": 0.5}, ("shunt_ohm",), "no_shunt"),
        ({"quantity": "residual_voltage", "shunt_ohm": -0.5}, ("shunt_ohm",), "impossible"),
        ({"quantity": "residual_voltage", "shunt_ohm": nan}, ("shunt_ohm",), "impossible"),
        ({"applies": Applicability(tractions=frozenset())}, ("applies", "tractions"), "applies_to_nothing"),
        (
            {"applies": Applicability(length_from_m=2.0, length_below_m=2.0)},
            ("applies", "length_below_m"),
            "applies_to_nothing",
        ),
        ({"applies": Applicability(catenary_from_a=inf)}, ("applies", "catenary_from_a"), "impossible"),
    ],
)
def test_a_faulty_limit(given: dict[str, Any], path: tuple[str, ...], code: str) -> None:
    assert found(edition(limit(**given))) == [(("limits", 0, *path), code)]


def test_near_margins_may_leave_a_single_value_within() -> None:
    assert found(edition(limit(maximum=Bound(0.7, WRONG, 0.1)))) == []


@pytest.mark.parametrize(
    ("second", "path", "code"),
    [
        ({"quantity": "feed_voltage"}, ("limit",), "duplicate"),
        ({"limit": "n"}, ("minimum",), "duplicate"),
        ({"limit": "n", "test_points": ("relay_end",)}, ("minimum",), "duplicate"),
        ({"limit": "n", "minimum": None, "maximum": Bound(0.4, WRONG)}, (), "contradictory"),
        (
            {"limit": "n", "minimum": None, "maximum": Bound(0.4, WRONG), "ballast_dry": True},
            (),
            "contradictory",
        ),
    ],
)
def test_two_limits_on_the_same_ground(second: dict[str, Any], path: tuple[str, ...], code: str) -> None:
    assert found(edition(limit(), limit(**second))) == [(("limits", 1, *path), code)]


def test_a_contradiction_is_found_in_either_order() -> None:
    most = limit(limit="n", minimum=None, maximum=Bound(0.4, WRONG))
    assert found(edition(most, limit())) == [(("limits", 1), "contradictory")]


WINDOW = YearlyWindow((5, 1), (9, 30))


@pytest.mark.parametrize(
    ("given", "path", "code"),
    [
        ({"clause": ""}, ("clause",), "missing"),
        ({"interval": "3 months"}, ("interval",), "bad_duration"),
        ({"interval": "P0D"}, ("interval",), "bad_duration"),
        ({"interval": "PT3H"}, ("interval",), "bad_duration"),
        ({"interval": "P"}, ("interval",), "bad_duration"),
        ({"interval": "P9999M9999W99999D"}, (), None),
        ({"grace": "P1.5D"}, ("grace",), "bad_duration"),
        ({"window": WINDOW}, ("window",), "contradictory"),
        ({"interval": None, "grace": "P1D"}, ("grace",), "contradictory"),
        ({"interval": None, "window": YearlyWindow((11, 1), (2, 28))}, ("window", "last"), "contradictory"),
        ({"interval": None, "window": YearlyWindow((2, 30), (3, 1))}, ("window", "first"), "impossible"),
        ({"needs": ("drop_shunt", "colour")}, ("needs", 1), "unknown_quantity"),
        ({"needs_anywhere": ("length",)}, ("needs_anywhere", 0), "not_measured"),
        ({"applies": Applicability(places=frozenset())}, ("applies", "places"), "applies_to_nothing"),
        ({"shortened": Shortened("colour", 1.0, "P1M")}, ("shortened", "quantity"), "unknown_quantity"),
        ({"shortened": Shortened("drop_shunt", 0.0, "P1M")}, ("shortened", "under"), "impossible"),
        ({"shortened": Shortened("drop_shunt", nan, "P1M")}, ("shortened", "under"), "impossible"),
        ({"shortened": Shortened("drop_shunt", 1.0, "1M")}, ("shortened", "interval"), "bad_duration"),
        ({"shortened": Shortened("drop_shunt", 1.0, "P3M")}, ("shortened", "interval"), "contradictory"),
        (
            {"interval": None, "window": WINDOW, "shortened": Shortened("drop_shunt", 1.0, "P1M")},
            ("shortened",),
            "contradictory",
        ),
    ],
)
def test_a_faulty_task(given: dict[str, Any], path: tuple[str | int, ...], code: str | None) -> None:
    assert found(edition(task(**given))) == ([] if code is None else [(("tasks", 0, *path), code)])


def test_a_bad_interval_does_not_hide_what_shortens_it() -> None:
    made = edition(task(interval="yearly", shortened=Shortened("drop_shunt", 1.0, "P1M")))
    assert found(made) == [(("tasks", 0, "interval"), "bad_duration")]


def test_a_duration_beyond_the_calendar() -> None:
    assert found(edition(task(interval="P999Y9999M"))) == []
    assert found(edition(task(interval="P999Y9999M9999W99999D", grace="P1000Y"))) == [
        (("tasks", 0, "grace"), "bad_duration")
    ]


def test_the_same_task_twice() -> None:
    assert found(edition(task(), task(clause="2.2"))) == [(("tasks", 1, "task"), "duplicate")]


def test_faulty_combinations() -> None:
    made = edition(
        combination("dc", "none"),
        combination("dc", "none", clause=""),
        combination("dc", "ac_overhead", []),
    )
    assert found(made) == [
        (("combinations", 1, "clause"), "missing"),
        (("combinations", 1), "duplicate"),
        (("combinations", 2, "return_rails"), "applies_to_nothing"),
    ]


@pytest.mark.parametrize("dry", [0.0, -1.0, nan, inf])
def test_a_faulty_dry_ballast(dry: float) -> None:
    assert found(replace(edition(), dry_ballast_ohm_km=dry)) == [(("dry_ballast_ohm_km",), "impossible")]
