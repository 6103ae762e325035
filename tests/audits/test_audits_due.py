"""When a depot's weekly hour has come: by its own calendar and clock, also where clocks change."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import UTC, date, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.app import make_service
from service.application import audits, depots
from service.application.context import Service
from service.jobs import tick
from service.settings import Settings
from support.api import Clock
from support.world import ENGINEER

# Weekday 0 is Monday. Zones and their changes are those of the IANA data base.
DAYS = [
    ("2026-11-02T04:59:00Z", "Europe/London", 0, 5, "2026-10-26"),
    ("2026-11-02T05:00:00Z", "Europe/London", 0, 5, "2026-11-02"),
    ("2026-11-08T23:59:00Z", "Europe/London", 0, 5, "2026-11-02"),
    ("2026-07-06T03:59:00Z", "Europe/London", 0, 5, "2026-06-29"),  # 05:00 is 04:00 UTC in summer
    ("2026-07-06T04:00:00Z", "Europe/London", 0, 5, "2026-07-06"),
    ("2026-11-01T15:00:00Z", "Pacific/Auckland", 0, 4, "2026-11-02"),  # a day ahead, UTC+13
    ("2026-11-02T08:59:00Z", "America/Anchorage", 6, 23, "2026-11-01"),  # still Sunday, UTC-9
    ("2026-11-02T07:59:00Z", "America/Anchorage", 6, 23, "2026-10-25"),
    ("2026-11-01T18:30:00Z", "Asia/Kolkata", 0, 0, "2026-11-02"),  # UTC+5:30
    ("2026-11-01T18:29:00Z", "Asia/Kolkata", 0, 0, "2026-10-26"),
    # In London 01:00 to 02:00 is left out on 29 March 2026: the hour that is not is taken as past.
    ("2026-03-29T00:59:00Z", "Europe/London", 6, 1, "2026-03-22"),
    ("2026-03-29T01:00:00Z", "Europe/London", 6, 1, "2026-03-29"),
    # and comes twice on 25 October 2026: it counts from the first.
    ("2026-10-24T23:59:00Z", "Europe/London", 6, 1, "2026-10-18"),
    ("2026-10-25T00:00:00Z", "Europe/London", 6, 1, "2026-10-25"),
    ("2026-10-25T01:30:00Z", "Europe/London", 6, 1, "2026-10-25"),
    # Samoa left out the whole of Friday 30 December 2011.
    ("2011-12-31T12:00:00Z", "Pacific/Apia", 3, 12, "2011-12-29"),
]


@pytest.mark.parametrize(("now", "zone", "weekday", "hour", "expected"), DAYS)
def test_the_day_of_the_last_weekly_hour(now: str, zone: str, weekday: int, hour: int, expected: str) -> None:
    found = audits.last_audit_day(datetime.fromisoformat(now), zone, weekday, hour)
    assert found.isoformat() == expected


@given(
    minutes=st.integers(0, 35 * 366 * 24 * 60),
    zone=st.sampled_from(("UTC", "Europe/London", "Australia/Lord_Howe", "America/St_Johns", "Asia/Kolkata")),
    weekday=st.integers(0, 6),
    hour=st.integers(0, 23),
)
def test_it_is_the_newest_such_day_whose_hour_is_not_ahead(
    minutes: int, zone: str, weekday: int, hour: int
) -> None:
    """By looking at each of the days before, one after the other, from any minute of 2000 to 2035."""
    now = datetime(2000, 1, 1, tzinfo=UTC) + timedelta(minutes=minutes)
    local = now.astimezone(ZoneInfo(zone))
    day = local.date()
    while day.weekday() != weekday or (day == local.date() and hour > local.hour):
        day -= timedelta(days=1)
    assert audits.last_audit_day(now, zone, weekday, hour) == day


@pytest.fixture
def clock() -> Clock:
    return Clock(datetime(2026, 10, 7, 12, tzinfo=UTC))  # a Wednesday


@pytest.fixture
def service(sqlite_url: str, clock: Clock) -> Iterator[Service]:
    """Three depots made at the same moment, their weekly hours hours apart."""
    made = make_service(Settings(database_url=sqlite_url), clock)
    terms = {
        "east": depots.Terms("East", "Pacific/Auckland", "monday", 5),
        "mid": depots.Terms("Mid", "Europe/London", "monday", 5),
        "west": depots.Terms("West", "America/Anchorage", "monday", 5),
    }
    with made.unit_of_work(ENGINEER) as tx:
        for name, said in terms.items():
            depots.create(tx, name, said)
    yield made
    made.database.close()


def due(service: Service) -> list[tuple[str, date]]:
    with service.read() as connection:
        return audits.due(connection, service.clock())


def test_a_new_depot_owes_no_audit_of_the_days_before_it(service: Service, clock: Clock) -> None:
    assert due(service) == []
    clock.now = datetime(2026, 10, 12, 3, 59, tzinfo=UTC)
    assert due(service) == [("east", date(2026, 10, 12))]
    clock.move(minutes=1)
    assert due(service) == [("east", date(2026, 10, 12)), ("mid", date(2026, 10, 12))]
    clock.move(hours=9)
    assert [depot for depot, _ in due(service)] == ["east", "mid", "west"]


def test_a_week_of_hourly_ticks_makes_each_audit_once(service: Service, clock: Clock) -> None:
    """Across the end of summer time in London and its beginning in New Zealand."""
    made = 0
    clock.now = datetime(2026, 10, 24, 0, 30, tzinfo=UTC)
    tick.run_due(service)
    for _ in range(7 * 24):
        clock.move(hours=1)
        made += tick.run_due(service)
    assert made == 3


def test_a_server_that_was_down_makes_up_for_the_last_hour_only(service: Service, clock: Clock) -> None:
    clock.now = datetime(2026, 11, 18, 12, tzinfo=UTC)
    assert {on for _, on in due(service)} == {date(2026, 11, 16)}
    assert tick.run_due(service) == 3
    assert due(service) == []


def test_an_audit_asked_for_on_the_day_or_later_is_the_one_that_was_due(
    service: Service, clock: Clock
) -> None:
    clock.now = datetime(2026, 10, 12, 20, tzinfo=UTC)
    audits.run(service, ENGINEER, "mid", date(2026, 10, 12))
    assert [depot for depot, _ in due(service)] == ["east", "west"]
    audits.run(service, ENGINEER, "east")  # where it is the 13th
    assert [depot for depot, _ in due(service)] == ["west"]
    audits.run(service, ENGINEER, "west", date(2026, 10, 11))  # the day before does not do
    assert [depot for depot, _ in due(service)] == ["west"]


def test_another_hour_holds_from_now(service: Service, clock: Clock) -> None:
    clock.now = datetime(2026, 10, 12, 20, tzinfo=UTC)
    tick.run_due(service)
    with service.unit_of_work(ENGINEER) as tx:
        depots.edit(tx, "mid", 1, depots.Terms("Mid", "Europe/London", "wednesday", 22))
    assert due(service) == []
    clock.now = datetime(2026, 10, 14, 21, tzinfo=UTC)
    assert due(service) == [("mid", date(2026, 10, 14))]
