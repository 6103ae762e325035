"""Findings of a judgement, their identity, how they merge, and their order."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta
from typing import Any

import pytest

from service.rules.findings import (
    FindingSeed,
    Merged,
    findings_of,
    found_outside_seeds,
    identity,
    merge,
    rank,
    weeks_open,
)
from service.rules.limits import Bound, Limit
from service.rules.status import judge
from service.rules.verdicts import found_outside
from service.rules.words import FindingKind, Hazard
from support.rule_cases import AS_OF, INSTRUMENTS, RIGHT, WRONG, Case, concession, limit, reading, task

DAY = date(2026, 5, 10)
ONE = {"test_points": ("relay_end",)}


def seeds(case: Case, as_of: date = AS_OF) -> list[tuple[Any, ...]]:
    return [
        (one.kind, one.hazard, *identity(one)[1:])
        for one in findings_of(case.judge(as_of), case.facts(), as_of)
    ]


def test_nothing_is_wrong() -> None:
    case = Case(limit(**ONE), task())
    case.visit(DAY, 0.5, tasks={"shunt_test": "done"})
    assert seeds(case) == []


def test_each_kind_from_its_own_source() -> None:
    length = limit(
        limit="length", quantity="length", minimum=None, maximum=Bound(450.0, WRONG), test_points=()
    )
    volts = limit(
        limit="volts", quantity="feed_voltage", minimum=Bound(1.0, RIGHT), test_points=("feed_end",)
    )
    relay = limit(limit="relay", quantity="relay_voltage", **ONE)
    case = Case(limit(**ONE), length, volts, relay, task(), length_m=460.0)
    name = case.visit(DAY, 0.4, points=["relay_end"], rail="rusty")
    case.readings.append(reading(name, 3.1, quantity="relay_voltage", doubtful="relay_above_supply"))
    assert seeds(case) == [
        ("poor_rail_contact", WRONG, None, None, None),
        ("outside", WRONG, "drop_shunt", "relay_end", None),
        ("configuration", WRONG, "length", None, None),
        ("not_shown", None, "feed_voltage", "feed_end", None),
        ("doubtful", WRONG, "relay_voltage", "relay_end", None),
        ("overdue", None, None, None, "shunt_test"),
    ]


def test_a_doubtful_failure_is_outside_all_the_same() -> None:
    case = Case(limit(**ONE))
    case.visit(DAY, 0.4, points=["relay_end"], doubtful="drop_above_pick_up")
    assert seeds(case) == [("outside", WRONG, "drop_shunt", "relay_end", None)]


def gravest(*limits: Limit, value: float) -> FindingSeed:
    case = Case(*limits)
    case.visit(DAY, value, points=["relay_end"])
    (seed,) = findings_of(case.judge(), case.facts(), AS_OF)
    return seed


def test_of_two_limits_on_a_quantity_the_gravest_stands_in_either_order() -> None:
    right = limit(limit="r", minimum=Bound(0.9, RIGHT), **ONE)
    wrong = limit(limit="w", minimum=Bound(0.5, WRONG), **ONE)
    farther = limit(limit="f", minimum=Bound(0.6, WRONG), **ONE)
    for limits in ((right, wrong, farther), (farther, wrong, right)):
        seed = gravest(*limits, value=0.4)
        assert seed.verdict is not None
        assert (seed.verdict.limit, seed.hazard) == ("f", WRONG)


def test_what_no_limit_judges_is_not_shown() -> None:
    case = Case()
    status = judge(case.facts(), None, (), AS_OF)
    assert [identity(one) for one in findings_of(status, case.facts(), AS_OF)] == [
        ("not_shown", None, None, None)
    ]


def test_a_section_that_is_not_judged_has_none() -> None:
    case = Case(limit(), task(), state="out_of_use")
    case.concessions = (concession(),)
    assert seeds(case) == []


def test_due_with_no_date_is_not_shown() -> None:
    case = Case(limit(**ONE), task(), commissioned_on=None)
    case.visit(DAY, 0.9)
    assert seeds(case) == [("not_shown", None, None, None, "shunt_test")]


@pytest.mark.parametrize(
    ("as_of", "lapsing"),
    [
        (date(2026, 6, 1), False),
        (date(2026, 6, 2), True),
        (date(2026, 6, 30), True),
        (date(2026, 7, 1), False),
    ],
)
def test_a_concession_lapses_for_four_lists(as_of: date, lapsing: bool) -> None:
    case = Case(limit(**ONE))
    case.visit(DAY, 0.9)
    case.concessions = (
        concession(test_point="relay_end"),
        concession(concession="c0", limit="gone", from_on=date(2027, 1, 1)),
    )
    expected = [("concession_lapsing", None, "drop_shunt", "relay_end", None)] if lapsing else []
    assert seeds(case, as_of) == expected


def test_lapsing_permissions_for_a_task_or_a_limit_that_is_gone() -> None:
    case = Case(limit(**ONE))
    case.visit(DAY, 0.9)
    until = {"until_on": date(2026, 6, 10)}
    case.concessions = (
        concession(limit=None, task="shunt_test", **until),
        concession(concession="c2", limit="gone", **until),
    )
    assert seeds(case) == [
        ("concession_lapsing", None, None, None, None),
        ("concession_lapsing", None, None, None, "shunt_test"),
    ]


def test_an_overdue_task_without_and_a_deferred_one_under_concession() -> None:
    case = Case(limit(**ONE), task())
    case.visit(DAY, 0.9)
    assert [one[0] for one in seeds(case)] == ["overdue"]
    case.concessions = (concession(limit=None, task="shunt_test", until_on=date(2026, 12, 31)),)
    assert seeds(case) == []


def test_found_outside_is_of_what_was_found_not_of_what_was_left() -> None:
    case = Case(limit(**ONE), limit(limit="n", minimum=Bound(0.6, WRONG), **ONE))
    name = case.visit(DAY, 0.4, points=["relay_end"])
    case.readings.append(reading(name, 0.3, stage="as_found"))
    found = found_outside(case.record, case.edition, case.visits[0], case.readings, INSTRUMENTS)
    (seed,) = found_outside_seeds(found)
    assert seed.verdict is not None
    assert (seed.kind, seed.verdict.measured, seed.verdict.limit) == ("found_outside", 0.3, "n")
    assert found_outside_seeds(found[1:2]) == ()


SEED = FindingSeed(FindingKind.OUTSIDE, RIGHT, "drop_shunt", "relay_end")


def test_identity_is_neither_hazard_nor_edition() -> None:
    assert identity(SEED) == identity(replace(SEED, hazard=WRONG, concession="c1"))
    assert identity(SEED) != identity(replace(SEED, test_point="feed_end"))


def test_what_is_new_what_stands_and_what_is_gone() -> None:
    standing = {"stands": FindingKind.OUTSIDE, "gone": FindingKind.OVERDUE}
    assert merge(standing, ["new", "stands"]) == Merged(("new",), ("stands",), ("gone",))
    assert merge({}, ["new"]) == Merged(("new",), (), ())


def test_found_outside_is_cleared_by_nothing_here() -> None:
    assert merge({"f": FindingKind.FOUND_OUTSIDE}, []) == Merged((), ("f",), ())


@pytest.mark.parametrize(("days", "weeks"), [(-3, 0), (0, 0), (6, 0), (7, 1), (20, 2)])
def test_weeks_open(days: int, weeks: int) -> None:
    assert weeks_open(DAY, DAY + timedelta(days=days)) == weeks


def test_the_order_of_the_weekly_list() -> None:
    ordered: list[tuple[FindingKind, Hazard | None, bool]] = [
        (FindingKind.FOUND_OUTSIDE, WRONG, False),
        (FindingKind.FOUND_OUTSIDE, WRONG, True),
        (FindingKind.OUTSIDE, RIGHT, False),
        (FindingKind.NOT_SHOWN, WRONG, False),
        (FindingKind.DOUBTFUL, WRONG, False),
        (FindingKind.OVERDUE, None, False),
        (FindingKind.CONCESSION_LAPSING, None, False),
    ]
    ranks = [rank(kind, hazard, reported=reported) for kind, hazard, reported in ordered]
    assert ranks == [0, 1, 2, 3, 4, 5, 6]
    for kind in (FindingKind.OUTSIDE, FindingKind.CONFIGURATION, FindingKind.POOR_RAIL_CONTACT):
        assert rank(kind, WRONG, reported=False) == 1
