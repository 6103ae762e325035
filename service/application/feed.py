"""The journal as others read it: the change feed.

Appending is in `records/journal.py`; what is appended is decided by each noun.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from sqlalchemy.engine import Connection

from service.errors import ConflictError
from service.records import journal


@dataclass(frozen=True, slots=True)
class Followed:
    """From where a follower reads on: the last sequence it has, and that line's digest if it kept it."""

    after: int
    after_digest: str | None = None


def page(
    connection: Connection,
    depot: str,
    followed: Followed,
    *,
    most: int,
    subject_kind: str | None = None,
    section: str | None = None,
) -> list[dict[str, Any]]:
    """Lines after those that a follower has, in order, as column values.

    Raises
    ------
    ConflictError
        `feed-diverged`, if the journal does not hold the line followed from.
    """
    digest = journal.at(connection, depot, followed.after)
    if digest is None or followed.after_digest not in (None, digest):
        raise ConflictError("The journal does not hold the line you followed from.", kind="feed-diverged")
    found = journal.lines(
        connection, depot, after=followed.after, most=most, subject_kind=subject_kind, section=section
    )
    return list(found)


def line_text(row: dict[str, Any]) -> str:
    """One line as JSON; actor, sections and content stand in it exactly as they were hashed."""
    text = journal.canonical
    subject = text({"kind": row["subject_kind"], "name": row["subject_name"]})
    return (
        f'{{"action":{text(row["action"])},"actor":{row["actor"]},"content":{row["content"]},'
        f'"depot":{text(row["depot"])},"digest":"{row["digest"]}","previous_digest":"{row["previous_digest"]}",'
        f'"recorded_at":"{row["recorded_at"]}","sections":{row["sections"]},"sequence":{row["sequence"]},'
        f'"subject":{subject}}}'
    )
