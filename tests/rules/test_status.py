"""A section as a whole: compliance, cautions, what is due next, and until when it holds."""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from typing import Any

import pytest

from service.rules.facts import Instrument
from service.rules.limits import Applicability, Bound
from service.rules.status import Status, judge
from service.rules.words import CircuitKind, Compliance, EditionState, SectionState
from support.rule_cases import (
    AS_OF,
    INSTRUMENTS,
    RIGHT,
    WRONG,
    Case,
    calibration,
    codes,
    concession,
    edition,
    limit,
    task,
)

DAY = date(2026, 5, 10)


def cautions(status: Status) -> list[str]:
    return [caution.code for caution in status.cautions]


@pytest.mark.parametrize(
    ("values", "expected"),
    [
        ((0.9, 0.9), Compliance.YES),
        ((0.5, 0.9), Compliance.YES),
        ((None, 0.9), Compliance.NOT_SHOWN),
        ((0.4, None), Compliance.NO),
        ((0.4, 0.9), Compliance.NO),
    ],
)
def test_compliance(values: tuple[float | None, float | None], expected: Compliance) -> None:
    case = Case()
    for point, value in zip(("relay_end", "feed_end"), values, strict=True):
        case.visit(DAY, value, points=[point])
    assert case.judge().compliance is expected


@pytest.mark.parametrize(
    ("value", "hazard"), [(0.4, WRONG), (2.1, RIGHT), (0.9, None)], ids=["wrong-side", "right-side", "inside"]
)
def test_worst_hazard(value: float, hazard: Any) -> None:
    case = Case(limit(maximum=Bound(2.0, RIGHT)))
    case.visit(DAY, value)
    assert case.judge().worst_hazard is hazard


def test_the_worse_of_both_hazards() -> None:
    case = Case(limit(maximum=Bound(2.0, RIGHT)))
    case.visit(DAY, 2.1, points=["relay_end"])
    case.visit(DAY, 0.4, points=["feed_end"])
    assert case.judge().worst_hazard is WRONG


def test_every_drop_shunt_answer_says_nothing_of_the_rail_surface() -> None:
    assert cautions(Case().judge()) == ["rail_surface_not_shown"]
    assert cautions(Case(limit(quantity="feed_voltage")).judge()) == []


@pytest.mark.parametrize(
    ("book", "editions", "caution"),
    [
        (None, (edition(limit()),), "no_book"),
        ("house", (), "no_edition_in_force"),
        ("house", (edition(limit(), effective_on=date(2026, 6, 2)),), "no_edition_in_force"),
        (
            "house",
            (edition(limit(applies=Applicability(circuit_kinds=frozenset({CircuitKind.CODED})))),),
            "no_limit_applies",
        ),
    ],
)
def test_what_is_judged_by_nothing_is_not_shown(book: str | None, editions: Any, caution: str) -> None:
    case = Case()
    case.visit(DAY, 0.9)
    status = judge(case.facts(), book, editions, AS_OF)
    assert (status.compliance, status.verdicts, cautions(status)) == (Compliance.NOT_SHOWN, (), [caution])
    assert status.edition == ("1" if caution == "no_limit_applies" else None)


@pytest.mark.parametrize("state", ["planned", "out_of_use", "recovered"])
def test_what_is_not_in_use_is_not_judged(state: str) -> None:
    case = Case(limit(), task(), state=state)
    case.visit(DAY, 0.1, rail="rusty")
    status = case.judge()
    assert status.state is SectionState(state)
    assert (status.compliance, status.worst_hazard, status.overdue, status.next_due_on) == (
        None,
        None,
        False,
        None,
    )
    assert cautions(status) == [state]
    assert [one.state for one in status.tasks] == ["not_owed"]
    bookless = judge(case.facts(), None, (), AS_OF)
    assert (bookless.tasks, bookless.edition, bookless.holds_until) == ((), None, None)


def test_the_record_and_the_day_are_named() -> None:
    status = Case(limit(), version=7).judge()
    assert (status.section, status.section_version, status.as_of, status.book) == ("TV114", 7, AS_OF, "house")


def test_overdue_and_the_next_due() -> None:
    case = Case(task(), task(task="other", interval="P1Y"), commissioned_on=date(2026, 1, 1))
    status = case.judge()
    assert (status.overdue, status.next_due_on) == (True, date(2026, 4, 1))
    assert case.judge(date(2026, 3, 31)).overdue is False


def held(case: Case, as_of: date = AS_OF, *more: Any, next_version_on: date | None = None) -> date | None:
    facts = replace(case.facts(), next_version_on=next_version_on)
    return judge(facts, "house", (case.edition, *more), as_of).holds_until


def test_a_status_without_dates_holds_for_ever() -> None:
    assert held(Case()) is None


@pytest.mark.parametrize(
    ("as_of", "expected"),
    [
        pytest.param(date(2026, 3, 1), date(2026, 3, 31), id="until-it-falls-due"),
        pytest.param(date(2026, 4, 1), date(2026, 4, 15), id="until-it-is-overdue"),
        pytest.param(date(2026, 4, 15), date(2026, 4, 15), id="on-its-last-day"),
        pytest.param(date(2026, 4, 16), None, id="overdue-for-ever"),
    ],
)
def test_a_task_changes_twice(as_of: date, expected: date | None) -> None:
    assert held(Case(task(grace="P14D"), commissioned_on=date(2026, 1, 1)), as_of) == expected


def test_due_at_once_with_no_date_changes_no_more() -> None:
    assert held(Case(task(), commissioned_on=None)) is None


def test_until_another_edition_or_version() -> None:
    later = edition(edition="2", effective_on=date(2026, 7, 1))
    assert held(Case(), AS_OF, later) == date(2026, 6, 30)
    assert held(Case(), AS_OF, replace(later, state=EditionState.DRAFT)) is None
    assert held(Case(), AS_OF, later, next_version_on=date(2026, 6, 20)) == date(2026, 6, 19)
    assert held(Case(state="out_of_use"), AS_OF, later) == date(2026, 6, 30)


@pytest.mark.parametrize(
    ("given", "expected"),
    [
        ({}, date(2026, 6, 30)),
        ({"ended_on": date(2026, 6, 10)}, date(2026, 6, 9)),
        ({"from_on": date(2026, 6, 5)}, date(2026, 6, 4)),
        ({"until_on": date(2026, 5, 31)}, None),
        ({"until_on": AS_OF}, AS_OF),
        ({"until_on": date.max}, date.max),
    ],
)
def test_until_a_concession_begins_or_ends(given: dict[str, Any], expected: date | None) -> None:
    case = Case()
    case.concessions = (concession(**given),)
    assert held(case) == expected


def test_until_a_calibration_already_stored_counts() -> None:
    good = calibration(date(2026, 1, 1), date(2027, 1, 1))
    bad = [
        calibration(day, date(2027, 1, 1), "out_of_tolerance") for day in (date(2026, 6, 9), date(2026, 7, 9))
    ]
    case = Case()
    case.visit(DAY, 0.7)
    case.instruments = INSTRUMENTS | {"SB": Instrument("SB", (good, *bad))}
    assert held(case) == date(2026, 6, 8)
    assert codes(case.verdict(as_of=date(2026, 6, 9))) == ["instrument_out_of_tolerance"]
