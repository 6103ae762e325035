"""Judging a whole depot for an audit, and what of each section not in order the weekly list shows.

Reads only. What is kept of it is in `audit_keeping`.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field, replace
from datetime import date, datetime
from typing import Any

from sqlalchemy.engine import Connection

from service.application import findings
from service.application.answers import day, instant, task_json
from service.application.facts import Gathered, Moment, gather
from service.records import journal
from service.records.unit_of_work import local_day
from service.rules.findings import FindingSeed, findings_of
from service.rules.status import Status, judge
from service.rules.words import SectionState, TaskState


@dataclass(slots=True)
class Survey:
    """What judging a depot found, before anything is written."""

    moment: Moment
    known_at: datetime
    sequence: int
    digest: str
    editions: dict[str, dict[str, str]] = field(default_factory=dict)
    judged: int = 0
    not_judged: int = 0
    counts: Counter[str] = field(default_factory=Counter)
    seeds: dict[str, tuple[str, FindingSeed]] = field(default_factory=dict)
    """identity → (section, seed)."""
    sections: dict[str, dict[str, Any]] = field(default_factory=dict)
    """Sections not in order or not judged, as their audit row shows them but for the findings."""


def survey(connection: Connection, moment: Moment, now: datetime) -> Survey:
    """Judge every section of a depot, in a read snapshot."""
    sequence, digest = journal.head(connection, moment.depot)
    made = Survey(moment, now, sequence, digest)
    for found in gather(connection, moment, None):
        _note(made, found, judge(found.facts, found.book, found.editions, moment.as_of))
    return made


def show_too(connection: Connection, made: Survey, names: list[str]) -> None:
    """Show sections that were not to be listed, but of which a finding stands.

    As judged on the audit's day; one recorded only after it, as of the day on which the audit is made.
    """
    today = local_day(made.known_at, made.moment.time_zone)
    for moment in (made.moment, replace(made.moment, as_of=today, present=False)):
        left = [name for name in names if name not in made.sections]
        for found in gather(connection, moment, left) if left else ():
            status = judge(found.facts, found.book, found.editions, moment.as_of)
            made.sections[status.section] = _section_json(found, status, moment.as_of)


def _note(made: Survey, found: Gathered, status: Status) -> None:
    made.counts[f"compliance_{status.compliance or 'not_judged'}"] += 1
    made.counts["overdue"] += status.overdue
    if status.compliance is None:
        made.not_judged += 1
        if status.state != SectionState.RECOVERED:
            made.sections[status.section] = _section_json(found, status, made.moment.as_of)
        return
    made.judged += 1
    if status.book is not None and status.edition is not None:
        edition = next(e for e in found.editions if e.edition == status.edition)
        made.editions[f"{edition.book}/{edition.edition}"] = {
            "book": edition.book,
            "edition": edition.edition,
            "digest": edition.digest,
        }
    seeds = findings_of(status, found.facts, made.moment.as_of)
    for seed in seeds:
        made.seeds[findings.identity_of(status.section, seed)] = (status.section, seed)
    if seeds:
        made.sections[status.section] = _section_json(found, status, made.moment.as_of)


def _section_json(found: Gathered, status: Status, as_of: date) -> dict[str, Any]:
    """What the weekly list shows of a section, but for its findings."""
    row = next(version for version in found.versions if version.version == status.section_version)
    last = found.facts.visits[-1] if found.facts.visits else None
    return {
        "section": status.section,
        "title": row.title,
        "line_name": row.line_name,
        "from_km": row.from_km,
        "to_km": row.to_km,
        "circuit_kind": row.circuit_kind,
        "traction": row.traction,
        "asset_reference": row.asset_reference,
        "state": status.state,
        "book": status.book,
        "edition": status.edition,
        "compliance": status.compliance,
        "overdue": status.overdue,
        "worst_hazard": status.worst_hazard,
        "next_due_on": day(status.next_due_on),
        "last_visited_at": instant(last.visited_at) if last is not None else None,
        "tasks": [task_json(t, as_of) for t in status.tasks if t.state in (TaskState.OVERDUE, TaskState.DUE)],
    }
