"""The intervals of 49 CFR, run by the rules: due on the anniversary, overdue the day after.

Clause and standing beside each figure; that what is due on a day is overdue on the next is the
project's own reading.
"""

from __future__ import annotations

from datetime import date, timedelta

import pytest

from service.rules.limits import Shortened
from service.rules.words import TaskState
from support.rule_cases import Case, reading, task


@pytest.mark.parametrize(
    ("interval", "due"),
    [
        pytest.param("P4Y", date(2028, 2, 29), id="234.263-general-read"),
        pytest.param("P2Y", date(2026, 2, 28), id="234.263-ac-vane-dc-polar-soft-iron-read"),
        pytest.param("P12M", date(2025, 2, 28), id="234.263-ac-centrifugal-read"),
        pytest.param("P1M", date(2024, 3, 29), id="234.249-ground-test-read"),
        pytest.param("P3M", date(2024, 5, 29), id="236.107-ground-test-from-memory"),
        pytest.param("P3M", date(2024, 5, 29), id="234.269-cut-out-circuits-read"),
    ],
)
def test_from_the_leap_day(interval: str, due: date) -> None:
    case = Case(task(interval=interval))
    case.visit(date(2024, 2, 29), tasks={"shunt_test": "done"})
    states = [case.judge(due + timedelta(days=days)).tasks[0].state for days in (-1, 0, 1)]
    assert states == [TaskState.CURRENT, TaskState.DUE, TaskState.OVERDUE]


@pytest.mark.parametrize(
    ("ohm", "due"),
    [
        (499e3, date(2027, 5, 10)),
        (500e3, date(2036, 5, 10)),
        (2e6, date(2036, 5, 10)),
    ],
)
def test_236_108_insulation_ten_years_or_one(ohm: float, due: date) -> None:
    """49 CFR 236.108 / 234.267 (from memory): 10 years, 1 year while under 500 kΩ."""
    insulation = task(
        interval="P10Y",
        needs_anywhere=("insulation_resistance",),
        shortened=Shortened("insulation_resistance", 500e3, "P1Y"),
    )
    case = Case(insulation)
    name = case.visit(date(2026, 5, 10), tasks={"shunt_test": "done"})
    case.readings.append(reading(name, ohm, quantity="insulation_resistance"))
    assert case.judge().tasks[0].due_on == due
