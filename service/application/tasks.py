"""The tasks that the limit books know, by name: what a visit may say was done.

When a task is due is judged in `rules`.
"""

from __future__ import annotations

from dataclasses import dataclass

import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.application.book_content import Content
from service.records.tables import BookEdition

_edition = BookEdition.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class KnownTask:
    """A task and the editions, as (book, edition), that name it; the title is the newest's."""

    task: str
    title: str | None
    editions: tuple[tuple[str, str], ...]


def known(connection: Connection) -> list[KnownTask]:
    """Every task of every edition kept, drafts included, in order of name."""
    columns = (_edition.c.book, _edition.c.edition, _edition.c.content)
    rows = connection.execute(sa.select(*columns).order_by(_edition.c.drafted_at, *columns[:2]))
    titles: dict[str, str | None] = {}
    editions: dict[str, list[tuple[str, str]]] = {}
    for row in rows:
        for task in Content.model_validate_json(row.content).tasks:
            titles[task.task] = task.title
            editions.setdefault(task.task, []).append((row.book, row.edition))
    return [KnownTask(task, titles[task], tuple(editions[task])) for task in sorted(titles)]
