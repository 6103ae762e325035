"""Editions from draft to withdrawal, on both databases: two holders, later days, nothing changed after."""

from __future__ import annotations

import json
from datetime import date, datetime, timedelta

import pytest
import sqlalchemy as sa

from service.application import books, editions, status
from service.errors import ConflictError, NotAcceptableError, NotFoundError, StaleError
from service.records import journal
from service.records.engine import digest_of
from service.records.tables import BookEdition
from service.rules.limits import in_force
from service.rules.words import Compliance, EditionState
from support.limit_books import DRAFTER, ISSUER, Shelf, draft_of, edition, limit

DAY = date(2026, 4, 1)


def stored(shelf: Shelf, name: str = "1") -> dict[str, object]:
    table = BookEdition.__table__
    query = sa.select(table).where(table.c.book == "house", table.c.edition == name)
    return dict(shelf.read(lambda connection: connection.execute(query).mappings().one()))


def lines(shelf: Shelf, stream: str) -> list[dict[str, object]]:
    return shelf.read(lambda connection: list(journal.lines(connection, stream)))


def test_a_draft_is_kept_with_its_digest_and_judges_nothing(shelf: Shelf) -> None:
    record = shelf.draft()
    assert record.state is EditionState.DRAFT
    assert record.version == 1
    assert record.drafted_by == (DRAFTER.holder,)
    assert record.digest == digest_of(str(stored(shelf)["content"]))
    assert shelf.read(books.editions, "house") == ()
    assert shelf.read(books.get, "house", "1") == record


def test_an_edition_name_is_taken_once(shelf: Shelf) -> None:
    shelf.draft()
    with pytest.raises(ConflictError):
        shelf.draft(title="Another")
    assert shelf.draft(edition="2").book == "house"


def test_a_refused_draft_leaves_no_book_behind(shelf: Shelf) -> None:
    with pytest.raises(NotAcceptableError):
        shelf.draft(limits=[limit(), limit()])
    assert shelf.read(books.page, after=None, most=10) == ()


def test_editing_replaces_what_a_draft_says_and_adds_the_holder(shelf: Shelf) -> None:
    shelf.draft()
    changed = draft_of(edition(title="Changed")).content()
    record = shelf.write(editions.edit, "house", "1", changed, expected=1, actor=ISSUER)
    assert record.content == changed
    assert record.version == 2
    assert record.drafted_by == (DRAFTER.holder, ISSUER.holder)
    with pytest.raises(StaleError):
        shelf.write(editions.edit, "house", "1", changed, expected=1)


def test_whoever_drafted_or_edited_cannot_issue(shelf: Shelf) -> None:
    shelf.draft()
    with pytest.raises(ConflictError) as refused:
        shelf.issue(DAY, actor=DRAFTER)
    assert refused.value.kind == "second-holder"
    changed = draft_of(edition(title="Changed")).content()
    shelf.write(editions.edit, "house", "1", changed, expected=1, actor=ISSUER)
    with pytest.raises(ConflictError):
        shelf.issue(DAY, expected=2)
    assert stored(shelf)["state"] == "draft"


def test_issuing_needs_the_version_that_was_read(shelf: Shelf) -> None:
    shelf.draft()
    shelf.write(editions.edit, "house", "1", draft_of(edition(title="Changed")).content(), expected=1)
    with pytest.raises(StaleError):
        shelf.issue(DAY, expected=1)


def test_an_issued_edition_never_changes(shelf: Shelf) -> None:
    shelf.draft()
    shelf.issue(DAY)
    before = stored(shelf)
    changed = draft_of(edition(title="Changed")).content()
    with pytest.raises(ConflictError):
        shelf.write(editions.edit, "house", "1", changed, expected=2)
    with pytest.raises(ConflictError):
        shelf.issue(date(2026, 5, 1), expected=2)
    shelf.write(editions.withdraw, "house", "1", date(2026, 6, 1), expected=2)
    with pytest.raises(ConflictError):
        shelf.write(editions.edit, "house", "1", changed, expected=3)
    after = stored(shelf)
    kept = ("content", "digest", "effective_on", "issued_at", "issued_by", "drafted_at", "drafted_by")
    assert [after[name] for name in kept] == [before[name] for name in kept]
    assert after["digest"] == digest_of(str(after["content"]))


@pytest.mark.parametrize(
    ("hour", "day", "taken"),
    [
        (9, date(2026, 3, 2), False),
        (9, date(2026, 3, 3), True),
        (10, date(2026, 3, 3), False),  # already 3 March at UTC+14
        (10, date(2026, 3, 4), True),
        (9, date(2026, 3, 1), False),
    ],
)
def test_the_day_is_later_than_today_everywhere(shelf: Shelf, hour: int, day: date, taken: bool) -> None:
    shelf.draft()
    shelf.at(date(2026, 3, 2), hour)
    if taken:
        assert shelf.issue(day).effective_on == day
        return
    with pytest.raises(NotAcceptableError) as refused:
        shelf.issue(day)
    assert [fault.pointer for fault in refused.value.faults] == ["/effective_on"]


def test_withdrawing_needs_a_later_day_and_an_issued_edition(shelf: Shelf) -> None:
    shelf.draft()
    with pytest.raises(ConflictError):
        shelf.write(editions.withdraw, "house", "1", DAY, expected=1)
    shelf.issue(DAY)
    with pytest.raises(NotAcceptableError):
        shelf.write(editions.withdraw, "house", "1", date(2026, 3, 2), expected=2)
    record = shelf.write(editions.withdraw, "house", "1", date(2026, 6, 1), expected=2)
    assert record.state is EditionState.WITHDRAWN
    with pytest.raises(ConflictError):
        shelf.write(editions.withdraw, "house", "1", date(2026, 7, 1), expected=3)


