"""Voids and replacements: who may, what counts then, and what never goes away."""

from __future__ import annotations

import json
from datetime import UTC, datetime, timedelta
from typing import Any

import pytest
from visits.field import SECOND, TECHNICIAN, Field, drops, reading, visit, visit_id

from service.application import findings, verification, visit_records, visits
from service.errors import ConflictError, NotFoundError, ShuntbookError
from service.records import journal
from service.rules.words import VerdictWord

AT = datetime(2026, 5, 10, 9, tzinfo=UTC)


def volts(value: float, **changes: Any) -> dict[str, Any]:
    return reading("relay_voltage", value, **changes)


def measured(field: Field) -> float | None:
    return field.verdict("relay_voltage").measured


def refused(field: Field, body: dict[str, Any], **words: Any) -> list[tuple[str, str | None]]:
    (outcome,) = field.post(body, **words)
    assert outcome.outcome == "refused"
    assert isinstance(outcome.problem, ShuntbookError)
    return [(fault.code, fault.pointer) for fault in outcome.problem.faults]


def test_a_correction_counts_in_place_of_what_it_corrects(field: Field) -> None:
    field.store(visit(1, AT, volts(2.1), *drops(0.7)))
    field.store(visit(2, AT, volts(2.3), replaces=visit_id(1)))
    assert measured(field) == 2.3
    assert field.verdict().verdict == VerdictWord.NOT_MEASURED
    assert [row[3] for row in field.latest()] == [visit_id(2)]


@pytest.mark.parametrize("order", [(1, 2, 3), (3, 2, 1), (2, 3, 1), (3, 1, 2)])
def test_of_a_chain_of_corrections_only_the_last_counts(field: Field, order: tuple[int, ...]) -> None:
    chain = {
        1: visit(1, AT + timedelta(hours=2), volts(2.1)),
        2: visit(2, AT + timedelta(hours=1), volts(2.2), replaces=visit_id(1)),
        3: visit(3, AT, volts(2.3), replaces=visit_id(2)),
    }
    field.store(*(chain[number] for number in order))
    assert measured(field) == 2.3
    field.void(3)
    assert measured(field) == 2.2
    field.void(2)
    assert measured(field) == 2.1
    field.void(1)
    assert measured(field) is None
    assert field.latest() == []


def test_what_a_void_takes_back_is_the_middle_of_a_chain_too(field: Field) -> None:
    """The middle one voided, the first is no longer replaced by anything that counts."""
    field.store(
        visit(1, AT + timedelta(hours=2), volts(2.1)),
        visit(2, AT, volts(2.2), replaces=visit_id(1)),
        visit(3, AT + timedelta(hours=1), volts(2.3), replaces=visit_id(2)),
    )
    field.void(2)
    assert measured(field) == 2.1


def test_a_correction_dated_later_takes_back_the_days_before(field: Field) -> None:
    field.store(visit(1, AT, volts(2.1)), visit(2, AT + timedelta(days=5), volts(2.3), replaces=visit_id(1)))
    before = AT.date() + timedelta(days=2)
    assert field.verdict("relay_voltage", as_of=before).verdict == VerdictWord.NOT_MEASURED
    status = field.judged(before).status
    assert status.holds_until == AT.date() + timedelta(days=4)


def test_a_visit_of_another_section_is_not_replaced(field: Field) -> None:
    field.store(visit(1, AT, volts(2.1), section="TV115"))
    assert refused(field, visit(2, AT, replaces=visit_id(1))) == [("other_section", "/replaces")]


def test_a_replacement_that_came_first_cannot_reach_into_another_section(field: Field) -> None:
    field.store(visit(2, AT, volts(2.3), replaces=visit_id(1)), visit(1, AT, volts(2.1), section="TV115"))
    assert measured(field) == 2.3
    found = field.judged(section="TV115").status.verdicts
    assert [v.measured for v in found if v.quantity == "relay_voltage"] == [2.1]


def test_no_circle(field: Field) -> None:
    assert refused(field, visit(1, AT, replaces=visit_id(1))) == [("replaces_itself", "/replaces")]
    field.store(visit(2, AT, replaces=visit_id(1)), visit(3, AT, replaces=visit_id(2)))
    assert refused(field, visit(1, AT, replaces=visit_id(3))) == [("replaces_cycle", "/replaces")]
    field.void(2)
    assert refused(field, visit(1, AT, replaces=visit_id(3))) == [("replaces_cycle", "/replaces")]
    outcomes = field.post(visit(4, AT, replaces=visit_id(5)), visit(5, AT, replaces=visit_id(4)))
    assert [outcome.outcome for outcome in outcomes] == ["stored", "refused"]


def test_no_circle_through_a_visit_ahead_of_midnight(field: Field) -> None:
    field.clock.now = datetime(2026, 6, 15, 23, 58, tzinfo=UTC)
    ahead = field.clock.now + timedelta(minutes=4)
    field.store(visit(2, ahead, replaces=visit_id(1)))
    assert refused(field, visit(1, ahead, replaces=visit_id(2))) == [("replaces_cycle", "/replaces")]


