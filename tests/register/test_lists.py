"""Lists of sections narrowed by their statuses, which follow the depot's day; on both databases."""

from __future__ import annotations

from datetime import timedelta
from threading import Barrier, Thread
from typing import Any

from service.application import concessions, section_lists, status
from service.application.section_lists import Filters
from service.errors import ConflictError
from service.rules.words import CircuitKind, Compliance, Hazard, SectionState, Traction
from support.register import Depot, in_a_book


def names(depot: Depot, **filters: Any) -> list[str]:
    status.roll_due(depot.service, depot.depot)
    rows = depot.read(section_lists.page, Filters(**filters), after=None, most=9)
    with depot.service.read(snapshot=True) as connection:
        assert list(section_lists.every(connection, depot.depot, Filters(**filters))) == rows
    return [row.section.section for row in rows]


def test_lists_follow_the_day(depot: Depot) -> None:
    """The task of the book is due three months after commissioning, overdue the day after."""
    book = in_a_book(depot)
    started = depot.today
    depot.section("A", book=book, commissioned_on=started)
    depot.section("B", book=book, commissioned_on=started - timedelta(days=365))
    depot.section("C", state=SectionState.OUT_OF_USE)
    assert names(depot, overdue=True) == ["B"]
    assert names(depot, overdue=False) == ["A", "C"]
    assert names(depot, compliance=Compliance.NOT_SHOWN) == ["A", "B"]
    due_on = depot.read(section_lists.page, Filters(), after=None, most=1)[0].status.next_due_on
    assert names(depot, due_before=due_on) == ["B"]
    assert names(depot, due_before=due_on + timedelta(days=1)) == ["A", "B"]
    depot.on(due_on)
    assert names(depot, overdue=True) == ["B"]
    depot.later(days=1)
    assert names(depot, overdue=True) == ["A", "B"]
    assert depot.read(section_lists.page, Filters(), after="B", most=9)[0].status.compliance is None


def test_a_circuit_kind_that_the_book_does_not_permit_is_listed_by_its_hazard(depot: Depot) -> None:
    permitted = {"circuit_kind": "dc", "traction": "none", "return_rails": None}
    book = in_a_book(depot, combinations=[permitted])
    depot.section("A", book=book)
    depot.section("B", book=book, traction=Traction.DC_THIRD_RAIL, return_rails=1)
    depot.section("C", book=book, circuit_kind=CircuitKind.CODED)
    assert names(depot, hazard=Hazard.WRONG_SIDE) == ["B", "C"]
    assert names(depot, hazard=Hazard.WRONG_SIDE, circuit_kind=CircuitKind.DC) == ["B"]
    assert names(depot, compliance=Compliance.NO) == ["B", "C"]


def test_of_two_concessions_at_once_under_one_id_one_is_told(depot: Depot) -> None:
    book = in_a_book(depot)
    outcomes: list[str] = []
    barrier = Barrier(2)

    def grant(section: str) -> None:
        content = concessions.Content(
            section=section,
            limit=None,
            task="shunt_test",
            test_point=None,
            allowed_min=None,
            allowed_max=None,
            conditions="possession refused",
            protection=None,
            asked_by="T. Okafor",
            approved_by=None,
            from_on=depot.today,
            until_on=depot.today,
        )
        barrier.wait(timeout=10)
        try:
            depot.write(concessions.grant, "0197c0de-0000-7000-8000-000000000001", content)
        except ConflictError:
            outcomes.append("conflict")
        else:
            outcomes.append("granted")

    for name in ("A", "B"):
        depot.section(name, book=book)
    both = [Thread(target=grant, args=(name,)) for name in ("A", "B")]
    for one in both:
        one.start()
    for one in both:
        one.join()
    assert sorted(outcomes) == ["conflict", "granted"]
