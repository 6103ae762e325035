"""Several at one section or one visit at the same moment, on two connections; and what is remembered."""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, date, datetime, timedelta
from threading import Barrier, Thread
from typing import Any

import pytest
from visits.field import (
    NOW,
    SECOND,
    TECHNICIAN,
    Field,
    calibrated,
    draft_of,
    drops,
    instrument,
    opened,
    reading,
    visit,
    visit_id,
)

from service.application import depots, instruments, status, visits
from service.errors import ConflictError, UnavailableError
from service.records import journal
from service.records.unit_of_work import Actor
from service.rules.words import VerdictWord

MAY = datetime(2026, 5, 3, 9, tzinfo=UTC)


def at_once(*acts: Callable[[], Any]) -> list[Any]:
    """Run each in a thread of its own, all begun together; what each returned or raised."""
    barrier = Barrier(len(acts))
    found: list[Any] = [None] * len(acts)

    def run(place: int, act: Callable[[], Any]) -> None:
        barrier.wait(timeout=10)
        try:
            found[place] = act()
        except (ConflictError, UnavailableError) as error:
            found[place] = error

    threads = [Thread(target=run, args=(place, act)) for place, act in enumerate(acts)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(timeout=30)
    return found


def check_kept(field: Field) -> None:
    """What is kept is what is judged by all readings."""
    now = field.judged().status
    assert field.judged(now.as_of, field.clock.now).status == now
    kept = field.kept()
    assert kept == {name: getattr(now, name) for name in kept}
    rows = field.latest()
    field.write(visits.rebuild_latest)
    assert field.latest() == rows


def test_one_visit_from_two_devices_is_stored_once(field: Field) -> None:
    for number in range(10):
        body = visit(number, MAY, *drops(0.7))
        found = at_once(lambda: field.post(body)[0].outcome, lambda: field.post(body)[0].outcome)  # noqa: B023
        assert sorted(found) == ["already_stored", "stored"]


def test_one_id_for_two_sections_is_stored_once(field: Field) -> None:
    """Two sections are two locks: the key decides, and whoever is second is told to post again."""
    for number in range(10):
        bodies = [visit(number, MAY, *drops(0.7), section=name) for name in ("TV114", "TV115")]

        def post(body: dict[str, Any]) -> str:
            try:
                return field.post(body)[0].outcome
            except UnavailableError:
                return field.post(body)[0].outcome

        found = at_once(*(lambda body=body: post(body) for body in bodies))  # type: ignore[misc]
        assert sorted(found) == ["refused", "stored"]


def test_two_devices_at_one_section_are_judged_together(field: Field) -> None:
    for number in range(0, 20, 2):
        when = MAY + timedelta(minutes=number)
        bodies = [
            visit(number, when, reading("relay_voltage", 2.0 + number / 100), *drops(0.7, "feed_end")),
            visit(number + 1, when, reading("relay_voltage", 2.5), *drops(0.7, "relay_end")),
        ]
        found = at_once(*(lambda body=body: field.post(body)[0] for body in bodies))  # type: ignore[misc]
        assert [one.outcome for one in found] == ["stored"] * 2
        last = max(found, key=lambda one: one.sequence)
        assert last.status == field.judged().status
        check_kept(field)


def test_a_visit_and_its_void_and_its_correction_at_once(field: Field) -> None:
    for number in range(0, 40, 4):
        first = visit(number, MAY, reading("relay_voltage", 2.0))
        field.store(first)
        correction = visit(number + 1, MAY, reading("relay_voltage", 2.2), replaces=visit_id(number))
        later = visit(number + 2, MAY + timedelta(days=1), *drops(0.7))
        at_once(
            lambda: field.void(number),  # noqa: B023
            lambda: field.post(correction),  # noqa: B023
            lambda: field.post(later, actor=SECOND),  # noqa: B023
            lambda: field.post(first),  # noqa: B023
        )
        check_kept(field)


def test_two_voids_of_one_visit_are_one(field: Field) -> None:
    field.store(visit(1, MAY, *drops(0.7)))
    found = at_once(*(lambda: field.void(1, Actor("desk", "S. Quill")) for _ in range(2)))
    assert [type(one) for one in found if one is not None] == [ConflictError]
    with field.service.read(snapshot=True) as connection:
        actions = [line["action"] for line in journal.lines(connection, "ashby", subject_kind="visit")]
    assert actions == ["visit_stored", "visit_voided"]


def test_a_calibration_against_a_visit(field: Field) -> None:
    """Whichever is first, the visit is judged by the calibration in the end."""
    bad = calibrated(date(2026, 6, 1), date(2027, 6, 1))
    good = calibrated(date(2025, 12, 1), date(2026, 12, 1))
    for number in range(8):
        name = f"VX-{number}"
        field.write(instruments.put, name, None, instrument("meter"))
        body = visit(number, MAY + timedelta(minutes=number), reading("relay_voltage", 2.1, instrument=name))
        at_once(
            lambda: field.write(instruments.put, name, 1, instrument("meter", good, bad)),  # noqa: B023
            lambda: field.post(body),  # noqa: B023
        )
        assert field.verdict("relay_voltage").verdict == VerdictWord.WITHIN
        check_kept(field)


def test_what_another_process_changed_is_not_remembered_as_it_was(field: Field) -> None:
    """Editions, instruments and the time zone are kept in memory between visits."""
    service, clock = opened(field.service.database.url)
    clock.now = NOW
    second = Field(service, clock)
    body = visit(1, MAY, reading("relay_voltage", 2.1, instrument="VM-9"))
    (outcome,) = field.post(body)
    assert ("unknown_instrument", "/readings/0/instrument") in {(c.code, c.pointer) for c in outcome.cautions}
    second.write(instruments.put, "VM-9", None, instrument("meter", calibrated(MAY.date(), NOW.date())))
    (outcome,) = field.post(visit(2, MAY, reading("relay_voltage", 2.1, instrument="VM-9")))
    assert outcome.status is not None
    assert [v.verdict for v in outcome.status.verdicts if v.quantity == "relay_voltage"] == ["within"]
    terms = depots.Terms("An invented depot", "Pacific/Auckland", "monday", 5)
    field.clock.now = clock.now = datetime(2026, 6, 15, 13, tzinfo=UTC)
    second.write(depots.edit, 1, terms)
    (outcome,) = field.post(visit(3, field.clock.now, *drops(0.7)))
    assert outcome.status is not None
    assert outcome.status.as_of == date(2026, 6, 16)
    service.database.close()


def test_a_visit_that_was_rolled_back_leaves_nothing(field: Field) -> None:
    body = visit(1, MAY, *drops(0.3, stage="as_found"))
    before = field.kept()

    def post_and_fail() -> None:
        with field.service.unit_of_work(TECHNICIAN) as tx:
            assert visits.post(tx, field.depot, [draft_of(body)], None)[0].outcome == "stored"
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        post_and_fail()
    assert (field.kept(), field.latest()) == (before, [])
    field.store(body)
    status.roll_due(field.service, field.depot)
    check_kept(field)
