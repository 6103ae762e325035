"""The chain: without a gap, in the order of commits, and no byte of it changed unseen."""

from __future__ import annotations

import hashlib
import json
import sqlite3
import threading
from concurrent.futures import ThreadPoolExecutor
from contextlib import closing, suppress
from typing import Any

import pytest
import rfc8785
import sqlalchemy as sa
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from service.application import verification
from service.records import journal
from service.records.engine import sqlite_path
from service.records.tables import JournalHead, JournalLine
from support.world import FIELD, World

LINE, HEAD = JournalLine.__table__, JournalHead.__table__  # type: ignore[attr-defined]
TEXTS = [column.name for column in LINE.c if column.name != "sequence"]


def lines(world: World) -> list[dict[str, Any]]:
    found: list[dict[str, Any]] = world.read(lambda *at: list(journal.lines(*at)))
    return found


def broken(world: World) -> list[journal.Break]:
    with world.service.read(snapshot=True) as connection:
        return list(verification.broken_chains(connection))


def tamper(world: World, statement: sa.Executable) -> None:
    with world.service.database.write() as connection:
        connection.execute(statement)


def test_every_line_by_the_definition_on_the_wire(lived: World) -> None:
    """SHA-256 of the RFC 8785 form without `digest`, here by the library alone."""
    previous, found = "0" * 64, lines(lived)
    assert len(found) > 12
    for number, row in enumerate(found, start=1):
        line = {
            "depot": row["depot"],
            "sequence": number,
            "recorded_at": row["recorded_at"],
            "actor": json.loads(row["actor"]),
            "action": row["action"],
            "subject": {"kind": row["subject_kind"], "name": row["subject_name"]},
            "sections": json.loads(row["sections"]),
            "content": json.loads(row["content"]),
            "previous_digest": previous,
        }
        previous = hashlib.sha256(rfc8785.dumps(line)).hexdigest()
        assert row["digest"] == previous
        for name in ("actor", "sections", "content"):
            assert row[name].encode() == rfc8785.dumps(json.loads(row[name]))
    assert lived.read(journal.head) == (len(found), previous)
    assert broken(lived) == []


def test_no_gap_and_commit_order_with_many_writers(world: World) -> None:
    """Eight at once in one depot: what a reader sees only ever grows at its end."""
    for number in range(8):
        world.section(f"A{number}")
    begun, _ = world.read(journal.head)
    barrier, done = threading.Barrier(9, timeout=20), threading.Event()
    seen: list[list[int]] = []

    def write(number: int) -> None:
        barrier.wait()
        for _ in range(5):
            world.visit(f"A{number}")

    def watch() -> None:
        barrier.wait()
        while not done.is_set():
            seen.append([line["sequence"] for line in lines(world)])

    with ThreadPoolExecutor(9) as pool:
        watcher = pool.submit(watch)
        writers = [pool.submit(write, number) for number in range(8)]
        for writer in writers:
            writer.result()
        done.set()
        watcher.result()
    found = [line["sequence"] for line in lines(world)]
    assert found == list(range(1, begun + 40 + 1))
    assert all(sequences == found[: len(sequences)] for sequences in seen)
    assert broken(world) == []


def test_what_is_rolled_back_leaves_no_gap(world: World) -> None:
    before = world.read(journal.head)
    with suppress(ZeroDivisionError), world.service.unit_of_work(FIELD) as tx:
        tx.append(world.depot, [journal.Entry("tested", "test", "t", (), {})])
        raise ZeroDivisionError
    assert world.read(journal.head) == before
    assert broken(world) == []


@pytest.mark.parametrize("keep", [0, 1, 5])
def test_a_tail_that_was_cut(lived: World, keep: int) -> None:
    tamper(lived, sa.delete(LINE).where(LINE.c.depot == "harrow", LINE.c.sequence > keep))
    (found,) = broken(lived)
    assert (found.depot, found.sequence, "tail was cut" in found.reason) == ("harrow", keep + 1, True)


def test_a_line_taken_out(lived: World) -> None:
    tamper(lived, sa.delete(LINE).where(LINE.c.depot == "harrow", LINE.c.sequence == 4))
    (found,) = broken(lived)
    assert (found.sequence, found.reason) == (4, "line 4 is missing; line 5 follows")


def test_two_lines_swapped(lived: World) -> None:
    for was, becomes in ((4, 9999), (5, 4), (9999, 5)):
        where = sa.and_(LINE.c.depot == "harrow", LINE.c.sequence == was)
        tamper(lived, sa.update(LINE).where(where).values(sequence=becomes))
    (found,) = broken(lived)
    assert (found.sequence, "line before" in found.reason) == (4, True)


