"""Calendar arithmetic against `whenever`, a well-kept library apart from the one that the rules use.

ISO 8601 gives the form of durations and leaves open what a day is that the month lacks; both libraries
take the month's last.
"""

from __future__ import annotations

from datetime import date

import pytest
from hypothesis import given
from hypothesis import strategies as st
from whenever import Date

from service.rules.intervals import add

any_day = st.dates(date(1900, 1, 1), date(2200, 1, 1))


@given(any_day, st.integers(0, 40), st.integers(0, 60), st.integers(0, 60), st.integers(0, 400))
def test_durations(day: date, years: int, months: int, weeks: int, days: int) -> None:
    other = Date.parse_iso(day.isoformat()).add(years=years, months=months, weeks=weeks, days=days)
    assert add(day, f"P{years}Y{months}M{weeks}W{days}D") == other.to_stdlib()


@pytest.mark.parametrize("duration", ["P3M", "P2M", "P1Y", "P4Y", "P10Y", "P14D", "P1W", "P12M"])
@given(any_day)
def test_one_unit_alone(duration: str, day: date) -> None:
    count, unit = int(duration[1:-1]), {"Y": "years", "M": "months", "W": "weeks", "D": "days"}[duration[-1]]
    other = Date.parse_iso(day.isoformat()).add(**{unit: count})
    assert add(day, duration) == other.to_stdlib()


@given(any_day)
def test_never_step_by_step(day: date) -> None:
    """Three months at once are never before three steps of one, and later across a short month."""
    stepped = add(add(add(day, "P1M"), "P1M"), "P1M")
    assert add(day, "P3M") >= stepped
    assert add(date(2026, 1, 31), "P2M") == date(2026, 3, 31) > add(add(date(2026, 1, 31), "P1M"), "P1M")
