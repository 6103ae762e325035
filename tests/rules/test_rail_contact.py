"""Poor rail contact: what raises it, what clears it."""

from __future__ import annotations

from datetime import date

import pytest

from service.rules.limits import Applicability, Bound
from service.rules.words import Sleepers, Source
from support.rule_cases import WRONG, Case, limit, reading

RESIDUAL = limit(limit="residual", quantity="residual_voltage", minimum=None, maximum=Bound(0.8, WRONG, 0.1))
DAYS = [date(2026, 5, day) for day in range(1, 9)]


def poor(case: Case) -> bool:
    status = case.judge()
    raised = any(caution.code == "poor_rail_contact" for caution in status.cautions)
    assert (status.worst_hazard is WRONG) is raised
    return raised


@pytest.mark.parametrize(
    ("rails", "expected"),
    [
        ([], False),
        ([None], False),
        (["clean"], False),
        (["rusty"], True),
        (["contaminated", None], True),
        (["rusty", "clean"], False),
        (["rusty", "clean", None], False),
        (["clean", "rusty"], True),
    ],
)
def test_the_last_rail_seen(rails: list[str | None], expected: bool) -> None:
    case = Case(RESIDUAL)
    for on, rail in zip(DAYS, rails, strict=False):
        case.visit(on, rail=rail)
    assert poor(case) is expected


@pytest.mark.parametrize(
    ("given", "cleared"),
    [
        ({"value": 0.3}, True),
        ({"value": 0.75}, True),
        ({"value": 0.9}, False),
        ({"value": 0.3, "instrument": None}, False),
        ({"value": 0.3, "source": Source.SHUNT}, False),
        ({"value": 0.3, "quantity": "residual_current"}, False),
    ],
)
@pytest.mark.parametrize("same_visit", [True, False])
def test_a_train_seen_within_limits(given: dict[str, object], cleared: bool, same_visit: bool) -> None:
    case = Case(RESIDUAL)
    reads = {"quantity": "residual_voltage", "source": Source.TRAIN} | given
    if same_visit:
        case.visit(DAYS[0], rail="rusty", **reads)
    else:
        case.visit(DAYS[0], rail="rusty")
        case.visit(DAYS[1], **reads)
    raised = any(caution.code == "poor_rail_contact" for caution in case.judge().cautions)
    assert raised is not cleared


def test_a_train_seen_before_the_rust_says_nothing() -> None:
    case = Case(RESIDUAL)
    case.visit(DAYS[0], 0.3, quantity="residual_voltage", source=Source.TRAIN)
    case.visit(DAYS[1], rail="rusty")
    assert poor(case)


def test_every_train_reading_of_the_visit_must_be_inside() -> None:
    case = Case(RESIDUAL)
    case.visit(
        DAYS[0], 0.3, quantity="residual_voltage", source=Source.TRAIN, points=["relay_end"], rail="rusty"
    )
    outside = {"quantity": "residual_voltage", "test_point": "feed_end", "source": Source.TRAIN}
    case.readings.append(reading("v0", 0.9, **outside))
    assert poor(case)


def test_a_limit_that_may_not_apply_clears_nothing() -> None:
    unsure = limit(
        quantity="residual_voltage",
        minimum=None,
        maximum=Bound(0.8, WRONG),
        applies=Applicability(sleepers=frozenset({Sleepers.WOOD})),
    )
    case = Case(unsure)
    case.visit(DAYS[0], 0.3, quantity="residual_voltage", source=Source.TRAIN, rail="rusty")
    assert poor(case)
