"""A section's verdicts and task states together, and until when they hold.

Pure: `judge` turns facts and the editions into a status as of a day.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

from service.rules.facts import SectionFacts
from service.rules.limits import Edition
from service.rules.verdicts import Reason, Verdict
from service.rules.words import Compliance, Hazard, SectionState, TaskState


@dataclass(frozen=True, slots=True)
class TaskStatus:
    """One task of one section. `days_overdue` is not kept: see `days_overdue(…)`."""

    task: str
    state: TaskState
    interval: str | None
    clause: str
    last_done_on: date | None
    visit: str | None
    due_on: date | None
    grace_until_on: date | None
    concession: str | None
    reasons: tuple[Reason, ...] = ()


@dataclass(frozen=True, slots=True)
class Status:
    """`compliance` is None for a section that is not judged (planned, out of use, recovered).

    `holds_until` is the last day on which this status holds if nothing is written; None for ever.
    `next_due_on` is the earliest `due_on` of its tasks.
    """

    section: str
    section_version: int
    state: SectionState
    as_of: date
    book: str | None
    edition: str | None
    compliance: Compliance | None
    overdue: bool
    worst_hazard: Hazard | None
    next_due_on: date | None
    holds_until: date | None
    verdicts: tuple[Verdict, ...]
    tasks: tuple[TaskStatus, ...]
    cautions: tuple[Reason, ...]


def judge(facts: SectionFacts, book: str | None, editions: tuple[Edition, ...], as_of: date) -> Status:
    """Judge one section as of a day.

    `editions` are all issued or withdrawn editions of `book`, any order; the one in force on `as_of` judges.
    """
    raise NotImplementedError
