"""Audits: a depot judged as of a date, once, whoever asks; and what is printed from it.

An audit is computed in a read snapshot and takes the locks only to write. What it found of each section
not in order is kept as it was shown.
"""

from __future__ import annotations

import json
from collections import Counter, defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from dateutil.relativedelta import FR, MO, SA, SU, TH, TU, WE, relativedelta
from sqlalchemy.engine import Connection, Row

from service.application import findings
from service.application.answers import day, instant, task_json, verdict_json
from service.application.context import Service
from service.application.facts import Gathered, Moment, gather
from service.application.status import depot_row
from service.errors import ConflictError, Fault, NotAcceptableError, NotFoundError
from service.records import bulk, journal
from service.records.journal import canonical
from service.records.tables import Audit, AuditRow, Depot, Finding
from service.records.unit_of_work import Actor, Transaction, local_day
from service.rules.findings import FindingSeed, findings_of, rank
from service.rules.status import Status, judge
from service.rules.words import FindingKind, FindingState, Hazard, SectionState, TaskState

_audit = Audit.__table__  # type: ignore[attr-defined]
_row = AuditRow.__table__  # type: ignore[attr-defined]
_depot = Depot.__table__  # type: ignore[attr-defined]
_finding = Finding.__table__  # type: ignore[attr-defined]

WEEKDAYS = (MO, TU, WE, TH, FR, SA, SU)

LAST = 99
"""Sorts after every finding: sections listed only because they are not judged."""

CAUTION = (
    "Advice from records, not an authority to work or to run trains: the railway's own rules and a "
    "competent, licensed person decide. What was not measured is not shown to be safe."
)
"""Stands at the head of every weekly list."""


@dataclass(slots=True)
class _Survey:
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


def run(service: Service, actor: Actor, depot: str, as_of: date | None = None) -> Row[Any]:
    """Audit a depot as of a date (default: its today) and return the audit's row.

    The same date again gives the stored audit. Raises NotAcceptableError for a date in the future,
    ConflictError for one before the last audit's.
    """
    now = service.clock()
    with service.read(snapshot=True) as connection:
        row = depot_row(connection, depot)
        today = local_day(now, row.time_zone)
        on = as_of or today
        stored = _stored_or_refused(connection, depot, on, today)
        if stored is not None:
            return stored
        survey = _survey(connection, Moment(depot, row.time_zone, on, None, present=on == today), now)
    with service.unit_of_work(actor) as tx:
        tx.lock_depot(depot, exclusive=True)
        stored = _stored_or_refused(tx.connection, depot, on, today)
        if stored is None:
            _keep(tx, survey, now)
        return get(tx.connection, depot, on)


def _stored_or_refused(connection: Connection, depot: str, on: date, today: date) -> Row[Any] | None:
    if on > today:
        fault = Fault("future", "an audit is as of the depot's today or an earlier day", "/as_of")
        raise NotAcceptableError("An audit cannot be as of a day in the future.", (fault,))
    query = sa.select(_audit).where(_audit.c.depot == depot, _audit.c.audit == on)
    stored = connection.execute(query).one_or_none()
    if stored is None:
        last = connection.execute(
            sa.select(sa.func.max(_audit.c.audit)).where(_audit.c.depot == depot)
        ).scalar()
        if last is not None and on < last:
            raise ConflictError(
                "A later audit is stored: audits go forward, since findings persist from one to the next.",
                (Fault("before_last_audit", "lies before the last audit", "/as_of"),),
                kind="before-last-audit",
            )
    return stored


def _survey(connection: Connection, moment: Moment, now: datetime) -> _Survey:
    sequence, digest = journal.head(connection, moment.depot)
    survey = _Survey(moment, now, sequence, digest)
    for found in gather(connection, moment, None):
        status = judge(found.facts, found.book, found.editions, moment.as_of)
        _note(survey, found, status)
    return survey