def test_a_chain_begun_again_from_the_middle(lived: World) -> None:
    """Lines renumbered from 1 do not begin with the digest that every chain begins with."""
    tamper(lived, sa.delete(LINE).where(LINE.c.depot == "harrow", LINE.c.sequence <= 3))
    for number in range(4, len(lines(lived)) + 4):
        where = sa.and_(LINE.c.depot == "harrow", LINE.c.sequence == number)
        tamper(lived, sa.update(LINE).where(where).values(sequence=number - 3))
    assert broken(lived)[0].sequence == 1


@pytest.mark.parametrize("column", ["sequence", "digest", "depot"])
def test_a_head_that_was_changed(lived: World, column: str) -> None:
    value: Any = {"sequence": 3, "digest": "0" * 64, "depot": "other"}[column]
    tamper(lived, sa.update(HEAD).where(HEAD.c.depot == "harrow").values({column: value}))
    assert "harrow" in {found.depot for found in broken(lived)}


def test_a_journal_that_is_gone_with_its_head(lived: World) -> None:
    """The depot says that there must be one; and the service has always one."""
    for table in (LINE, HEAD):
        tamper(lived, sa.delete(table))
    assert {found.depot for found in broken(lived)} == {"_service", "harrow"}


def test_lines_of_a_stream_that_is_none(lived: World) -> None:
    where = sa.and_(LINE.c.depot == "harrow", LINE.c.sequence == len(lines(lived)))
    tamper(lived, sa.update(LINE).where(where).values(depot="slipped-away"))
    assert {found.depot for found in broken(lived)} == {"harrow", "slipped-away"}


@settings(
    max_examples=200,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(data=st.data())
def test_any_single_changed_character_is_found(lived: World, data: st.DataObject) -> None:
    """In any line of any chain, in any column; the first line that does not fit is named."""
    _change_one(lived, data)


@pytest.mark.slow
@settings(
    max_examples=3000,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(data=st.data())
def test_any_single_changed_character_is_found_longer(lived: World, data: st.DataObject) -> None:
    _change_one(lived, data)


def _change_one(world: World, data: st.DataObject) -> None:
    rows = lines(world)
    row = data.draw(st.sampled_from(rows))
    column = data.draw(st.sampled_from([column.name for column in LINE.c]))
    was = row[column]
    if column == "sequence":
        becomes: Any = data.draw(st.integers(-(2**31), 2**31 - 1).filter(lambda number: number != was))
        assume(becomes not in {other["sequence"] for other in rows})
    elif was is None:
        becomes = data.draw(st.text(st.characters(codec="utf-8", exclude_characters="\0"), max_size=3))
    else:
        at = data.draw(st.integers(0, max(len(was) - 1, 0)))
        character = data.draw(st.characters(codec="utf-8", exclude_characters="\0"))
        assume(was[at : at + 1] != character)
        becomes = was[:at] + character + was[at + 1 :]
    where = sa.and_(LINE.c.depot == row["depot"], LINE.c.sequence == row["sequence"])
    with world.undone() as connection:
        connection.execute(sa.update(LINE).where(where).values({column: becomes}))
        found = {one.depot: one for one in verification.broken_chains(connection)}
    assert found["harrow"].sequence == row["sequence"]


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
@settings(
    max_examples=100,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
@given(data=st.data())
def test_any_single_changed_byte_in_the_file_is_found(lived: World, data: st.DataObject) -> None:
    """Also one that leaves no UTF-8, which SQLite keeps; in any column that holds text."""
    rows = lines(lived)
    row = data.draw(st.sampled_from(rows))
    column = data.draw(st.sampled_from([name for name in TEXTS if row[name]]))
    content = bytearray(row[column].encode())
    at = data.draw(st.integers(0, len(content) - 1))
    content[at] ^= data.draw(st.integers(1, 255))
    with lived.undone() as connection:
        connection.exec_driver_sql(
            f"UPDATE journal SET {column} = CAST(? AS TEXT) WHERE depot = 'harrow' AND sequence = ?",
            (bytes(content), row["sequence"]),
        )
        found = {one.depot: one for one in verification.broken_chains(connection)}
    assert found["harrow"].sequence == row["sequence"]


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_text_is_read_as_ever_after_a_walk(lived: World) -> None:
    path = sqlite_path(lived.service.database.url)
    assert path is not None
    with closing(sqlite3.connect(path)) as other, other:
        other.execute("UPDATE journal SET content = x'ff' WHERE depot = 'harrow' AND sequence = 2")
    (found,) = broken(lived)
    assert (found.sequence, found.reason) == (2, "holds bytes that are no text")
    with lived.service.read() as connection:
        raw: Any = connection.connection.dbapi_connection
        assert raw.text_factory is str


def test_the_service_has_a_chain_of_its_own(lived: World) -> None:
    with lived.service.read(snapshot=True) as connection:
        own = list(journal.lines(connection, journal.SERVICE))
    assert [line["sequence"] for line in own] == list(range(1, len(own) + 1))
    assert {line["action"] for line in own} == {"edition_drafted", "edition_issued"}
    assert {line["depot"] for line in lines(lived)} == {"harrow"}
