"""The JSON members of statuses, verdicts and tasks, as answers, findings and lists all show them.

One place, so that a verdict reads the same wherever it is shown; no wire model is needed for it.
"""

from __future__ import annotations

from datetime import date, datetime
from typing import Any

from service.records.journal import instant_text
from service.rules.status import Status, TaskStatus, days_overdue
from service.rules.verdicts import Reason, Verdict


def reasons_json(reasons: tuple[Reason, ...]) -> list[dict[str, str]]:
    """Codes with their words."""
    return [{"code": reason.code, "reason": reason.reason} for reason in reasons]


def day(value: date | None) -> str | None:
    """An ISO date."""
    return None if value is None else value.isoformat()


def instant(value: datetime | None) -> str | None:
    """An RFC 3339 instant."""
    return None if value is None else instant_text(value)


def verdict_json(verdict: Verdict) -> dict[str, Any]:
    """A verdict with every documented member."""
    return {
        "limit": verdict.limit,
        "quantity": verdict.quantity,
        "test_point": verdict.test_point,
        "verdict": verdict.verdict,
        "hazard": verdict.hazard,
        "unit": verdict.unit,
        "measured": verdict.measured,
        "comparison": verdict.comparison,
        "judged": verdict.judged,
        "min": verdict.min,
        "near_min": verdict.near_min,
        "near_max": verdict.near_max,
        "max": verdict.max,
        "margin": verdict.margin,
        "book": verdict.book,
        "edition": verdict.edition,
        "clause": verdict.clause,
        "confirmed": verdict.confirmed,
        "concession": verdict.concession,
        "visit": verdict.visit,
        "visited_at": instant(verdict.visited_at),
        "stage": verdict.stage,
        "instrument": verdict.instrument,
        "doubtful": verdict.doubtful,
        "reasons": reasons_json(verdict.reasons),
    }


def task_json(task: TaskStatus, as_of: date) -> dict[str, Any]:
    """A task's state with every documented member."""
    return {
        "task": task.task,
        "state": task.state,
        "interval": task.interval,
        "clause": task.clause,
        "last_done_on": day(task.last_done_on),
        "visit": task.visit,
        "due_on": day(task.due_on),
        "grace_until_on": day(task.grace_until_on),
        "days_overdue": days_overdue(task, as_of),
        "concession": task.concession,
        "reasons": reasons_json(task.reasons),
    }


def summary_json(status: Status, sequence: int) -> dict[str, Any]:
    """What lists and visit answers say of a status."""
    return {
        "compliance": status.compliance,
        "overdue": status.overdue,
        "worst_hazard": status.worst_hazard,
        "next_due_on": day(status.next_due_on),
        "holds_until": day(status.holds_until),
        "sequence": sequence,
    }


def status_json(depot: str, status: Status, known_at: datetime | None, sequence: int) -> dict[str, Any]:
    """A status with every documented member."""
    return {
        "depot": depot,
        "section": status.section,
        "section_version": status.section_version,
        "state": status.state,
        "as_of": day(status.as_of),
        "as_known_at": instant(known_at),
        "book": status.book,
        "edition": status.edition,
        **summary_json(status, sequence),
        "verdicts": [verdict_json(verdict) for verdict in status.verdicts],
        "tasks": [task_json(task, status.as_of) for task in status.tasks],
        "cautions": reasons_json(status.cautions),
    }
