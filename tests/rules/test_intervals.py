"""When tasks are due: what does them, what shortens, defers or calls for them at once."""

from __future__ import annotations

from datetime import date, timedelta
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.rules.facts import EquipmentItem
from service.rules.intervals import TaskStatus, add, days_overdue
from service.rules.limits import Applicability, Shortened, YearlyWindow
from service.rules.words import Sleepers, TaskState, Work
from support.rule_cases import AS_OF, Case, codes, concession, limit, reading, task

DONE = {"shunt_test": "done"}


def status(case: Case, as_of: date = AS_OF) -> TaskStatus:
    (found,) = case.judge(as_of).tasks
    return found


@pytest.mark.parametrize(
    "bad", ["", "P", "3M", "P3", "PT3H", "P1.5M", "-P3M", "P-3M", "P3D2M", "P10000Y", "P٣M"]
)
def test_what_is_no_duration(bad: str) -> None:
    with pytest.raises(ValueError, match="not a duration"):
        add(AS_OF, bad)


def test_weeks_and_mixed_durations() -> None:
    assert add(date(2026, 1, 31), "P1M1W1D") == date(2026, 3, 8)
    assert add(date(2026, 1, 1), "P2W") == date(2026, 1, 15)


@pytest.mark.parametrize("duration", ["P1Y", "P99999D"])
def test_beyond_the_calendar_never_comes(duration: str) -> None:
    assert add(date(9999, 1, 1), duration) == date.max


@pytest.mark.parametrize(
    ("claim", "readings", "reason"),
    [
        pytest.param("done", ["relay_end"], "not_measured", id="a-point-short"),
        pytest.param("partly", ["relay_end", "feed_end"], "partly", id="partly"),
    ],
)
def test_incomplete(claim: str, readings: list[str], reason: str) -> None:
    case = Case(task(needs=("drop_shunt",)))
    case.visit(date(2026, 4, 1), 0.7, tasks=DONE)
    case.visit(date(2026, 5, 1), 0.7, points=readings, tasks={"shunt_test": claim})
    case.visit(date(2026, 5, 2), tasks={"shunt_test": "not_done"})
    found = status(case)
    assert (found.state, found.visit, codes(found)) == (TaskState.INCOMPLETE, "v0", [reason])


def test_an_instrument_that_cannot_be_relied_on_leaves_it_incomplete() -> None:
    case = Case(task(needs=("drop_shunt",)))
    case.visit(date(2026, 5, 1), 0.7, tasks=DONE, instrument="XX")
    found = status(case)
    assert (found.state, codes(found)) == (TaskState.OVERDUE, ["unknown_instrument"])
    case.readings += [
        reading("v0", 0.7, test_point=point, stage="as_found") for point in ("relay_end", "feed_end")
    ]
    assert status(case).last_done_on == date(2026, 5, 1)


def test_what_is_needed_anywhere() -> None:
    case = Case(task(needs_anywhere=("insulation_resistance",)))
    case.visit(date(2026, 5, 1), tasks=DONE)
    assert codes(status(case)) == ["not_measured"]
    case.readings.append(reading("v0", 1e6, quantity="insulation_resistance", test_point="feed_end"))
    assert status(case).state is TaskState.CURRENT


def test_needs_at_no_required_point_are_not_shown() -> None:
    case = Case(task(needs=("drop_shunt",)), required_test_points=())
    case.visit(date(2026, 5, 1), 0.7, tasks=DONE)
    assert codes(status(case)) == ["attribute_missing"]


def test_readings_of_another_visit_do_not_do_it() -> None:
    case = Case(task(needs=("drop_shunt",)))
    case.visit(date(2026, 4, 30), 0.7)
    case.visit(date(2026, 5, 1), tasks=DONE)
    case.visit(date(2026, 5, 2), 0.7)
    assert codes(status(case)) == ["not_measured", "not_measured"]


def test_never_done_and_nothing_says_since_when() -> None:
    found = status(Case(task(), commissioned_on=None))
    assert (found.state, found.due_on, codes(found)) == (TaskState.DUE, None, ["attribute_missing"])