def test_two_editions_do_not_begin_on_one_day(shelf: Shelf) -> None:
    shelf.draft()
    shelf.draft(edition="2")
    shelf.issue(DAY)
    with pytest.raises(NotAcceptableError):
        shelf.issue(DAY, "2")


def test_each_day_has_the_edition_in_force_on_it(shelf: Shelf) -> None:
    for name, day in (("1", DAY), ("2", date(2026, 5, 1))):
        shelf.draft(edition=name)
        shelf.issue(day, name)
    shelf.write(editions.withdraw, "house", "2", date(2026, 6, 1), expected=2)
    found = shelf.read(books.editions, "house")
    days = [date(2026, 3, 31), DAY, date(2026, 4, 30), date(2026, 5, 1), date(2026, 5, 31), date(2026, 6, 1)]
    names = [None if (one := in_force(found, day)) is None else one.edition for day in days]
    assert names == [None, "1", "1", "2", "2", None]


def test_what_was_known_at_an_instant(shelf: Shelf) -> None:
    shelf.draft()
    drafted = shelf.clock[0]
    shelf.at(date(2026, 3, 3))
    shelf.issue(DAY)
    issued = shelf.clock[0]
    shelf.at(date(2026, 4, 10))
    shelf.write(editions.withdraw, "house", "1", date(2026, 6, 1), expected=2)

    def known(at: datetime) -> list[tuple[EditionState, date | None]]:
        return [(one.state, one.withdrawn_on) for one in shelf.read(books.editions, "house", known_at=at)]

    assert known(drafted) == []
    assert known(issued - timedelta(microseconds=1)) == []
    assert known(issued) == [(EditionState.ISSUED, None)]
    assert known(shelf.clock[0]) == [(EditionState.WITHDRAWN, date(2026, 6, 1))]


def test_the_same_edition_is_the_same_object_each_time(shelf: Shelf) -> None:
    """What was worked out for sections is kept on it."""
    shelf.draft()
    shelf.issue(DAY)
    [first] = shelf.read(books.editions, "house")
    [second] = shelf.read(books.editions_of_books, ["house", "other"])["house"]
    assert first is second
    assert shelf.read(books.editions, "other") == ()


def test_issuing_tells_every_depot_that_uses_the_book_and_shortens_its_statuses(shelf: Shelf) -> None:
    shelf.draft()
    shelf.draft(book="other", edition="1")
    shelf.section("AS1", "ashby")
    shelf.section("BI1", "birchfield", book="other")
    before = len(lines(shelf, "birchfield"))
    record = shelf.issue(DAY)
    told = lines(shelf, "ashby")[-1]
    assert (told["action"], told["subject_kind"], told["subject_name"]) == (
        "edition_issued",
        "edition",
        "house/1",
    )
    assert told["sections"] == "null"
    assert json.loads(str(told["content"])) == books.wire(record)
    assert len(lines(shelf, "birchfield")) == before
    assert lines(shelf, journal.SERVICE)[-1]["content"] == told["content"]
    judged = shelf.read(status.of_section, "ashby", "AS1", shelf.clock[0])
    assert judged.status.compliance is Compliance.NOT_SHOWN
    assert judged.status.edition is None
    assert judged.status.holds_until == date(2026, 3, 31)


def test_every_step_is_in_the_service_journal_and_the_chains_hold(shelf: Shelf) -> None:
    shelf.draft()
    shelf.section("AS1")
    shelf.write(editions.edit, "house", "1", draft_of(edition(title="Changed")).content(), expected=1)
    shelf.issue(DAY, expected=2)
    shelf.write(editions.withdraw, "house", "1", date(2026, 6, 1), expected=3)
    actions = [line["action"] for line in lines(shelf, journal.SERVICE)]
    assert actions == ["edition_drafted", "edition_edited", "edition_issued", "edition_withdrawn"]
    for stream in (journal.SERVICE, "ashby", "birchfield"):
        assert shelf.read(journal.verify, stream) is None


def test_an_unknown_edition_is_not_found(shelf: Shelf) -> None:
    with pytest.raises(NotFoundError):
        shelf.read(books.get, "house", "1")
    with pytest.raises(NotFoundError):
        shelf.issue(DAY)


def test_bundled_books_are_drafted_once(shelf: Shelf) -> None:
    loaded = shelf.write(editions.load_bundled)
    assert ("us-49cfr", "1") in loaded
    assert ("in-sem-2021", "3.0") in loaded
    assert ("harrow-vale-house", "1") in loaded
    assert shelf.write(editions.load_bundled) == ()
    found = shelf.read(books.page, after=None, most=100)
    assert {(book.book, one.edition) for book in found for one in book.editions} == set(loaded)
    assert all(one.state is EditionState.DRAFT for book in found for one in book.editions)


def test_a_bundled_book_that_was_edited_or_issued_is_left_alone(shelf: Shelf) -> None:
    shelf.write(editions.load_bundled)
    record = shelf.write(editions.issue, "us-49cfr", "1", DAY, expected=1, actor=ISSUER)
    assert shelf.write(editions.load_bundled) == ()
    assert shelf.read(books.get, "us-49cfr", "1") == record


def test_books_are_paged_by_name(shelf: Shelf) -> None:
    for book in ("c", "a", "b"):
        shelf.draft(book=book)
    assert [one.book for one in shelf.read(books.page, after=None, most=2)] == ["a", "b"]
    assert [one.book for one in shelf.read(books.page, after="b", most=2)] == ["c"]
