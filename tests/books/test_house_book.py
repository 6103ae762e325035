"""The invented house book uses every kind of limit and interval that the rules know."""

from __future__ import annotations

from dataclasses import fields

import pytest

from service.application import editions
from service.application.book_content import BookApplies
from service.rules.limits import Applicability
from service.rules.quantities import QUANTITIES
from service.rules.words import CircuitKind, Hazard, RelativeTo, Traction

[HOUSE] = [new for new in editions.bundled() if new.book == "harrow-vale-house"]
APPLIES = [one.applies for one in (*HOUSE.limits, *HOUSE.tasks) if one.applies is not None]
BOUNDS = [bound for limit in HOUSE.limits for bound in (limit.minimum, limit.maximum) if bound is not None]


@pytest.mark.parametrize("name", BookApplies.model_fields)
def test_something_depends_on(name: str) -> None:
    assert any(getattr(applies, name) is not None for applies in APPLIES)


def test_the_rules_know_no_other_attribute() -> None:
    assert {field.name for field in fields(Applicability)} == set(BookApplies.model_fields)


def test_every_register_quantity_is_limited() -> None:
    known = {name for name, quantity in QUANTITIES.items() if quantity.from_register}
    limited = {limit.quantity for limit in HOUSE.limits}
    assert known - limited == {"circuit_kind_permitted"}  # which the combinations say
    assert HOUSE.combinations


def test_every_base_of_a_relative_limit() -> None:
    assert {limit.relative_to for limit in HOUSE.limits} == {None, *RelativeTo}


def test_every_kind_of_bound() -> None:
    assert {bound.hazard for bound in BOUNDS} == set(Hazard)
    assert {bound.near_margin is None for bound in BOUNDS} == {True, False}
    assert any(limit.minimum and limit.maximum for limit in HOUSE.limits)
    assert any(
        limit.minimum and limit.maximum and limit.minimum.hazard != limit.maximum.hazard
        for limit in HOUSE.limits
    )


def test_every_condition_of_a_limit() -> None:
    assert any(limit.ballast == "dry" for limit in HOUSE.limits)
    assert any(limit.shunt_ohm is not None for limit in HOUSE.limits)
    assert any(limit.test_points is None for limit in HOUSE.limits)
    assert any("legs" in (limit.test_points or ()) for limit in HOUSE.limits)


def test_every_kind_of_interval() -> None:
    tasks = HOUSE.tasks
    assert any(task.interval and task.grace for task in tasks)
    assert any(task.window for task in tasks)
    assert any(task.shortened for task in tasks)
    assert any(task.item == "relay" for task in tasks)
    assert any(task.item == "feed" for task in tasks)
    assert any(task.after_work and task.interval for task in tasks)
    assert any(task.after_work and not task.interval for task in tasks)
    assert any(not task.interval and not task.window and not task.after_work for task in tasks)
    assert any(task.needs for task in tasks)
    assert any(task.needs_anywhere for task in tasks)


def test_every_circuit_kind_has_a_drop_shunt_and_a_place_under_some_traction() -> None:
    limited = {
        kind
        for limit in HOUSE.limits
        if limit.quantity == "drop_shunt" and limit.applies is not None
        for kind in limit.applies.circuit_kinds or ()
    }
    assert limited == set(CircuitKind)
    assert {one.circuit_kind for one in HOUSE.combinations} == set(CircuitKind)


@pytest.mark.parametrize("traction", [traction for traction in Traction if traction is not Traction.NONE])
def test_a_plain_dc_circuit_is_permitted_under_no_traction(traction: Traction) -> None:
    permitted = {(one.circuit_kind, one.traction) for one in HOUSE.combinations}
    assert (CircuitKind.DC, traction) not in permitted
    assert (CircuitKind.DC, Traction.NONE) in permitted
