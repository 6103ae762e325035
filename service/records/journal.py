"""The append-only, hash-chained record of every change; also the change feed.

A line's digest is the SHA-256 of its RFC 8785 form without `digest`, which holds the digest of the
line before. Appending takes the journal head, the last lock of a unit of work.
"""

from __future__ import annotations

import json
import re
from collections.abc import Generator, Iterator, Sequence
from contextlib import closing, contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import partial
from typing import Any

import rfc8785
import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.records import several
from service.records.engine import digest_of
from service.records.several import Asked
from service.records.tables import JournalHead, JournalLine

SERVICE = "_service"
"""The stream of what belongs to no depot: books and keys."""

START = "0" * 64
"""`previous_digest` of the first line."""

_head = JournalHead.__table__  # type: ignore[attr-defined]
_line = JournalLine.__table__  # type: ignore[attr-defined]
_TEXTS = [column.name for column in _line.c if column.name not in ("sequence", "section")]


@dataclass(frozen=True, slots=True)
class Entry:
    """What one line says. `sections` None: every section of the depot."""

    action: str
    subject_kind: str
    subject_name: str
    sections: tuple[str, ...] | None
    content: Any


_encode = json.JSONEncoder(
    ensure_ascii=False, check_circular=False, allow_nan=False, sort_keys=True, separators=(",", ":")
).encode


_ODD = re.compile(r"[:,\[]-?[0-9]+(?:\.0(?![0-9])|(?:\.[0-9]+)?[eE]|[0-9]{15})")
"""Numbers that the standard encoder may have written otherwise than RFC 8785: a whole float, one with an
exponent, one beyond 2**53. Inside a string it is a false alarm."""

_BEYOND = re.compile("[\U00010000-\U0010ffff]")
"""Letters that names are ordered by otherwise in RFC 8785: beyond the basic plane."""


def canonical(value: Any) -> str:
    """RFC 8785 text of a JSON value; a lone surrogate, which has no UTF-8, raises UnicodeError.

    The standard encoder writes the same text many times faster, but for a few numbers and the order of a few
    names; where there may be one, the library writes it.
    """
    if isinstance(value, float | int):
        return rfc8785.dumps(value).decode()
    text = _encode(value)
    text.encode()
    odd = _ODD.search(text) or (not text.isascii() and _BEYOND.search(text))
    return rfc8785.dumps(value).decode() if odd else text


def instant_text(instant: datetime) -> str:
    """RFC 3339 in UTC with microseconds and `Z`."""
    return instant.astimezone(UTC).isoformat(timespec="microseconds").replace("+00:00", "Z")


def open_stream(connection: Connection, depot: str) -> None:
    """Begin a depot's chain."""
    connection.execute(sa.insert(_head).values(depot=depot, sequence=0, digest=START))


def _values(depot: str, entry: Entry, actor: dict[str, Any], recorded_at: str) -> dict[str, Any]:
    sections = entry.sections
    return {
        "depot": depot,
        "recorded_at": recorded_at,
        "actor": canonical(actor),
        "action": entry.action,
        "subject_kind": entry.subject_kind,
        "subject_name": entry.subject_name,
        "section": sections[0] if sections is not None and len(sections) == 1 else None,
        "sections": canonical(None if sections is None else list(sections)),
        "content": canonical(entry.content),
    }


def _parts(values: dict[str, Any]) -> tuple[str, str, str]:
    """The canonical text of a line, in three parts around `previous_digest` and `sequence`."""
    text = json.dumps
    first = (
        f'{{"action":{canonical(values["action"])},"actor":{values["actor"]},"content":{values["content"]},'
        f'"depot":{text(values["depot"])},"previous_digest":"'
    )
    second = f'","recorded_at":{text(values["recorded_at"])},"sections":{values["sections"]},"sequence":'
    subject = canonical({"kind": values["subject_kind"], "name": values["subject_name"]})
    return first, second, f',"subject":{subject}}}'


_APPEND = sa.text("SELECT journal_append(:depot, CAST(:lines AS jsonb))")


def asked(depot: str, entries: Sequence[Entry], actor: dict[str, Any], now: datetime) -> Asked:
    """The one statement that appends on PostgreSQL; it gives the sequence of the last line."""
    rows = [_values(depot, entry, actor, instant_text(now)) for entry in entries]
    lines = [dict(row, parts=_parts(row)) for row in rows]
    return Asked(_APPEND, {"depot": depot, "lines": json.dumps(lines)})


def append(
    connection: Connection, depot: str, entries: Sequence[Entry], actor: dict[str, Any], now: datetime
) -> int:
    """Append lines to a depot's chain and return the sequence of the last.

    On PostgreSQL one statement takes the head, hashes and inserts; on SQLite the write lock is
    already held.
    """
    if connection.dialect.name == "postgresql":
        return int(several.run(connection, asked(depot, entries, actor, now))[0][0][0])
    head = connection.execute(sa.select(_head.c.sequence, _head.c.digest).where(_head.c.depot == depot)).one()
    sequence, digest = head
    rows = [_values(depot, entry, actor, instant_text(now)) for entry in entries]
    for row in rows:
        sequence += 1
        first, second, third = _parts(row)
        row["previous_digest"] = digest
        row["sequence"] = sequence
        digest = row["digest"] = digest_of(f"{first}{digest}{second}{sequence}{third}")
    connection.execute(sa.insert(_line), rows)
    connection.execute(
        sa.update(_head).where(_head.c.depot == depot).values(sequence=sequence, digest=digest)
    )
    return int(sequence)