def test_without_an_interval() -> None:
    case = Case(task(interval=None))
    case.visit(date(2026, 5, 1), tasks=DONE)
    found = status(case)
    assert (found.state, found.due_on, found.last_done_on) == (TaskState.NO_INTERVAL, None, date(2026, 5, 1))


def test_a_task_that_may_not_apply_is_owed_with_its_reason() -> None:
    case = Case(task(applies=Applicability(sleepers=frozenset({Sleepers.WOOD}))))
    case.visit(date(2026, 5, 1), tasks=DONE)
    assert (status(case).state, codes(status(case))) == (TaskState.CURRENT, ["attribute_missing"])


AFTER = {"after_work": frozenset({Work.RELAY_CHANGED})}


def test_due_at_once_after_work() -> None:
    case = Case(task(**AFTER))
    case.visit(date(2026, 4, 1), tasks=DONE)
    case.visit(date(2026, 5, 1), work=["relay_changed"])
    case.visit(date(2026, 5, 3), work=["relay_changed"])
    found = status(case, date(2026, 5, 1))
    assert (found.state, found.due_on) == (TaskState.DUE, date(2026, 5, 1))
    assert status(case).state is TaskState.OVERDUE


@pytest.mark.parametrize("interval", [None, "P3M"])
def test_done_in_the_visit_of_the_work_counts(interval: str | None) -> None:
    case = Case(task(interval=interval, **AFTER))
    case.visit(date(2026, 5, 1), work=["relay_changed"], tasks=DONE)
    assert status(case).state is TaskState.CURRENT


def test_only_after_such_work() -> None:
    case = Case(task(interval=None, **AFTER))
    case.visit(date(2026, 5, 1), work=["tamped"])
    assert (status(case).state, status(case).due_on) == (TaskState.CURRENT, None)
    case.visit(date(2026, 5, 2), tasks={"shunt_test": "partly"})
    assert status(case).state is TaskState.INCOMPLETE
    case.visit(date(2026, 5, 3), work=["relay_changed"])
    assert (status(case).state, status(case).due_on) == (TaskState.OVERDUE, date(2026, 5, 3))


def fitted(**given: Any) -> Case:
    item = EquipmentItem(**({"serial": "R-1", "fitted_on": date(2026, 4, 1), "tested_on": None} | given))
    return Case(task(interval="P1Y", item="relay"), items={"relay": item})


def test_only_this_item_counts() -> None:
    case = fitted()
    case.visit(date(2026, 3, 31), tasks=DONE)
    assert (status(case).state, status(case).due_on) == (TaskState.NEVER_DONE, date(2027, 4, 1))
    case.visit(date(2026, 4, 1), tasks=DONE)
    assert (status(case).state, status(case).visit) == (TaskState.CURRENT, "v1")


def test_a_later_test_in_place_outweighs_the_bench() -> None:
    case = fitted(tested_on=date(2026, 3, 1))
    assert (status(case).due_on, status(case).visit) == (date(2027, 3, 1), None)
    case.visit(date(2026, 5, 1), tasks=DONE)
    assert (status(case).due_on, status(case).visit) == (date(2027, 5, 1), "v0")


@pytest.mark.parametrize("case", [fitted(serial=None), Case(task(interval="P99Y", item="relay"))])
def test_an_item_without_a_serial_is_said(case: Case) -> None:
    assert codes(status(case)) == ["attribute_missing"]
    assert "relay" in status(case).reasons[0].reason


def test_an_item_of_unknown_age_runs_from_commissioning() -> None:
    assert status(fitted(fitted_on=None)).due_on == date(2021, 1, 1)


WINDOW = task(interval=None, window=YearlyWindow((5, 1), (9, 30)))


@pytest.mark.parametrize(
    ("done", "due"),
    [
        pytest.param(None, date(2020, 9, 30), id="never"),
        pytest.param(date(2025, 5, 1), date(2026, 9, 30), id="first-day"),
        pytest.param(date(2025, 9, 30), date(2026, 9, 30), id="last-day"),
        pytest.param(date(2026, 5, 20), date(2027, 9, 30), id="this-year"),
    ],
)
def test_once_within_each_window(done: date | None, due: date) -> None:
    case = Case(WINDOW)
    if done is not None:
        case.visit(done, tasks=DONE)
    assert status(case).due_on == due


