"""`journal verify --records`: no visit, reading or void changed, taken out or slipped in unseen."""

from __future__ import annotations

from datetime import UTC, datetime
from typing import Any

import pytest
import sqlalchemy as sa

from service.application import verification, visit_content, visit_records
from service.records.tables import JournalLine, ReadingRow, VisitRow, VoidRow
from support.world import World, visit_id

VISIT, READING, VOID = (
    table.__table__  # type: ignore[attr-defined]
    for table in (VisitRow, ReadingRow, VoidRow)
)
LINE = JournalLine.__table__  # type: ignore[attr-defined]

OTHER_DAY = datetime(2020, 1, 1, tzinfo=UTC)
CHANGES: dict[sa.Table, dict[str, Any]] = {
    VISIT: {
        "section": "A2",
        "visited_at": OTHER_DAY,
        "received_at": OTHER_DAY,
        "received_by": "other",
        "holder": "J. Abara",
        "clock_offset_s": 7,
        "device": "HH-1",
        "tester": "T1",
        "ballast": "wet",
        "ballast_state": "fouled",
        "rail": "rusty",
        "air_temperature_c": 5.0,
        "tasks": "[]",
        "work_done": '["tamped"]',
        "condition_left": "fit",
        "remarks": "x",
        "replaces": visit_id(2),
        "pack": "p",
        "digest": "0" * 64,
    },
    READING: {
        "quantity": "pick_up_shunt",
        "test_point": "feed_end",
        "stage": "as_left",
        "section": "A2",
        "visited_at": OTHER_DAY,
        "comparison": "ge",
        "value": 0.5,
        "value_given": 0.5,
        "unit_given": "mOhm",
        "instrument": "SB-2",
        "shunt_ohm": 0.5,
        "source": "train",
    },
    VOID: {"voided_at": OTHER_DAY, "voided_by": "R. Ashdown", "why": "y"},
}
DERIVED = {"found_outside", "doubtful"}
"""Kept as judged when the visit came; neither sent nor journalled."""

NAMES = {"depot", "visit"}


def mismatches(world: World) -> list[tuple[str, str]]:
    with world.service.read(snapshot=True) as connection:
        return [(one.visit, one.reason) for one in verification.mismatched_visits(connection)]


def tamper(world: World, *statements: sa.Executable) -> None:
    with world.service.database.write() as connection:
        for statement in statements:
            connection.execute(statement)


def test_what_was_lived_through_is_sound(lived: World) -> None:
    assert mismatches(lived) == []


@pytest.mark.parametrize("table", CHANGES, ids=str)
def test_every_column_is_looked_at(table: sa.Table) -> None:
    assert set(CHANGES[table]) | DERIVED | NAMES >= {column.name for column in table.c}


def test_a_changed_column_is_found(lived: World, subtests: pytest.Subtests) -> None:
    for table, changes in CHANGES.items():
        for column, value in changes.items():
            with subtests.test(table=table.name, column=column), lived.undone() as connection:
                where = table.c.visit == visit_id(1)
                connection.execute(sa.update(table).where(where).values({column: value}))
                (found,) = verification.mismatched_visits(connection)
                assert found.visit == visit_id(1)


def test_a_visit_that_is_gone_or_was_never_recorded(lived: World) -> None:
    of_it = [table.c.visit == visit_id(2) for table in (READING, VISIT)]
    tamper(lived, sa.delete(READING).where(of_it[0]), sa.delete(VISIT).where(of_it[1]))
    assert mismatches(lived) == [(visit_id(2), "the journal records it, but it is not stored")]
    where = sa.and_(LINE.c.subject_kind == "visit", LINE.c.subject_name == visit_id(3))
    tamper(lived, sa.delete(LINE).where(where))
    assert mismatches(lived)[0] == (visit_id(3), "it is stored, but the journal does not record it")


def test_a_reading_taken_out_or_put_in(lived: World) -> None:
    with lived.service.read() as connection:
        row = connection.execute(sa.select(READING).where(READING.c.visit == visit_id(2))).mappings().one()
    tamper(lived, sa.insert(READING).values(**(dict(row) | {"test_point": "middle"})))
    assert [visit for visit, _ in mismatches(lived)] == [visit_id(2)]
    tamper(lived, sa.delete(READING).where(READING.c.visit == visit_id(2)))
    assert [visit for visit, _ in mismatches(lived)] == [visit_id(2)]


def test_a_void_taken_back_or_slipped_in(lived: World) -> None:
    tamper(lived, sa.delete(VOID))
    assert [visit for visit, _ in mismatches(lived)] == [visit_id(1)]
    slipped = {"depot": "harrow", "visit": visit_id(2), "voided_at": OTHER_DAY, "voided_by": "x", "why": "y"}
    tamper(lived, sa.insert(VOID).values(**slipped))
    assert [visit for visit, _ in mismatches(lived)] == [visit_id(1), visit_id(2)]


def test_a_digest_changed_with_what_it_is_of(lived: World) -> None:
    """One who can compute digests still has to change the journal, whose chain then breaks."""
    tamper(lived, sa.update(VISIT).where(VISIT.c.visit == visit_id(2)).values(remarks="better"))
    with lived.service.read() as connection:
        row = connection.execute(sa.select(VISIT).where(VISIT.c.visit == visit_id(2))).one()
        readings = connection.execute(sa.select(READING).where(READING.c.visit == visit_id(2))).all()
    given = tuple(verification._given(reading) for reading in readings)
    digest = visit_content.digest(visit_records.draft_of(row, given))
    tamper(lived, sa.update(VISIT).where(VISIT.c.visit == visit_id(2)).values(digest=digest))
    assert mismatches(lived) == [(visit_id(2), "its digest is not the one the journal records")]
