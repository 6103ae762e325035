"""Statuses of days and of knowledge gone by, the roll at midnight, and the summaries kept for lists."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, date, datetime, timedelta
from typing import Any
from zoneinfo import ZoneInfo

import pytest
from visits.field import (
    NOW,
    SECOND,
    TASKS,
    Field,
    calibrated,
    drops,
    furnish,
    instrument,
    issue_book,
    opened,
    reading,
    visit,
    visit_id,
    wetness,
)

from service.application import concessions, depots, instruments, section_lists, sections, status
from service.application.section_content import Content
from service.errors import NotAcceptableError, NotFoundError
from service.rules.status import Status
from service.rules.words import CalibrationResult, Compliance, VerdictWord

DAY = timedelta(days=1)
MAY = datetime(2026, 5, 1, 9, tzinfo=UTC)


def volts(value: float, **changes: Any) -> dict[str, Any]:
    return reading("relay_voltage", value, **changes)


def summary(found: Status) -> dict[str, Any]:
    """What a row of `status` keeps of it."""
    names = ("section", "as_of", "compliance", "overdue", "worst_hazard", "next_due_on", "holds_until")
    return {name: getattr(found, name) for name in names}


def test_what_was_answered_then_is_answered_as_known_then(field: Field) -> None:
    """Everything that can move a status, each at an instant of its own."""
    answered: list[tuple[datetime, Status]] = []
    permission = concessions.Content(
        section="TV114",
        limit="drop_shunt",
        task=None,
        test_point=None,
        allowed_min=0.3,
        allowed_max=None,
        conditions="until the feed is renewed",
        protection="the section is swept before every train",
        asked_by="T. Okafor",
        approved_by=None,
        from_on=NOW.date(),
        until_on=NOW.date() + 90 * DAY,
    )
    good, bad = (
        calibrated(date(2026, 5, 2), date(2027, 5, 2)),
        calibrated(date(2026, 6, 16), date(2027, 6, 16)),
    )
    bad = replace(bad, result=CalibrationResult.OUT_OF_TOLERANCE)
    new = instrument("meter", good)
    done = [{"task": "shunt_test", "done": "done"}]
    steps: list[tuple[int, Any]] = [
        (0, lambda: field.store(visit(1, MAY, *drops(0.7), volts(2.1), tasks=done))),
        (0, lambda: field.store(visit(2, NOW, *drops(0.4), volts(2.0, instrument="VM-9"), **wetness("wet")))),
        (0, lambda: field.store(visit(3, NOW - DAY, *drops(0.3), **wetness("dry")), actor=SECOND)),
        (1, lambda: field.write(instruments.put, "VM-9", None, new)),
        (0, lambda: field.write(concessions.grant, visit_id(900), permission)),
        (2, lambda: field.write(instruments.put, "VM-9", 1, instrument("meter", good, bad))),
        (0, lambda: field.void(2)),
        (1, lambda: field.store(visit(4, NOW - DAY, *drops(0.9), replaces=visit_id(3)))),
        (0, lambda: field.write(concessions.end, visit_id(900), "feed renewed")),
        (30, lambda: edit(field, length_m=800.0)),
        (0, lambda: field.void(4, actor=SECOND)),
    ]
    for days, act in steps:
        field.clock.move(days=days, minutes=1)
        act()
        answered.append((field.clock.now, field.judged().status))
        field.clock.move(minutes=1)
    assert len({str(verdict) for _, found in answered for verdict in found.verdicts}) > 10
    field.clock.move(days=200)
    for known_at, found in answered:
        assert field.judged(found.as_of, known_at).status == found
        assert field.judged(found.as_of, known_at + timedelta(seconds=30)).status == found


def edit(field: Field, **changes: Any) -> None:
    recorded = field.read(sections.get, "TV114")
    content: Content = replace(recorded.content, valid_from_on=None, **changes)
    field.write(sections.edit, "TV114", recorded.version, content)


def test_as_of_a_day_only_what_had_been_measured_by_then(field: Field) -> None:
    field.store(visit(1, MAY, *drops(0.4)), visit(2, MAY + 3 * DAY, *drops(0.7)))
    words = [field.verdict(as_of=(MAY + by * DAY).date()).verdict for by in range(-1, 5)]
    assert words == ["not_measured", "outside", "outside", "outside", "within", "within"]
    with pytest.raises(NotAcceptableError):
        field.judged(NOW.date() + DAY)
    with pytest.raises(NotAcceptableError):
        field.judged(None, NOW + timedelta(seconds=1))
    with pytest.raises(NotFoundError):
        field.judged(date(2025, 12, 31))
    with pytest.raises(NotFoundError):
        field.judged(section="TV999")


def test_a_status_holds_until_the_day_before_it_changes(field: Field) -> None:
    """Judged on its last day it is the same, and on the next it is another."""
    done = [{"task": "shunt_test", "done": "done"}]
    field.store(visit(1, MAY, *drops(0.7), volts(2.1), tasks=done))
    before = field.judged().status
    assert (before.next_due_on, before.holds_until) == (date(2026, 8, 1), date(2026, 7, 31))
    changed = 0
    for _ in range(100):
        field.clock.move(days=1)
        now = field.judged().status
        if before.holds_until is not None and now.as_of > before.holds_until:
            assert now.tasks != before.tasks
            changed += 1
        else:
            assert replace(now, as_of=before.as_of) == before
        before = now
    assert changed == len(TASKS)


def roll(field: Field) -> None:
    status.roll_due(field.service, field.depot)


def test_reading_the_list_rolls_what_midnight_changed(field: Field) -> None:
    done = [{"task": "shunt_test", "done": "done"}]
    field.store(visit(1, MAY, *drops(0.7), volts(2.1), tasks=done))
    field.clock.now = datetime(2026, 8, 1, 23, 59, tzinfo=UTC)
    roll(field)
    assert field.kept() == summary(field.judged().status)
    assert not field.kept()["overdue"]
    field.clock.move(minutes=1)
    assert field.kept()["as_of"] == date(2026, 8, 1)
    roll(field)
    assert field.kept() == summary(field.judged().status)
    assert field.kept()["overdue"]
    (row, _) = field.read(section_lists.page, section_lists.Filters(), after=None, most=9)
    assert (row.section.section, row.status.overdue) == ("TV114", True)


ZONES = [
    ("Europe/London", datetime(2026, 10, 24, 23, 0, tzinfo=UTC)),  # midnight of the day with 25 hours
    ("Europe/London", datetime(2026, 10, 26, 0, 0, tzinfo=UTC)),  # the midnight that ends it
    ("Pacific/Auckland", datetime(2026, 9, 26, 12, 0, tzinfo=UTC)),  # midnight of the day with 23 hours
    ("Pacific/Auckland", datetime(2026, 9, 27, 11, 0, tzinfo=UTC)),
    ("America/Santiago", datetime(2026, 9, 6, 4, 0, tzinfo=UTC)),  # a day that begins at 01:00
]


@pytest.mark.parametrize(("zone", "midnight"), ZONES)
def test_the_day_changes_at_the_depots_own_midnight(database_url: str, zone: str, midnight: datetime) -> None:
    """Midnights by `zoneinfo` from the system's or the `tzdata` package's copy of the tz database."""
    assert midnight.astimezone(ZoneInfo(zone)).hour in (0, 1)
    service, clock = opened(database_url)
    issue_book(service, clock)
    field = furnish(Field(service, clock), zone)
    today = midnight.astimezone(ZoneInfo(zone)).date()
    clock.now = midnight - timedelta(minutes=1)
    done = [{"task": "shunt_test", "done": "done"}]
    field.store(visit(1, clock.now, *drops(0.7), volts(2.1), tasks=done))
    assert field.judged().status.tasks[0].last_done_on == today - DAY
    clock.now = midnight
    field.store(visit(2, clock.now, *drops(0.7), volts(2.2), tasks=done))
    roll(field)
    assert field.judged().status.tasks[0].last_done_on == today
    assert field.kept() == summary(field.judged().status)
    assert field.judged(today - DAY).status.tasks[0].last_done_on == today - DAY
    assert field.verdict("relay_voltage", as_of=today - DAY).measured == 2.1
    service.database.close()


BEFORE_MIDNIGHT = datetime(2026, 6, 15, 23, 58, tzinfo=UTC)


def test_a_visit_ahead_of_midnight_counts_from_its_day_on(field: Field) -> None:
    field.store(visit(1, MAY, volts(2.1), *drops(0.7)))
    field.clock.now = BEFORE_MIDNIGHT
    ahead = BEFORE_MIDNIGHT + timedelta(minutes=4)
    (outcome,) = field.post(visit(2, ahead, volts(1.5), *drops(0.4)))
    assert outcome.status is not None
    assert (outcome.status.compliance, outcome.status.holds_until) == (Compliance.YES, ahead.date() - DAY)
    assert outcome.cautions[0].code == "protect_and_report"
    assert field.kept() == summary(field.judged().status) == summary(outcome.status)
    assert field.verdict("relay_voltage").measured == 2.1
    field.clock.now = ahead
    roll(field)
    assert field.kept()["compliance"] == Compliance.NO
    assert field.kept() == summary(field.judged().status)
    assert field.verdict("relay_voltage").measured == 1.5


def test_a_correction_ahead_of_midnight_takes_back_at_once(field: Field) -> None:
    field.store(visit(1, MAY, volts(2.1), *drops(0.7)))
    field.clock.now = BEFORE_MIDNIGHT
    ahead = BEFORE_MIDNIGHT + timedelta(minutes=4)
    (outcome,) = field.post(visit(2, ahead, *drops(0.8), replaces=visit_id(1)))
    assert outcome.status == field.judged().status
    assert field.judged().status == field.judged(None, field.clock.now).status
    assert field.verdict("relay_voltage").verdict == VerdictWord.NOT_MEASURED
    field.clock.now = ahead
    assert field.judged().status == field.judged(None, field.clock.now).status
    assert field.verdict().measured == 0.8


def test_moved_west_over_the_date_line_a_depot_still_takes_visits(field: Field) -> None:
    """The section was recorded on a day that has not come yet where the depot now is."""
    field.clock.now = datetime(2026, 6, 15, 11, tzinfo=UTC)
    terms = depots.Terms("An invented depot", "Pacific/Kiritimati", "monday", 5)
    field.write(depots.edit, 1, terms)
    field.section("TV200", valid_from_on=date(2026, 6, 16))
    field.write(depots.edit, 2, replace(terms, time_zone="Pacific/Honolulu"))
    (outcome,) = field.post(visit(1, field.clock.now, volts(2.1), section="TV200"))
    assert (outcome.outcome, outcome.status) == ("stored", None)
    with pytest.raises(NotFoundError):
        field.judged(section="TV200")
    field.clock.move(days=1)
    found = field.judged(section="TV200").status.verdicts
    assert [one.measured for one in found if one.quantity == "relay_voltage"] == [2.1]