@pytest.mark.parametrize(
    ("commissioned", "due"),
    [
        (date(2026, 3, 1), date(2026, 9, 30)),
        (date(2026, 6, 1), date(2026, 9, 30)),
        (date(2026, 10, 1), date(2027, 9, 30)),
    ],
)
def test_the_first_window_owed(commissioned: date, due: date) -> None:
    assert status(Case(WINDOW, commissioned_on=commissioned)).due_on == due


def test_outside_the_window_it_does_not_count() -> None:
    case = Case(WINDOW)
    case.visit(date(2025, 6, 1), tasks=DONE)
    case.visit(date(2026, 4, 30), tasks=DONE)
    found = status(case)
    assert (found.state, found.last_done_on, codes(found)) == (
        TaskState.INCOMPLETE,
        date(2025, 6, 1),
        ["outside_window"],
    )


def test_a_window_that_ends_on_the_leap_day() -> None:
    case = Case(task(interval=None, window=YearlyWindow((1, 1), (2, 29))), commissioned_on=date(2025, 1, 1))
    assert status(case).due_on == date(2025, 2, 28)


@pytest.mark.parametrize(
    ("value", "comparison", "interval"),
    [
        (4e5, "eq", "P1Y"),
        (5e5, "eq", "P10Y"),
        (5e5, "ge", "P10Y"),
        (4e5, "ge", "P1Y"),
        (9e5, "lt", "P1Y"),
    ],
)
def test_shortened_unless_known_to_be_over(value: float, comparison: str, interval: str) -> None:
    case = Case(task(interval="P10Y", shortened=Shortened("insulation_resistance", 5e5, "P1Y")))
    assert status(case).interval == "P10Y"
    case.visit(
        date(2026, 5, 1), value, quantity="insulation_resistance", points=["feed_end"], comparison=comparison
    )
    case.readings.append(reading("v0", 9e5, quantity="insulation_resistance"))
    assert status(case).interval == interval


def deferred(until: date, **given: Any) -> Case:
    case = Case(task(grace="P10D"))
    case.visit(date(2026, 2, 1), tasks=DONE)
    case.concessions = (concession(limit=None, task="shunt_test", until_on=until, **given),)
    return case


def test_a_concession_defers_and_lapses() -> None:
    case = deferred(date(2026, 6, 15))
    found = status(case)
    assert (found.state, found.due_on, found.grace_until_on) == (
        TaskState.DUE,
        date(2026, 5, 1),
        date(2026, 6, 15),
    )
    assert found.concession == "c1"
    after = status(case, date(2026, 6, 16))
    assert (after.state, after.grace_until_on, after.concession) == (
        TaskState.OVERDUE,
        date(2026, 5, 11),
        None,
    )


def test_a_concession_that_ends_before_the_grace_changes_nothing() -> None:
    found = status(deferred(date(2026, 5, 5)), date(2026, 5, 5))
    assert (found.grace_until_on, found.concession) == (date(2026, 5, 11), None)


def test_a_concession_defers_nothing_that_has_no_date() -> None:
    case = deferred(date(2026, 6, 15))
    case.visits, case.record = [], Case(commissioned_on=None).record
    assert (status(case).state, status(case).concession) == (TaskState.DUE, None)


def test_days_overdue() -> None:
    case = deferred(date(2026, 5, 5))
    assert [
        days_overdue(status(case, day), day) for day in (date(2026, 5, 11), date(2026, 5, 12), AS_OF)
    ] == [0, 1, 21]


@given(st.dates(date(2020, 1, 1), date(2030, 1, 1)), st.integers(0, 40), st.integers(1, 24))
def test_overdue_begins_the_day_after_the_grace(done: date, grace: int, months: int) -> None:
    case = Case(
        limit(), task(interval=f"P{months}M", grace=f"P{grace}D" if grace else None), commissioned_on=done
    )
    due = add(done, f"P{months}M")
    states = [status(case, due + timedelta(days=days)).state for days in (-1, 0, grace, grace + 1)]
    assert states == [TaskState.NEVER_DONE, TaskState.DUE, TaskState.DUE, TaskState.OVERDUE]
