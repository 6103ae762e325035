"""No row can reach into another depot: the database itself refuses it, whatever the service does."""

from __future__ import annotations

from typing import Any

import pytest
import sqlalchemy as sa

from service.application import depots, status, visits
from service.records.tables import Latest, metadata
from service.records.tables import Status as StatusRow
from support.api import TERMS
from support.world import ENGINEER, World

OF_THE_SERVICE = {"limit_book", "edition", "access_key"}
"""Books and keys belong to no depot."""

BEYOND_A_KEY = {"journal", "journal_head"}
"""Also for `_service`, which is no depot."""


def within(table: sa.Table) -> list[sa.ForeignKeyConstraint]:
    return [one for one in table.foreign_key_constraints if len(one.columns) > 1]


def test_every_key_begins_with_the_depot() -> None:
    for name, table in metadata.tables.items():
        if name not in OF_THE_SERVICE:
            assert next(iter(table.primary_key.columns)).name == "depot", name


def test_every_record_of_a_depot_points_into_its_own() -> None:
    for name, table in metadata.tables.items():
        if name in OF_THE_SERVICE | BEYOND_A_KEY | {"depot"}:
            continue
        assert any("depot" in one.columns for one in table.foreign_key_constraints), name
        for one in table.foreign_key_constraints:
            assert "depot" in one.columns or {e.column.table.name for e in one.elements} == {"limit_book"}, (
                name
            )


def test_a_row_that_reaches_into_another_depot_is_refused(full: World, subtests: pytest.Subtests) -> None:
    """The row as it is in its own depot, put into another that lacks what it points to."""
    with full.service.unit_of_work(ENGINEER) as tx:
        depots.create(tx, "marsh", TERMS)
    tried = 0
    for name, table in metadata.tables.items():
        if not within(table):
            continue
        tried += 1
        with subtests.test(table=name):
            with full.service.read() as connection:
                row = dict(connection.execute(sa.select(table).limit(1)).mappings().one())
            with full.undone() as connection, pytest.raises(sa.exc.IntegrityError) as refused:
                connection.execute(sa.insert(table).values(**(row | {"depot": "marsh"})))
            assert "foreign key" in str(refused.value).lower()
    assert tried == 10


def test_a_row_of_a_depot_that_is_not_is_refused(full: World, subtests: pytest.Subtests) -> None:
    for name in ("section", "instrument", "audit"):
        table = metadata.tables[name]
        with subtests.test(table=name):
            with full.service.read() as connection:
                row = dict(connection.execute(sa.select(table).limit(1)).mappings().one())
            with full.undone() as connection, pytest.raises(sa.exc.IntegrityError):
                connection.execute(sa.insert(table).values(**(row | {"depot": "nowhere"})))


def test_what_others_point_to_cannot_be_taken_away(full: World) -> None:
    """Nothing cascades."""
    for name in ("depot", "section", "visit", "instrument", "audit", "limit_book"):
        with full.undone() as connection, pytest.raises(sa.exc.IntegrityError):
            connection.execute(sa.delete(metadata.tables[name]))


def kept(world: World, table: Any) -> list[str]:
    with world.service.read() as connection:
        return sorted(repr(row) for row in connection.execute(sa.select(table.__table__)))


def test_a_rebuild_of_the_latest_readings_changes_nothing(full: World) -> None:
    before = kept(full, Latest)
    assert before
    full.write(visits.rebuild_latest)
    assert kept(full, Latest) == before


def test_a_rebuild_mends_what_was_lost(full: World) -> None:
    before = kept(full, Latest)
    with full.service.database.write() as connection:
        connection.execute(sa.delete(Latest.__table__))  # type: ignore[attr-defined]
    full.write(visits.rebuild_latest)
    assert kept(full, Latest) == before


def test_statuses_judged_again_are_the_same(full: World) -> None:
    before = kept(full, StatusRow)
    with full.service.unit_of_work(ENGINEER) as tx:
        row = tx.lock_depot(full.depot, exclusive=True)
        status.rejudge_and_append(tx, row, None, ())
    assert [row.rpartition(",")[0] for row in kept(full, StatusRow)] == [
        row.rpartition(",")[0] for row in before
    ]