def _note(survey: _Survey, found: Gathered, status: Status) -> None:
    survey.counts[f"compliance_{status.compliance or 'not_judged'}"] += 1
    survey.counts["overdue"] += status.overdue
    if status.compliance is None:
        survey.not_judged += 1
        if status.state != SectionState.RECOVERED:
            survey.sections[status.section] = _section_json(found, status, survey.moment.as_of)
        return
    survey.judged += 1
    if status.book is not None and status.edition is not None:
        edition = next(e for e in found.editions if e.edition == status.edition)
        survey.editions[f"{edition.book}/{edition.edition}"] = {
            "book": edition.book,
            "edition": edition.edition,
            "digest": edition.digest,
        }
    seeds = findings_of(status, found.facts, survey.moment.as_of)
    for seed in seeds:
        survey.seeds.setdefault(findings.identity_of(status.section, seed), (status.section, seed))
    if seeds:
        survey.sections[status.section] = _section_json(found, status, survey.moment.as_of)


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


def _keep(tx: Transaction, survey: _Survey, started_at: datetime) -> None:
    """Write the audit, its rows and its findings, and one journal line."""
    depot, on = survey.moment.depot, survey.moment.as_of
    before = findings.open_rows(tx.connection, depot)
    cleared = [
        row
        for name, row in before.items()
        if name not in survey.seeds and row.kind != FindingKind.FOUND_OUTSIDE
    ]
    new = {name: seed for name, seed in survey.seeds.items() if name not in before}
    opened = findings.new_rows(tx, depot, new, on, on)
    seen = [
        row for name, row in before.items() if row.kind == FindingKind.FOUND_OUTSIDE or name in survey.seeds
    ]
    _clear(tx, depot, cleared, on)
    _see(tx, depot, seen, survey)
    bulk.insert(tx.connection, _finding, opened)
    rows = _audit_rows(tx, survey)
    counts = _counts(survey, len(opened), len(cleared), rows)
    tx.connection.execute(
        sa.insert(_audit).values(
            depot=depot,
            audit=on,
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
    content = {
        **wire(get(tx.connection, depot, on)),
        "opened": [row["finding"] for row in opened],
        "cleared": [row.finding for row in cleared],
    }
    tx.append(depot, [journal.Entry("audit_finished", "audit", on.isoformat(), (), content)])


def _clear(tx: Transaction, depot: str, rows: Sequence[Row[Any]], on: date) -> None:
    if not rows:
        return
    statement = (
        sa.update(_finding)
        .where(_finding.c.depot == depot, _finding.c.finding == sa.bindparam("one"))
        .values(state=FindingState.CLEARED, cleared_on=on, version=_finding.c.version + 1)
    )
    tx.connection.execute(statement, [{"one": row.finding} for row in rows])


def _see(tx: Transaction, depot: str, rows: Sequence[Row[Any]], survey: _Survey) -> None:
    """Findings that stand: `new` in the first audit that lists them, `open` afterwards."""
    changes = []
    for row in rows:
        verdict, hazard = row.verdict, row.hazard
        if row.kind != FindingKind.FOUND_OUTSIDE:  # what a visit found stays as it was found
            seed = survey.seeds[row.identity][1]
            hazard = seed.hazard
            verdict = None if seed.verdict is None else canonical(verdict_json(seed.verdict))
        changes.append(
            {
                "one": row.finding,
                "new_state": FindingState.NEW if row.first_audit_on is None else FindingState.OPEN,
                "first": row.first_audit_on or survey.moment.as_of,
                "new_verdict": verdict,
                "new_hazard": hazard,
            }
        )
    if not changes:
        return
    statement = (
        sa.update(_finding)
        .where(_finding.c.depot == depot, _finding.c.finding == sa.bindparam("one"))
        .values(
            state=sa.bindparam("new_state"),
            first_audit_on=sa.bindparam("first"),
            verdict=sa.bindparam("new_verdict"),
            hazard=sa.bindparam("new_hazard"),
            last_seen_on=survey.moment.as_of,
            version=_finding.c.version + 1,
        )
    )
    tx.connection.execute(statement, changes)


def _audit_rows(tx: Transaction, survey: _Survey) -> list[dict[str, Any]]:
    """One row a section with an open finding or not judged, gravest first."""
    depot, on = survey.moment.depot, survey.moment.as_of
    listed: dict[str, list[dict[str, Any]]] = defaultdict(list)
    for row in findings.open_rows(tx.connection, depot).values():
        listed[row.section].append(findings.wire(row, on))
    missing = sorted(listed.keys() - survey.sections.keys())
    for found in gather(tx.connection, survey.moment, missing) if missing else ():
        status = judge(found.facts, found.book, found.editions, on)
        survey.sections[status.section] = _section_json(found, status, on)
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


def _counts(survey: _Survey, opened: int, cleared: int, rows: Sequence[Mapping[str, Any]]) -> dict[str, int]:
    counts = Counter({f"compliance_{word}": 0 for word in ("yes", "not_shown", "no", "not_judged")})
    counts.update({"overdue": 0, **survey.counts})
    counts.update({"findings_opened": opened, "findings_cleared": cleared, "sections_listed": len(rows)})
    for row in rows:
        for finding in json.loads(row["content"])["findings"]:
            counts[f"findings_{finding['kind']}"] += 1
            counts["findings_wrong_side"] += finding["hazard"] == Hazard.WRONG_SIDE
    return dict(counts)


def wire(row: Row[Any]) -> dict[str, Any]:
    """An audit as answers and the journal show it."""
    return {
        "depot": row.depot,
        "audit": day(row.audit),
        "state": "finished",
        "started_at": instant(row.started_at),
        "finished_at": instant(row.finished_at),
        "started_by": row.started_by,
        "known_at": instant(row.known_at),
        "sequence": row.sequence,
        "digest": row.digest,
        "editions": json.loads(row.editions),
        "sections_judged": row.sections_judged,
        "sections_not_judged": row.sections_not_judged,
        "counts": json.loads(row.counts),
        "caution": CAUTION,
    }


def get(connection: Connection, depot: str, on: date | None) -> Row[Any]:
    """An audit's row; the latest for None. NotFoundError if there is none."""
    query = sa.select(_audit).where(_audit.c.depot == depot)
    query = query.where(_audit.c.audit == on) if on is not None else query.order_by(_audit.c.audit.desc())
    row = connection.execute(query.limit(1)).one_or_none()
    if row is None:
        raise NotFoundError("This depot has no such audit.")
    return row


def page(connection: Connection, depot: str, after: date | None, most: int) -> list[Row[Any]]:
    """Audits in order of date, from `after` on, at most `most`."""
    query = sa.select(_audit).where(_audit.c.depot == depot)
    if after is not None:
        query = query.where(_audit.c.audit > after)
    return list(connection.execute(query.order_by(_audit.c.audit).limit(most)))


@dataclass(frozen=True, slots=True)
class WeeklyList:
    """What a weekly list shows: its head, and its sections in order, each with its findings."""

    depot: str
    title: str
    time_zone: str
    audit: dict[str, Any]
    sections: list[dict[str, Any]]


def weekly_list(connection: Connection, depot: str, on: date | None) -> WeeklyList:
    """The list of one audit (the latest for None), as it was printed then."""
    row = get(connection, depot, on)
    where = (_row.c.depot == depot, _row.c.audit == row.audit)
    contents = connection.execute(sa.select(_row.c.content).where(*where).order_by(_row.c.position)).scalars()
    owner = depot_row(connection, depot)
    return WeeklyList(depot, owner.title, owner.time_zone, wire(row), [json.loads(text) for text in contents])


def due(connection: Connection, now: datetime) -> list[tuple[str, date]]:
    """Depots whose weekly hour has passed without its audit, with the day it is due as of."""
    newest = sa.select(_audit.c.depot, sa.func.max(_audit.c.audit).label("on")).group_by(_audit.c.depot)
    last: dict[str, date] = {row.depot: row.on for row in connection.execute(newest)}
    found = []
    for row in connection.execute(sa.select(_depot).order_by(_depot.c.depot)):
        on = last_audit_day(now, row.time_zone, row.audit_weekday, row.audit_hour)
        began = local_day(row.created_at, row.time_zone)
        if on >= began and (row.depot not in last or last[row.depot] < on):
            found.append((row.depot, on))
    return found


def last_audit_day(now: datetime, time_zone: str, weekday: int, hour: int) -> date:
    """The local day of the latest weekly hour that is not after `now`. Weekday 0 is Monday."""
    local = now.astimezone(ZoneInfo(time_zone))
    hours = relativedelta(weekday=WEEKDAYS[weekday](-1), hour=hour, minute=0, second=0, microsecond=0)
    at = local + hours
    return (at if at <= local else local - relativedelta(days=1) + hours).date()