POSTGRES_APPEND = """
CREATE FUNCTION journal_append(stream text, lines jsonb) RETURNS integer LANGUAGE plpgsql AS $$
DECLARE
  last integer;
  hash text;
  line jsonb;
BEGIN
  SELECT sequence, digest INTO STRICT last, hash FROM journal_head WHERE depot = stream FOR UPDATE;
  FOR line IN SELECT * FROM jsonb_array_elements(lines) LOOP
    last := last + 1;
    INSERT INTO journal (depot, sequence, recorded_at, actor, action, subject_kind, subject_name,
                         section, sections, content, previous_digest, digest)
    VALUES (stream, last, line->>'recorded_at', line->>'actor', line->>'action', line->>'subject_kind',
            line->>'subject_name', line->>'section', line->>'sections', line->>'content', hash,
            encode(sha256(convert_to((line->'parts'->>0) || hash || (line->'parts'->>1) || last
                                     || (line->'parts'->>2), 'UTF8')), 'hex'))
    RETURNING digest INTO hash;
  END LOOP;
  UPDATE journal_head SET sequence = last, digest = hash WHERE depot = stream;
  RETURN last;
END $$
"""
"""The function that migrations create on PostgreSQL."""


def head(connection: Connection, depot: str) -> tuple[int, str]:
    """Sequence and digest of the last line; (0, START) for an empty or absent chain."""
    row = connection.execute(
        sa.select(_head.c.sequence, _head.c.digest).where(_head.c.depot == depot)
    ).one_or_none()
    return (0, START) if row is None else (row.sequence, row.digest)


@dataclass(frozen=True, slots=True)
class Break:
    """The first line that does not fit, and why."""

    depot: str
    sequence: int
    reason: str


def verify(connection: Connection, depot: str) -> Break | None:
    """Walk a chain from its first line; None if every line fits and the head agrees."""
    expected, digest = 0, START
    with any_bytes(connection), closing(lines(connection, depot)) as rows:
        for row in rows:
            expected += 1
            if row["sequence"] != expected:
                return Break(depot, expected, f"line {expected} is missing; line {row['sequence']} follows")
            reason = _misfit(row, digest)
            if reason is not None:
                return Break(depot, expected, reason)
            digest = row["digest"]
        query = sa.select(_head.c.sequence, _head.c.digest).where(_head.c.depot == depot)
        if connection.execute(query).one_or_none() != (expected, digest):
            reason = "the head is gone or names another last line: the tail was cut or changed"
            return Break(depot, expected + 1, reason)
    return None


def _misfit(row: dict[str, Any], previous: str) -> str | None:
    """Why a line does not fit after the one whose digest is given."""
    try:
        "".join(row[name] for name in _TEXTS).encode()
    except (TypeError, UnicodeEncodeError):
        return "holds bytes that are no text"
    if row["previous_digest"] != previous:
        return "does not hold the digest of the line before"
    first, second, third = _parts(row)
    if row["digest"] != digest_of(f"{first}{previous}{second}{row['sequence']}{third}"):
        return "its content does not match its digest"
    only = json.loads(row["sections"])
    if row["section"] != (only[0] if only is not None and len(only) == 1 else None):
        return "its section column does not match its sections"
    return None


@contextmanager
def any_bytes(connection: Connection) -> Iterator[None]:
    """Read what is no UTF-8 too: SQLite keeps whatever bytes a column was overwritten with."""
    raw: Any = connection.connection.dbapi_connection
    if connection.dialect.name == "sqlite":
        raw.text_factory = partial(str, encoding="utf-8", errors="surrogateescape")
    try:
        yield
    finally:
        if connection.dialect.name == "sqlite":
            raw.text_factory = str


def lines(
    connection: Connection,
    depot: str,
    *,
    after: int = 0,
    most: int | None = None,
    subject_kind: str | None = None,
    section: str | None = None,
) -> Generator[dict[str, Any]]:
    """Lines in order of sequence, as column values, streamed; close it if it is not read to the end."""
    query = sa.select(_line).where(_line.c.depot == depot, _line.c.sequence > after)
    if subject_kind is not None:
        query = query.where(_line.c.subject_kind == subject_kind)
    if section is not None:
        listed = _line.c.sections.contains(canonical(section), autoescape=True)
        query = query.where(sa.or_(_line.c.section == section, _line.c.sections == "null", listed))
    query = query.order_by(_line.c.sequence)
    if most is not None:
        query = query.limit(most)
    with connection.execute(query, execution_options={"yield_per": 1000}) as result:
        for row in result.mappings():
            yield dict(row)


def at(connection: Connection, depot: str, sequence: int) -> str | None:
    """The digest of the line with that sequence, `START` for 0; None if there is none."""
    if sequence == 0:
        return START
    found = connection.execute(
        sa.select(_line.c.digest).where(_line.c.depot == depot, _line.c.sequence == sequence)
    ).scalar_one_or_none()
    return None if found is None else str(found)
