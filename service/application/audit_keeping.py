"""Keeping what an audit found: its findings brought up to date, its row, and the rows of its list.

Judging is in `audit_survey`; when and by whom it is done, in `audits`.
"""

from __future__ import annotations

import json
from collections import Counter, defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Row

from service.application import audit_survey, findings
from service.application.answers import verdict_json
from service.application.audit_survey import Survey
from service.records import bulk, journal
from service.records.journal import canonical
from service.records.tables import Audit, AuditRow, Finding
from service.records.unit_of_work import Transaction
from service.rules.findings import merge, rank
from service.rules.words import FindingKind, FindingState, Hazard

_audit = Audit.__table__  # type: ignore[attr-defined]
_row = AuditRow.__table__  # type: ignore[attr-defined]
_finding = Finding.__table__  # type: ignore[attr-defined]

LAST = 99
"""Sorts after every finding: sections listed only because they are not judged."""


@dataclass(frozen=True, slots=True)
class Kept:
    """Names of the findings that an audit opened, saw standing and cleared; the journal lines of those
    of which more changed than the day they were last seen on."""

    opened: list[str]
    seen: list[str]
    cleared: list[str]
    lines: list[journal.Entry]


def keep(tx: Transaction, survey: Survey, started_at: datetime) -> Kept:
    """Write an audit with its rows and its findings; the depot must be locked for itself alone."""
    kept = _merge(tx, survey)
    rows = _audit_rows(tx, survey)
    counts = _counts(survey, len(kept.opened), len(kept.cleared), rows)
    tx.connection.execute(
        sa.insert(_audit).values(
            depot=survey.moment.depot,
            audit=survey.moment.as_of,
            started_at=started_at,
            finished_at=tx.now,
            started_by=tx.actor.holder,
            known_at=survey.known_at,
            sequence=survey.sequence,
            digest=survey.digest,
            editions=canonical([survey.editions[name] for name in sorted(survey.editions)]),
            sections_judged=survey.judged,
            sections_not_judged=survey.not_judged,
            counts=canonical(counts),
        )
    )
    bulk.insert(tx.connection, _row, rows)
    return kept


def _merge(tx: Transaction, survey: Survey) -> Kept:
    """Open, see and clear findings."""
    depot, on = survey.moment.depot, survey.moment.as_of
    before = findings.open_rows(tx.connection, depot)
    merged = merge({name: FindingKind(row.kind) for name, row in before.items()}, survey.seeds)
    opened = findings.new_rows(tx, depot, {name: survey.seeds[name] for name in merged.opened}, on, on)
    cleared = [
        {"finding": row.finding, "state": FindingState.CLEARED, "cleared_on": on, "version": row.version + 1}
        for row in (before[name] for name in merged.cleared)
    ]
    seen = [_seen(before[name], survey) for name in merged.seen]
    changed = [one for one in seen if "version" in one]
    for changes in (cleared, changed, [one for one in seen if "version" not in one]):
        _update(tx, depot, changes)
    bulk.insert(tx.connection, _finding, opened)
    standing = {row.finding: row._asdict() for row in before.values()}
    written = [("finding_opened", row) for row in opened]
    written += [("finding_seen", standing[one["finding"]] | one) for one in changed]
    written += [("finding_cleared", standing[one["finding"]] | one) for one in cleared]
    return Kept(
        [row["finding"] for row in opened],
        [one["finding"] for one in seen],
        [one["finding"] for one in cleared],
        [
            journal.Entry(action, "finding", row["finding"], (row["section"],), findings.wire(row, on))
            for action, row in written
        ],
    )


def _seen(row: Row[Any], survey: Survey) -> dict[str, Any]:
    """What of a standing finding is new; another version only if it is more than the day it was seen.

    It is `new` in the first audit that lists it, `open` afterwards.
    """
    verdict, hazard = row.verdict, row.hazard
    if row.kind != FindingKind.FOUND_OUTSIDE:  # what a visit found stays as it was found
        seed = survey.seeds[row.identity][1]
        hazard = seed.hazard
        verdict = None if seed.verdict is None else canonical(verdict_json(seed.verdict))
    state = FindingState.NEW if row.first_audit_on is None else FindingState.OPEN
    on = survey.moment.as_of
    changes: dict[str, Any] = {
        "finding": row.finding,
        "state": state,
        "first_audit_on": row.first_audit_on or on,
        "verdict": verdict,
        "hazard": hazard,
        "last_seen_on": max(on, row.opened_on),  # a visit after the day audited may have raised it
    }
    if (state, verdict, hazard) != (row.state, row.verdict, row.hazard):
        changes["version"] = row.version + 1
    return changes


def _update(tx: Transaction, depot: str, changes: Sequence[Mapping[str, Any]]) -> None:
    """Write changes of findings, all with the same members, each under its own name."""
    if not changes:
        return
    members = [name for name in changes[0] if name != "finding"]
    statement = (
        sa.update(_finding)
        .where(_finding.c.depot == depot, _finding.c.finding == sa.bindparam("its_finding"))
        .values({name: sa.bindparam(f"its_{name}") for name in members})
    )
    tx.connection.execute(statement, [{f"its_{name}": one[name] for name in one} for one in changes])


def _audit_rows(tx: Transaction, survey: Survey) -> list[dict[str, Any]]:
    """One row a section with an open finding or not judged, gravest first."""
    depot, on = survey.moment.depot, survey.moment.as_of
    listed: dict[str, list[dict[str, Any]]] = defaultdict(list)
    for row in findings.open_rows(tx.connection, depot).values():
        listed[row.section].append(findings.wire(row, on))
    audit_survey.show_too(tx.connection, survey, sorted(listed.keys() - survey.sections.keys()))
    contents = []
    for section, shown in survey.sections.items():
        ordered = sorted(listed[section], key=_place)
        contents.append((_place(ordered[0]) if ordered else LAST, section, {**shown, "findings": ordered}))
    contents.sort(key=lambda item: item[:2])
    return [
        {"depot": depot, "audit": on, "section": section, "position": place, "content": canonical(content)}
        for place, (_, section, content) in enumerate(contents, start=1)
    ]


def _place(finding: Mapping[str, Any]) -> int:
    """Where a finding in its wire form stands on the list."""
    response = finding["response"]
    reported = response is not None and response["reported_at"] is not None
    hazard = None if finding["hazard"] is None else Hazard(finding["hazard"])
    return rank(FindingKind(finding["kind"]), hazard, reported=reported)


def _counts(survey: Survey, opened: int, cleared: int, rows: Sequence[Mapping[str, Any]]) -> dict[str, int]:
    counts = Counter({f"compliance_{word}": 0 for word in ("yes", "not_shown", "no", "not_judged")})
    counts.update({"overdue": 0, **survey.counts})
    counts.update({"findings_opened": opened, "findings_cleared": cleared, "sections_listed": len(rows)})
    for row in rows:
        for finding in json.loads(row["content"])["findings"]:
            counts[f"findings_{finding['kind']}"] += 1
            counts["findings_wrong_side"] += finding["hazard"] == Hazard.WRONG_SIDE
    return dict(counts)
