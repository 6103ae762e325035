"""What a limit on the drop shunt means, and that no bundled figure claims more than was looked up."""

from __future__ import annotations

import pytest

from service.application import editions
from service.application.book_content import Draft, Sourced

BOOKS = {new.book: new for new in editions.bundled()}


def statements(new: Draft) -> list[Sourced]:
    return [*new.limits, *new.tasks, *new.combinations, *new.notes]


@pytest.mark.parametrize("book", BOOKS)
def test_a_limit_on_the_drop_shunt_is_a_minimum(book: str) -> None:
    """IEC 60050-821, 821-03-30: the largest resistance that still releases the relay (read).

    So the requirement is that it be at least so large.
    """
    found = [limit for limit in BOOKS[book].limits if limit.quantity == "drop_shunt"]
    assert found
    assert all(limit.minimum is not None and limit.maximum is None for limit in found)
    assert all(limit.minimum is not None and limit.minimum.hazard == "wrong_side" for limit in found)


@pytest.mark.parametrize("book", [book for book in BOOKS if book != "harrow-vale-house"])
def test_only_what_was_read_is_confirmed(book: str) -> None:
    """Standings of the published figures: what is second hand, from memory or practice is not confirmed."""
    for one in statements(BOOKS[book]):
        assert one.confirmed is (one.standing == "read"), one


@pytest.mark.parametrize("book", BOOKS)
def test_every_statement_names_clause_and_source(book: str) -> None:
    assert all(one.clause and one.source for one in statements(BOOKS[book]))


def test_the_invented_book_says_that_it_is_invented() -> None:
    house = BOOKS["harrow-vale-house"]
    assert "invented" in house.title
    assert {one.source for one in statements(house)} == {"house rule, invented"}
