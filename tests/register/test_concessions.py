"""Concessions: two people, a limit or a task, protection on the wrong side; on both databases."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta
from typing import Any

import pytest

from service.api.schemas.concessions import concession_answer
from service.application import concessions, sections, status
from service.application.concessions import Content
from service.errors import ConflictError, NotAcceptableError, NotFoundError
from service.records import journal
from support.register import ENGINEER, OTHER, Depot, in_a_book, kept_status, lines

ID = "0197c0de-0000-7000-8000-000000000001"
OTHER_ID = "0197c0de-0000-7000-8000-000000000002"


def asked(depot: Depot, **changes: Any) -> Content:
    """0.4 ohm allowed at the relay end for thirty days, but for the changes."""
    content = Content(
        section="A",
        limit="drop_shunt",
        task=None,
        test_point="relay_end",
        allowed_min=0.4,
        allowed_max=None,
        conditions="until the bonds are renewed",
        protection="swept before every train",
        asked_by="T. Okafor",
        approved_by=None,
        from_on=depot.today,
        until_on=depot.today + timedelta(days=30),
    )
    return replace(content, **changes)


@pytest.fixture
def judged(depot: Depot) -> Depot:
    """A depot whose section A, in use for a year, is judged by a book with one limit and one task."""
    depot.section("A", book=in_a_book(depot), commissioned_on=depot.today - timedelta(days=365))
    return depot


def test_a_concession_is_granted_once_by_a_second_person(judged: Depot) -> None:
    granted, new = judged.write(concessions.grant, ID, asked(judged))
    assert new
    assert (granted.content.approved_by, granted.granted_by) == (ENGINEER.holder, ENGINEER.holder)
    line = lines(judged)[-1]
    assert (line["action"], line["sections"]) == ("concession_granted", '["A"]')
    assert kept_status(judged, "A").sequence == line["sequence"]
    shown = concession_answer(granted).model_dump(mode="json")
    assert journal.canonical(shown | {"granted_at": journal.instant_text(judged.clock[0])}) == line["content"]
    before = len(lines(judged))
    assert judged.write(concessions.grant, ID, asked(judged)) == (granted, False)
    assert judged.write(concessions.grant, ID, asked(judged), actor=OTHER) == (granted, False)
    assert len(lines(judged)) == before


def test_an_id_is_not_used_for_another(judged: Depot) -> None:
    judged.write(concessions.grant, ID, asked(judged))
    with pytest.raises(ConflictError):
        judged.write(concessions.grant, ID, asked(judged, allowed_min=0.3))
    judged.depot = "birchfield"
    judged.section("A", book="house")
    judged.write(concessions.grant, ID, asked(judged, allowed_min=0.3))
    judged.depot = "ashby"
    assert judged.read(concessions.get, ID).content.allowed_min == 0.4


IMPOSSIBLE: list[tuple[dict[str, Any], tuple[str, str]]] = [
    ({"asked_by": " r. marlowe "}, ("same_person", "/asked_by")),
    ({"approved_by": "J. Abara"}, ("other_approver", "/approved_by")),
    ({"protection": None}, ("protection_missing", "/protection")),
    ({"protection": "  "}, ("protection_missing", "/protection")),
    ({"limit": "drop"}, ("unknown_limit", "/limit")),
    ({"limit": None}, ("limit_or_task", "/limit")),
    ({"task": "shunt_test"}, ("limit_or_task", "/limit")),
    ({"allowed_min": None}, ("none_given", "/allowed_min")),
    ({"allowed_min": 0.5}, ("no_relaxation", "/allowed_min")),
    ({"allowed_max": 0.6}, ("no_such_bound", "/allowed_max")),
    ({"test_point": "end"}, ("unknown_test_point", "/test_point")),
    ({"limit": None, "task": "tamping"}, ("unknown_task", "/task")),
    ({"limit": None, "task": "shunt_test"}, ("not_of_a_task", "/allowed_min")),
]


def test_what_cannot_be_granted(judged: Depot) -> None:
    before_today = judged.today - timedelta(days=1)
    for changes, expected in (*IMPOSSIBLE, ({"until_on": before_today}, ("out_of_order", "/until_on"))):
        with pytest.raises(NotAcceptableError) as refused:
            judged.write(concessions.grant, ID, asked(judged, **changes))
        assert expected in {(fault.code, fault.pointer) for fault in refused.value.faults}
    with pytest.raises(NotFoundError):
        judged.read(concessions.get, ID)


def test_a_section_that_no_book_judges_has_nothing_to_concede(depot: Depot) -> None:
    depot.section("A")
    with pytest.raises(NotAcceptableError) as refused:
        depot.write(concessions.grant, ID, asked(depot))
    assert [fault.code for fault in refused.value.faults] == ["no_edition_in_force"]
    with pytest.raises(NotAcceptableError) as refused:
        depot.write(concessions.grant, ID, asked(depot, section="B"))
    assert [fault.code for fault in refused.value.faults] == ["unknown_section"]


def test_a_task_may_be_deferred(judged: Depot) -> None:
    assert kept_status(judged, "A").overdue
    deferred = asked(
        judged, limit=None, task="shunt_test", test_point=None, allowed_min=None, protection=None
    )
    judged.write(concessions.grant, ID, deferred)
    assert not kept_status(judged, "A").overdue
    with judged.service.read() as connection:
        found = status.of_section(connection, judged.depot, "A", judged.clock[0])
    assert [(one.task, one.concession) for one in found.status.tasks] == [("shunt_test", ID)]
    judged.write(concessions.end, ID, "done at last")
    assert kept_status(judged, "A").overdue


def test_it_ends_once_and_says_why(judged: Depot) -> None:
    judged.write(concessions.grant, ID, asked(judged))
    judged.later(days=3)
    ended = judged.write(concessions.end, ID, "bonds renewed", actor=OTHER)
    assert (ended.version, ended.ended_on, ended.ended_by, ended.ended_why) == (
        2,
        judged.today,
        OTHER.holder,
        "bonds renewed",
    )
    line = lines(judged)[-1]
    assert (line["action"], line["sequence"]) == ("concession_ended", kept_status(judged, "A").sequence)
    judged.later(days=1)
    assert judged.write(concessions.end, ID, "again") == ended
    with pytest.raises(NotFoundError):
        judged.write(concessions.end, OTHER_ID, "no such")


def test_what_has_run_out_is_not_ended(judged: Depot) -> None:
    judged.write(concessions.grant, ID, asked(judged))
    judged.later(days=31)
    with pytest.raises(ConflictError):
        judged.write(concessions.end, ID, "too late")


def test_lists_are_in_order_of_id(judged: Depot) -> None:
    for one in (OTHER_ID, ID):
        judged.write(concessions.grant, one, asked(judged))
    assert [one.concession for one in judged.read(concessions.page, after=None, most=9)] == [ID, OTHER_ID]
    assert [one.concession for one in judged.read(concessions.page, after=ID, most=9)] == [OTHER_ID]
    assert len(judged.read(concessions.page, after=None, most=1)) == 1


def test_a_section_under_concession_stays_what_it_is(judged: Depot) -> None:
    before = judged.read(sections.get, "A")
    judged.write(concessions.grant, ID, asked(judged))
    assert judged.read(sections.get, "A").version == before.version
