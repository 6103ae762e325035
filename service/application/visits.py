"""Take visits from handhelds: store them once, say what they show, void them.

One visit is a batch of one. Whether one is taken is decided in `visit_intake`, reading them again is in
`visit_records`; what they prove is judged in `rules`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Any

import sqlalchemy as sa

from service.application import findings, status, visit_content, visit_intake, visit_records
from service.application.fact_queries import Found, find
from service.application.visit_cautions import Caution, cautions
from service.application.visit_content import Draft
from service.application.visit_intake import Accepted, Decision, Intake, judged_columns
from service.application.visit_reads import Read, lock_and_read
from service.errors import ConflictError, NotFoundError, ShuntbookError
from service.records import bulk, journal, latest
from service.records.journal import instant_text
from service.records.tables import ReadingRow, VisitRow, VoidRow
from service.records.unit_of_work import Transaction
from service.rules import facts as rules
from service.rules.status import Status

_visit = VisitRow.__table__  # type: ignore[attr-defined]
_void = VoidRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of one posted visit. `status` is the section's after all of the batch."""

    visit: str | None
    section: str | None
    outcome: str
    received_at: datetime | None = None
    clock_offset_s: int | None = None
    cautions: tuple[Caution, ...] = ()
    problem: ShuntbookError | None = None
    status: Status | None = None
    sequence: int | None = None


def post(tx: Transaction, depot: str, drafts: Sequence[Draft], clock_offset_s: int | None) -> list[Outcome]:
    """Store visits and judge their sections; one outcome a draft, in order.

    A draft that cannot be taken is refused by itself, with a problem; the others are stored. The same id
    with the same content is `already_stored`, and is told again what it shows.
    """
    read = lock_and_read(tx, depot, drafts)
    intake = Intake(tx, read.moment.time_zone, read.register, read.known, read.found.visits, clock_offset_s)
    decisions = [intake.decide(draft) for draft in drafts]
    accepted = list(intake.accepted.values())
    rows = [
        bulk.Rows(_visit, [_visit_row(tx, depot, item, clock_offset_s) for item in accepted]),
        bulk.Rows(_reading, [row for item in accepted for row in _reading_rows(depot, item)]),
    ]
    found = _with_accepted(read, accepted)
    replacing = _replacing(read, accepted)
    rows.append(latest.advanced([row for row in rows[1].rows if row["section"] not in replacing]))
    if replacing:  # which readings decide is told by all that is stored
        bulk.insert_all(tx.connection, *rows)
        rows = []
        found = _derived(tx, read, replacing, found)
    answered = sorted({one.draft.section for one in decisions if one.accepted is not None})
    judged = {
        facts.record.section: (facts, now)
        for facts, now in status.judge_found(tx.connection, read.moment, answered, read.register, found)
    }
    sequence = _keep(tx, depot, rows, accepted, judged, clock_offset_s)
    return [_outcome(decision, judged, sequence) for decision in decisions]


def _replacing(read: Read, accepted: Sequence[Accepted]) -> list[str]:
    """Sections where a visit just taken replaces one, or is replaced by one that came before it."""
    replaced = {visit.replaces for visit in read.known.values()}
    return sorted(
        {
            item.draft.section
            for item in accepted
            if item.draft.replaces is not None or item.draft.visit in replaced
        }
    )


def _with_accepted(read: Read, accepted: Sequence[Accepted]) -> Found:
    """What was read, with the visits just taken."""
    visits = {section: list(several) for section, several in read.found.visits.items()}
    readings = {section: list(several) for section, several in read.found.readings.items()}
    for item in accepted:
        visits.setdefault(item.draft.section, []).append(item.rule)
        readings.setdefault(item.draft.section, []).extend(item.readings)
    return Found(visits, readings, read.found.concessions)


def _derived(tx: Transaction, read: Read, sections: Sequence[str], found: Found) -> Found:
    """Derive `latest` of sections again and read them anew."""
    for section in sections:
        visit_records.derive_latest(tx.connection, read.moment.depot, section)
    anew = find(tx.connection, read.moment, sections, read.register.history)
    return Found({**found.visits, **anew.visits}, {**found.readings, **anew.readings}, found.concessions)


def _visit_row(tx: Transaction, depot: str, item: Accepted, clock_offset_s: int | None) -> dict[str, Any]:
    draft = item.draft
    return {
        "depot": depot,
        "section": draft.section,
        **judged_columns(draft),
        "received_at": tx.now,
        "received_by": tx.actor.key,
        "holder": tx.actor.holder,
        "found_outside": item.found_outside,
        "clock_offset_s": clock_offset_s,
        "device": draft.device,
        "tester": draft.tester,
        "ballast_state": draft.ballast_state,
        "air_temperature_c": draft.air_temperature_c,
        "remarks": draft.remarks,
        "pack": draft.pack,
        "digest": item.digest,
    }