FAILURE = drops(0.3, stage="as_found")


def test_a_wrong_side_failure_is_taken_back_by_a_second_holder_only(field: Field) -> None:
    field.store(visit(1, AT, *FAILURE))
    correction = visit(2, AT, *drops(0.7), replaces=visit_id(1))
    assert refused(field, correction) == [("second_holder", "/replaces")]
    with pytest.raises(ConflictError) as alone:
        field.void(1, actor=TECHNICIAN)
    assert alone.value.kind == "second-holder"
    field.store(correction, actor=SECOND)
    assert field.verdict().verdict == VerdictWord.WITHIN
    rows = field.read(findings.page, state=None, section="TV114", kind=None, after=None, most=9)
    assert [(row.kind, row.state) for row in rows] == [("found_outside", "new")] * 2
    field.void(1)
    assert len(field.read(findings.page, state=None, section="TV114", kind=None, after=None, most=9)) == 2


def test_a_batch_does_not_spare_the_second_holder(field: Field) -> None:
    outcomes = field.post(visit(1, AT, *FAILURE), visit(2, AT, *drops(0.7), replaces=visit_id(1)))
    assert [outcome.outcome for outcome in outcomes] == ["stored", "refused"]
    assert field.verdict().verdict == VerdictWord.OUTSIDE


def test_a_failure_that_comes_corrected_already_raises_its_finding_all_the_same(field: Field) -> None:
    """It was taken back before anybody knew of it, so no second holder can be asked any more."""
    field.store(visit(2, AT, *drops(0.7), replaces=visit_id(1)), visit(1, AT, *FAILURE))
    assert field.verdict().verdict == VerdictWord.WITHIN
    rows = field.read(findings.page, state=None, section="TV114", kind=None, after=None, most=9)
    assert [(row.kind, row.visit) for row in rows] == [("found_outside", visit_id(1))] * 2


def test_what_was_left_outside_but_not_found_so_needs_no_second_holder(field: Field) -> None:
    field.store(visit(1, AT, *drops(0.3)), visit(2, AT, *drops(0.7), replaces=visit_id(1)))
    assert field.verdict().verdict == VerdictWord.WITHIN


def test_voiding_keeps_what_was_said_and_who_voided_it(field: Field) -> None:
    field.store(visit(1, AT, volts(2.1)))
    before = field.read(visit_records.get, visit_id(1))
    field.clock.move(minutes=5)
    field.void(1)
    after = field.read(visit_records.get, visit_id(1))
    voided = {
        "voided_at": "2026-06-15T09:05:00.000000Z",
        "voided_by": SECOND.holder,
        "why": "read at another track circuit",
    }
    assert after == before | {"voided": voided}
    with pytest.raises(ConflictError) as again:
        field.void(1)
    assert again.value.kind == "already-void"
    with pytest.raises(NotFoundError):
        field.void(2)


def test_a_voided_visit_sent_again_is_stored_already_and_stays_void(field: Field) -> None:
    body = visit(1, AT, volts(2.1))
    field.store(body)
    field.void(1)
    (outcome,) = field.post(body)
    assert outcome.outcome == "already_stored"
    assert measured(field) is None


def test_the_journal_holds_each_visit_as_it_is_read(field: Field) -> None:
    late = visit(
        1,
        AT,
        volts(2100, unit="mV"),
        *drops(0.7, stage="as_left"),
        *drops(0.6, stage="as_found"),
        tasks=[{"task": "shunt_test", "done": "done"}, {"task": "bond_check", "done": "partly"}],
        work_done=["tamped", "adjusted"],
        remarks="ballast fouled",
    )
    field.store(late)
    shown = field.read(visit_records.get, visit_id(1))
    with field.service.read(snapshot=True) as connection:
        (line,) = list(journal.lines(connection, field.depot, subject_kind="visit"))
    assert json.loads(line["content"]) == json.loads(journal.canonical(shown))
    field.void(1)
    shown = field.read(visit_records.get, visit_id(1))
    with field.service.read(snapshot=True) as connection:
        line = list(journal.lines(connection, field.depot, subject_kind="visit"))[-1]
        assert list(verification.mismatched_visits(connection)) == []
    assert line["action"] == "visit_voided"
    assert json.loads(line["content"]) == json.loads(journal.canonical(shown))


def test_rebuilding_latest_changes_nothing(field: Field) -> None:
    field.store(
        visit(1, AT, volts(1.6, stage="as_found"), volts(2.1), *drops(0.7)),
        visit(2, AT + timedelta(hours=1), volts(2.2)),
        visit(3, AT, *drops(0.8), replaces=visit_id(1)),
        visit(4, AT, volts(2.2), section="TV115"),
    )
    field.void(2)
    before = field.latest()
    assert len(before) == 3
    assert field.write(visits.rebuild_latest) == 2
    assert field.latest() == before
