"""A section's verdicts and task states together, and until when they hold.

Pure: `judge` turns facts and the editions into a status as of a day. Single verdicts are in
`verdicts`, single tasks in `intervals`.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import date, timedelta

from service.rules.editions import Applying, Edition
from service.rules.evidence import Evidence
from service.rules.facts import Concession, SectionFacts
from service.rules.intervals import TaskStatus, days_overdue, task_status
from service.rules.limits import applying, in_force, next_change
from service.rules.rail_contact import poor_rail_contact
from service.rules.verdicts import Verdict, judge_limit, judge_permission
from service.rules.words import Compliance, Hazard, Reason, SectionState, TaskState, VerdictWord

__all__ = ["Reason", "Status", "TaskStatus", "Verdict", "days_overdue", "judge", "live"]

RAIL_SURFACE = Reason(
    "rail_surface_not_shown",
    "a drop shunt says nothing of the rail surface: a wheel meets a film that a clamped shunt does not",
)
NO_BOOK = Reason("no_book", "the section has no limit book")
NO_EDITION = Reason("no_edition_in_force", "no edition of the section's limit book is in force")
NO_LIMIT = Reason("no_limit_applies", "no limit of the edition in force applies to the section")
NOT_JUDGED = {
    SectionState.PLANNED: Reason("planned", "planned: not judged, owes nothing"),
    SectionState.OUT_OF_USE: Reason("out_of_use", "out of use: not judged, owes nothing"),
    SectionState.RECOVERED: Reason("recovered", "recovered: not judged, owes nothing"),
}

_DAY = timedelta(days=1)


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


def live(concession: Concession, as_of: date) -> bool:
    """Whether a concession holds on a day: from its first to its last, and before the day it was ended."""
    ended_on = concession.ended_on
    return concession.from_on <= as_of <= concession.until_on and (ended_on is None or as_of < ended_on)


def judge(facts: SectionFacts, book: str | None, editions: tuple[Edition, ...], as_of: date) -> Status:
    """Judge one section as of a day.

    `editions` are all issued or withdrawn editions of `book`, any order; the one in force on
    `as_of` judges. Of `facts` only what counts is used: readings of visits that do not are ignored.
    """
    record = facts.record
    edition = in_force(editions, as_of) if book is not None else None
    applies = Applying((), ()) if edition is None else applying(edition, record)
    if record.state is not SectionState.IN_USE:
        return _not_judged(facts, book, edition, editions, applies, as_of)
    evidence = Evidence(facts, as_of)
    by_limit, by_task = _live(facts.concessions, as_of)
    verdicts: list[Verdict] = []
    if edition is not None:
        for limit, missing in applies.limits:
            verdicts.extend(judge_limit(edition, limit, missing, evidence, by_limit))
        if applies.permission is not None:
            verdicts.append(judge_permission(edition, applies.permission, record, by_limit))
    tasks = tuple(task_status(task, missing, evidence, by_task) for task, missing in applies.tasks)
    contact = poor_rail_contact(evidence, applies)
    cautions = _cautions(book, edition, applies, contact, verdicts)
    return Status(
        section=record.section,
        section_version=record.version,
        state=record.state,
        as_of=as_of,
        book=book,
        edition=None if edition is None else edition.edition,
        compliance=_compliance(verdicts, applies),
        overdue=any(task.state is TaskState.OVERDUE for task in tasks),
        worst_hazard=_worst_hazard(verdicts, contact),
        next_due_on=min((task.due_on for task in tasks if task.due_on is not None), default=None),
        holds_until=_holds_until(facts, editions, tasks, evidence.next_calibration_on, as_of),
        verdicts=tuple(verdicts),
        tasks=tasks,
        cautions=cautions,
    )


def _not_judged(
    facts: SectionFacts,
    book: str | None,
    edition: Edition | None,
    editions: tuple[Edition, ...],
    applies: Applying,
    as_of: date,
) -> Status:
    record = facts.record
    tasks = tuple(
        TaskStatus(task.task, TaskState.NOT_OWED, task.interval, task.clause, None, None, None, None, None)
        for task, _ in applies.tasks
    )
    return Status(
        section=record.section,
        section_version=record.version,
        state=record.state,
        as_of=as_of,
        book=book,
        edition=None if edition is None else edition.edition,
        compliance=None,
        overdue=False,
        worst_hazard=None,
        next_due_on=None,
        holds_until=_holds_until(facts, editions, (), None, as_of),
        verdicts=(),
        tasks=tasks,
        cautions=(NOT_JUDGED[record.state],),
    )


def _live(
    concessions: Iterable[Concession], as_of: date
) -> tuple[Mapping[str, list[Concession]], Mapping[str, list[Concession]]]:
    """Live concessions by limit and by task, each in order of name."""
    by_limit: dict[str, list[Concession]] = {}
    by_task: dict[str, list[Concession]] = {}
    for concession in sorted(concessions, key=lambda one: one.concession):
        if live(concession, as_of):
            if concession.limit is not None:
                by_limit.setdefault(concession.limit, []).append(concession)
            if concession.task is not None:
                by_task.setdefault(concession.task, []).append(concession)
    return by_limit, by_task


def _compliance(verdicts: list[Verdict], applies: Applying) -> Compliance:
    """Never `yes` unless a limit applies and every verdict is inside."""
    words = {verdict.verdict for verdict in verdicts}
    if VerdictWord.OUTSIDE in words:
        return Compliance.NO
    if (
        not words
        or not applies.limits
        or not words.isdisjoint((VerdictWord.UNPROVEN, VerdictWord.NOT_MEASURED))
    ):
        return Compliance.NOT_SHOWN
    return Compliance.YES


def _worst_hazard(verdicts: list[Verdict], contact: Reason | None) -> Hazard | None:
    if contact is not None:
        return Hazard.WRONG_SIDE
    hazards = {verdict.hazard for verdict in verdicts if verdict.verdict is VerdictWord.OUTSIDE}
    if Hazard.WRONG_SIDE in hazards:
        return Hazard.WRONG_SIDE
    return Hazard.RIGHT_SIDE if hazards else None


def _cautions(
    book: str | None,
    edition: Edition | None,
    applies: Applying,
    contact: Reason | None,
    verdicts: list[Verdict],
) -> tuple[Reason, ...]:
    cautions = []
    if contact is not None:
        cautions.append(contact)
    if book is None:
        cautions.append(NO_BOOK)
    elif edition is None:
        cautions.append(NO_EDITION)
    elif not applies.limits:
        cautions.append(NO_LIMIT)
    if any(verdict.quantity == "drop_shunt" for verdict in verdicts):
        cautions.append(RAIL_SURFACE)
    return tuple(cautions)


def _holds_until(
    facts: SectionFacts,
    editions: tuple[Edition, ...],
    tasks: Iterable[TaskStatus],
    next_calibration_on: date | None,
    as_of: date,
) -> date | None:
    """The day before the first on which time alone may change the status; None if it never does."""
    begins = [facts.next_version_on, next_change(editions, as_of), next_calibration_on]
    lasts = [concession.until_on for concession in facts.concessions]
    for concession in facts.concessions:
        begins += (concession.from_on, concession.ended_on)
    for task in tasks:
        if task.state is TaskState.DUE:
            lasts += () if task.grace_until_on is None else (task.grace_until_on,)
        elif task.state is not TaskState.OVERDUE:
            begins.append(task.due_on)
    lasts += [day - _DAY for day in begins if day is not None and day > as_of]
    return min((day for day in lasts if day >= as_of), default=None)