def _reading_rows(depot: str, item: Accepted) -> list[dict[str, Any]]:
    draft = item.draft
    return [
        {
            **values,
            "depot": depot,
            "section": draft.section,
            "visited_at": draft.visited_at,
            "value_given": float(given.value),
            "unit_given": given.unit,
        }
        for given, values in zip(draft.readings, item.rows, strict=True)
    ]


def rebuild_latest(tx: Transaction, depot: str) -> int:
    """Derive `latest` of every section of a depot again; how many sections. A sound table is unchanged."""
    tx.lock_depot(depot, exclusive=True)
    query = sa.select(_visit.c.section).where(_visit.c.depot == depot).distinct().order_by(_visit.c.section)
    sections = tx.connection.execute(query).scalars().all()
    for section in sections:
        visit_records.derive_latest(tx.connection, depot, section)
    return len(sections)


_Judged = Mapping[str, tuple[rules.SectionFacts, Status]]


def _keep(
    tx: Transaction,
    depot: str,
    rows: Sequence[bulk.Rows],
    accepted: Sequence[Accepted],
    judged: _Judged,
    clock_offset_s: int | None,
) -> int:
    """Keep rows, findings, journal lines and statuses of what was taken; the journal's sequence then."""
    lines: list[journal.Entry] = []
    for item in accepted:
        lines.extend(findings.raise_found_outside(tx, depot, item.draft.section, item.rule, item.outside))
        content = _wire(item.draft, tx, item.digest, clock_offset_s)
        lines.append(journal.Entry("visit_stored", "visit", item.draft.visit, (item.draft.section,), content))
    if not lines:
        return journal.head(tx.connection, depot)[0]
    touched = sorted({item.draft.section for item in accepted} & judged.keys())
    return tx.write(depot, rows, lines, status.summaries(depot, (judged[name][1] for name in touched)))


def _wire(draft: Draft, tx: Transaction, digest: str, clock_offset_s: int | None) -> dict[str, Any]:
    return {
        **visit_content.wire(draft),
        "received_at": instant_text(tx.now),
        "clock_offset_s": clock_offset_s,
        "received_by": tx.actor.key,
        "digest": digest,
        "voided": None,
    }


def _outcome(decision: Decision, judged: _Judged, sequence: int) -> Outcome:
    draft = decision.draft
    outcome = Outcome(
        draft.visit,
        draft.section,
        decision.outcome,
        decision.received_at,
        decision.clock_offset_s,
        problem=decision.problem,
    )
    if decision.accepted is None or draft.section not in judged:
        return outcome
    found, now = judged[draft.section]
    told = tuple(cautions(decision.accepted, found, now, decision.clock_offset_s))
    return replace(outcome, status=now, sequence=sequence, cautions=told)


def void(tx: Transaction, depot: str, visit: str, why: str) -> dict[str, Any]:
    """Declare a visit void; what it says stays, it counts no longer. Returns the visit's wire form.

    Raises NotFoundError, ConflictError if it is void already or a second holder is needed.
    """
    row = tx.lock_depot(depot)
    section = tx.connection.execute(
        sa.select(_visit.c.section).where(_visit.c.depot == depot, _visit.c.visit == visit)
    ).scalar_one_or_none()
    if section is None:
        raise NotFoundError("This depot has no such visit.")
    tx.lock_sections(depot, [section])
    before = visit_records.get(tx.connection, depot, visit)
    if before["voided"] is not None:
        raise ConflictError("The visit is void already.", kind="already-void")
    held = tx.connection.execute(
        sa.select(_visit.c.holder, _visit.c.found_outside).where(
            _visit.c.depot == depot, _visit.c.visit == visit
        )
    ).one()
    if held.found_outside and held.holder == tx.actor.holder:
        raise visit_intake.second_holder(None)
    tx.connection.execute(
        sa.insert(_void).values(
            depot=depot, visit=visit, voided_at=tx.now, voided_by=tx.actor.holder, why=why
        )
    )
    visit_records.derive_latest(tx.connection, depot, section)
    content = visit_records.get(tx.connection, depot, visit)
    entry = journal.Entry("visit_voided", "visit", visit, (section,), content)
    status.rejudge_and_append(tx, row, [section], [entry])
    return content
