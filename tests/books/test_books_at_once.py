"""Two who edit, draft or issue at once: one outcome, explained; held together by a barrier, not by sleep."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from datetime import date
from threading import Barrier

from service.application import books, editions, sections, status
from service.application.section_content import Content
from service.errors import ConflictError, ShuntbookError, StaleError
from service.records import journal
from service.records.unit_of_work import Transaction
from service.rules.words import CircuitKind, SectionState, Traction
from support.limit_books import DRAFTER, ISSUER, Shelf, draft_of, edition

DAY = date(2026, 4, 1)


def at_once(shelf: Shelf, *actions: Callable[[Transaction], object]) -> list[object]:
    """What each action gave or raised; all begin their unit of work together."""
    barrier = Barrier(len(actions), timeout=20)

    def run(numbered: tuple[int, Callable[[Transaction], object]]) -> object:
        number, action = numbered
        barrier.wait()
        try:
            with shelf.service.unit_of_work(ISSUER if number else DRAFTER) as tx:
                return action(tx)
        except ShuntbookError as error:
            return error

    with ThreadPoolExecutor(len(actions)) as pool:
        return list(pool.map(run, enumerate(actions)))


def test_two_editors_of_one_draft(shelf: Shelf) -> None:
    shelf.draft()
    contents = [draft_of(edition(title=title)).content() for title in ("First", "Second")]
    outcomes = at_once(
        shelf,
        *(lambda tx, said=said: editions.edit(tx, "house", "1", said, expected=1) for said in contents),
    )
    assert sum(isinstance(one, StaleError) for one in outcomes) == 1
    [kept] = [one for one in outcomes if not isinstance(one, ShuntbookError)]
    assert shelf.read(books.get, "house", "1") == kept
    assert len(shelf.read(lambda connection: list(journal.lines(connection, journal.SERVICE)))) == 2


def test_the_same_edition_drafted_twice(shelf: Shelf) -> None:
    shelf.draft(book="other")
    new = draft_of(edition())
    outcomes = at_once(shelf, *[lambda tx: editions.draft(tx, new)] * 2)
    assert sum(isinstance(one, ConflictError) for one in outcomes) == 1


def test_two_editions_of_a_new_book(shelf: Shelf) -> None:
    shelf.draft(book="other")
    news = [draft_of(edition(edition=name)) for name in ("1", "2")]
    outcomes = at_once(shelf, *(lambda tx, new=new: editions.draft(tx, new) for new in news))
    assert not any(isinstance(one, ShuntbookError) for one in outcomes)


def test_a_section_that_takes_up_a_book_while_it_is_issued(shelf: Shelf) -> None:
    """Whichever comes first, the section's status ends the day before the edition takes effect."""
    shelf.draft()
    content = Content(SectionState.IN_USE, CircuitKind.DC, Traction.NONE, ("relay_end",), book="house")
    outcomes = at_once(
        shelf,
        lambda tx: sections.create(tx, "ashby", "AS1", content),
        lambda tx: editions.issue(tx, "house", "1", DAY, expected=1),
    )
    assert not any(isinstance(one, ShuntbookError) for one in outcomes)
    table = status.StatusRow.__table__
    kept = shelf.read(lambda connection: connection.execute(table.select()).one())
    assert kept.holds_until == date(2026, 3, 31)
