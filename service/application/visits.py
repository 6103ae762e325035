"""Take visits from handhelds: store them once, say what they show, void them.

One visit is a batch of one. What a visit says by itself is in `visit_content`, reading them again in
`visit_records`; what they prove is judged in `rules`.
"""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application import facts, findings, section_records, status, visit_content, visit_records
from service.application.fact_rows import VISIT_COLUMNS, WITH_VOID, reading_of, version_on, visit_of
from service.application.visit_content import Draft
from service.errors import (
    ConflictError,
    Fault,
    ForbiddenError,
    NotAcceptableError,
    NotFoundError,
    ShuntbookError,
)
from service.records import bulk, journal, latest
from service.records.journal import instant_text
from service.records.tables import ReadingRow, VisitRow, VoidRow
from service.records.unit_of_work import Transaction
from service.rules import doubtful, readings, verdicts
from service.rules import facts as rules
from service.rules.limits import in_force
from service.rules.quantities import to_base
from service.rules.status import Status
from service.rules.verdicts import Verdict
from service.rules.words import Hazard, SectionState, Stage, VerdictWord

_visit = VisitRow.__table__  # type: ignore[attr-defined]
_void = VoidRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]

CLOCK_OFFSET_S = 120
"""A handheld's clock further off than this is a caution."""


@dataclass(frozen=True, slots=True)
class Caution:
    """Something the technician should know; `pointer` into the visit, where it has a place."""

    code: str
    reason: str
    pointer: str | None = None


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


@dataclass(slots=True)
class _Accepted:
    """A draft on its way into the tables."""

    draft: Draft
    digest: str
    rule: rules.Visit
    rows: list[dict[str, Any]]
    cautions: list[Caution] = field(default_factory=list)
    outside: tuple[Verdict, ...] = ()


def post(tx: Transaction, depot: str, drafts: Sequence[Draft], clock_offset_s: int | None) -> list[Outcome]:
    """Store visits and judge their sections; one outcome a draft, in order.

    A draft that cannot be taken is refused by itself, with a problem; the others are stored. The same id
    with the same content is `already_stored`.
    """
    row = tx.lock_depot(depot)
    sections = tx.lock_sections(depot, [draft.section for draft in drafts])
    moment = status.present(row, tx.now)
    register = facts.remembered(tx, moment, row.epoch, sorted(sections))
    known = _known(tx.connection, depot, drafts)
    outcomes: list[Outcome] = []
    accepted: dict[str, _Accepted] = {}
    for draft in drafts:
        outcome = _decide(tx, draft, known, accepted, register, row.time_zone, clock_offset_s)
        outcomes.append(outcome)
    _store(tx, depot, list(accepted.values()), known, clock_offset_s)
    register = replace(register, visits=_visits_now(moment, known, accepted))
    judged, sequence = _judge(tx, row, register, outcomes, list(accepted.values()), clock_offset_s)
    return [_finished(outcome, judged, sequence, accepted) for outcome in outcomes]


@dataclass(frozen=True, slots=True)
class _Known:
    """A visit already stored. `columns` are those of `fact_rows.VISIT_COLUMNS`."""

    columns: tuple[Any, ...]
    section: str
    replaces: str | None
    digest: str
    received_at: datetime
    holder: str
    found_outside: bool
    clock_offset_s: int | None


_KNOWN = tuple(_visit.c[name] for name in list(_Known.__dataclass_fields__)[1:])


def _known(connection: Connection, depot: str, drafts: Sequence[Draft]) -> dict[str, _Known]:
    """Every stored visit of the drafts' sections, and those that the drafts repeat, replace or are
    replaced by."""
    ids = sorted({draft.visit for draft in drafts})
    named = sorted({*ids, *(draft.replaces for draft in drafts if draft.replaces is not None)})
    query = (
        sa.select(*VISIT_COLUMNS, *_KNOWN)
        .select_from(WITH_VOID)
        .where(
            _visit.c.depot == depot,
            sa.or_(
                _visit.c.section.in_(sorted({draft.section for draft in drafts})),
                _visit.c.visit.in_(named),
                _visit.c.replaces.in_(ids),
            ),
        )
    )
    width = len(VISIT_COLUMNS)
    return {row[1]: _Known(tuple(row[:width]), *row[width:]) for row in connection.execute(query)}


def _decide(
    tx: Transaction,
    draft: Draft,
    known: Mapping[str, _Known],
    accepted: dict[str, _Accepted],
    register: facts.Register,
    time_zone: str,
    clock_offset_s: int | None,
) -> Outcome:
    digest = visit_content.digest(draft)
    before = known.get(draft.visit)
    twin = accepted.get(draft.visit)
    if before is not None or twin is not None:
        stored_digest = before.digest if before is not None else twin.digest  # type: ignore[union-attr]
        if stored_digest != digest:
            return Outcome(draft.visit, draft.section, "refused", problem=_other_content(stored_digest))
        received = before.received_at if before is not None else tx.now
        offset = before.clock_offset_s if before is not None else clock_offset_s
        return Outcome(draft.visit, draft.section, "already_stored", received, offset)
    problem = _refusal(tx, draft, known, accepted, register, time_zone)
    if problem is not None:
        return Outcome(draft.visit, draft.section, "refused", problem=problem)
    accepted[draft.visit] = _accept(draft, digest, register, time_zone)
    return Outcome(draft.visit, draft.section, "stored", tx.now, clock_offset_s)


def _other_content(stored_digest: str) -> ConflictError:
    return ConflictError(
        "A visit with this id is stored with other content; a correction is a visit that replaces it.",
        (Fault("other_content", "this id is taken by another visit", "/visit"),),
        kind="id-reused",
        stored_digest=stored_digest,
    )


def _refusal(
    tx: Transaction,
    draft: Draft,
    known: Mapping[str, _Known],
    accepted: Mapping[str, _Accepted],
    register: facts.Register,
    time_zone: str,
) -> ShuntbookError | None:
    if tx.actor.device is not None and draft.device != tx.actor.device:
        fault = Fault("other_device", "this key posts only as the device it is bound to", "/device")
        return ForbiddenError("The key belongs to another device.", (fault,))
    faults = visit_content.faults(draft, tx.now)
    versions = register.versions.get(draft.section)
    if not versions:
        faults.append(Fault("unknown_section", "this depot has no such section", "/section"))
    else:
        day = draft.visited_at.astimezone(ZoneInfo(time_zone)).date()
        record = version_on(versions, day) or versions[0]
        if record.state == SectionState.RECOVERED:
            faults.append(Fault("recovered_section", "the section had been recovered by then", "/section"))
    if draft.replaces is not None and draft.replaces != draft.visit:
        faults.extend(_replaces_faults(draft, known, accepted))
        replaced = known.get(draft.replaces)
        if (
            replaced is not None
            and replaced.found_outside
            and replaced.holder == tx.actor.holder
            and not faults
        ):
            return _second_holder("/replaces")
    if faults:
        return NotAcceptableError(
            "The visit cannot be taken as it is; nothing of it was stored.", tuple(faults)
        )
    return None


def _second_holder(pointer: str | None) -> ConflictError:
    reason = "the visit found the section outside a wrong-side limit: another holder has to do this"
    return ConflictError(
        "A visit that found a wrong-side failure is voided or replaced by a second holder only.",
        (Fault("second_holder", reason, pointer),),
        kind="second-holder",
    )


def _replaces_faults(
    draft: Draft, known: Mapping[str, _Known], accepted: Mapping[str, _Accepted]
) -> Iterator[Fault]:
    def sections_and_next(visit: str) -> tuple[str, str | None] | None:
        if visit in accepted:
            return accepted[visit].draft.section, accepted[visit].draft.replaces
        return (known[visit].section, known[visit].replaces) if visit in known else None

    target = sections_and_next(draft.replaces or "")
    if target is not None and target[0] != draft.section:
        reason = "names a visit of another section: one at the wrong section is voided instead"
        yield Fault("other_section", reason, "/replaces")
    # A longer cycle needs a stored visit that replaces this one, and that one is in `known`.
    here, steps = draft.replaces, 0
    while here is not None and steps <= len(known) + len(accepted):
        if here == draft.visit:
            yield Fault("replaces_cycle", "the visits would replace each other in a circle", "/replaces")
            return
        found = sections_and_next(here)
        here, steps = (found[1] if found is not None else None), steps + 1


def _accept(draft: Draft, digest: str, register: facts.Register, time_zone: str) -> _Accepted:
    """Convert, look for what cannot be, and judge by the limits in force on the visit's day."""
    rule = visit_of(ZoneInfo(time_zone), **_judged_columns(draft), voided=False)
    versions = register.versions[draft.section]
    row = version_on(versions, rule.visited_on) or versions[0]
    record = register.record(row, rule.visited_on)
    converted: list[dict[str, Any]] = [
        {
            "visit": draft.visit,
            "quantity": reading.quantity,
            "test_point": reading.test_point,
            "stage": reading.stage,
            "value": to_base(reading.value, reading.unit),
            "comparison": reading.comparison,
            "instrument": reading.instrument,
            "shunt_ohm": reading.shunt_ohm,
            "source": reading.source,
            "doubtful": None,
        }
        for reading in draft.readings
    ]
    plain = [reading_of(**values) for values in converted]
    cautions = []
    hints = doubtful.EquipmentHints(record.circuit_kind, section_records.feed_emf_v(row))
    for index, code in doubtful.doubts(hints, plain).items():
        converted[index]["doubtful"] = code
        plain[index] = replace(plain[index], doubtful=code)
        cautions.append(Caution(code, doubtful.WORDS[code], f"/readings/{index}"))
    edition = in_force(register.editions.get(row.book or "", ()), rule.visited_on)
    outside: Sequence[Verdict] = ()
    if edition is not None:
        outside = verdicts.found_outside(record, edition, rule, plain, register.instruments)
    return _Accepted(draft, digest, rule, converted, cautions, tuple(outside))


def _judged_columns(draft: Draft) -> dict[str, Any]:
    return {
        "visit": draft.visit,
        "visited_at": draft.visited_at,
        "ballast": draft.ballast,
        "rail": draft.rail,
        "tasks": json.dumps([{"task": t.task, "done": t.done, "reason": t.reason} for t in draft.tasks]),
        "work_done": json.dumps(sorted(draft.work_done)),
        "condition_left": draft.condition_left,
        "replaces": draft.replaces,
    }


def _store(
    tx: Transaction,
    depot: str,
    accepted: Sequence[_Accepted],
    known: Mapping[str, _Known],
    clock_offset_s: int | None,
) -> None:
    visit_rows, reading_rows = [], []
    for item in accepted:
        draft = item.draft
        visit_rows.append(
            {
                "depot": depot,
                "section": draft.section,
                **_judged_columns(draft),
                "received_at": tx.now,
                "received_by": tx.actor.key,
                "holder": tx.actor.holder,
                "found_outside": any(verdict.stage == Stage.AS_FOUND for verdict in item.outside),
                "clock_offset_s": clock_offset_s,
                "device": draft.device,
                "tester": draft.tester,
                "ballast_state": draft.ballast_state,
                "air_temperature_c": draft.air_temperature_c,
                "remarks": draft.remarks,
                "pack": draft.pack,
                "digest": item.digest,
            }
        )
        for given, values in zip(draft.readings, item.rows, strict=True):
            reading_rows.append(
                {
                    **values,
                    "depot": depot,
                    "section": draft.section,
                    "visited_at": draft.visited_at,
                    "value_given": float(given.value),
                    "unit_given": given.unit,
                }
            )
    replacing = {item.draft.section for item in accepted if item.draft.replaces is not None}
    replaced = {visit.replaces for visit in known.values() if visit.replaces is not None}
    replacing |= {item.draft.section for item in accepted if item.draft.visit in replaced}
    bulk.insert_all(
        tx.connection,
        bulk.Rows(_visit, visit_rows),
        bulk.Rows(_reading, reading_rows),
        latest.advanced([row for row in reading_rows if row["section"] not in replacing]),
    )
    for section in sorted(replacing):
        visit_records.derive_latest(tx.connection, depot, section)


def rebuild_latest(tx: Transaction, depot: str) -> int:
    """Derive `latest` of every section of a depot again; how many sections. A sound table is unchanged."""
    tx.lock_depot(depot, exclusive=True)
    query = sa.select(_visit.c.section).where(_visit.c.depot == depot).distinct().order_by(_visit.c.section)
    sections = tx.connection.execute(query).scalars().all()
    for section in sections:
        visit_records.derive_latest(tx.connection, depot, section)
    return len(sections)


def _visits_now(
    moment: facts.Moment, known: Mapping[str, _Known], accepted: Mapping[str, _Accepted]
) -> dict[str, list[rules.Visit]]:
    """Each section's visits with those just stored, oldest first, without what is ahead of midnight."""
    zone = ZoneInfo(moment.time_zone)
    found: dict[str, list[rules.Visit]] = defaultdict(list)
    for stored in known.values():
        *columns, voided_at = stored.columns[1:]
        found[stored.section].append(visit_of(zone, *columns, voided=voided_at is not None))
    for item in accepted.values():
        found[item.draft.section].append(item.rule)
    return {
        section: sorted(
            (visit for visit in several if visit.visited_on <= moment.as_of),
            key=lambda visit: (visit.visited_at, visit.visit),
        )
        for section, several in found.items()
    }


def _judge(
    tx: Transaction,
    row: Row[Any],
    register: facts.Register,
    outcomes: Sequence[Outcome],
    accepted: Sequence[_Accepted],
    clock_offset_s: int | None,
) -> tuple[dict[str, tuple[rules.SectionFacts, Status]], int]:
    """Judge every section concerned; keep findings, journal lines and statuses of what was stored."""
    answered = {outcome.section for outcome in outcomes if outcome.outcome != "refused" and outcome.section}
    touched = {item.draft.section for item in accepted}
    moment = status.present(row, tx.now)
    judged = {
        found.record.section: (found, verdict)
        for found, verdict in status.judge_sections(tx.connection, moment, sorted(answered), register)
    }
    lines: list[journal.Entry] = []
    for item in accepted:
        lines.extend(findings.raise_found_outside(tx, row.depot, item.draft.section, item.rule, item.outside))
        content = _wire(item.draft, tx, item.digest, clock_offset_s)
        lines.append(journal.Entry("visit_stored", "visit", item.draft.visit, (item.draft.section,), content))
    if not lines:
        return judged, journal.head(tx.connection, row.depot)[0]
    sequence = tx.append(row.depot, lines)
    status.store(tx.connection, row.depot, [judged[name][1] for name in sorted(touched)], sequence)
    return judged, sequence


def _wire(draft: Draft, tx: Transaction, digest: str, clock_offset_s: int | None) -> dict[str, Any]:
    return {
        **visit_content.wire(draft),
        "received_at": instant_text(tx.now),
        "clock_offset_s": clock_offset_s,
        "received_by": tx.actor.key,
        "digest": digest,
        "voided": None,
    }


def _finished(
    outcome: Outcome,
    judged: Mapping[str, tuple[rules.SectionFacts, Status]],
    sequence: int,
    accepted: Mapping[str, _Accepted],
) -> Outcome:
    if outcome.outcome == "refused" or outcome.section is None or outcome.section not in judged:
        return outcome
    found, verdict = judged[outcome.section]
    item = accepted.get(outcome.visit or "") if outcome.outcome == "stored" else None
    cautions = tuple(_cautions(item, found, verdict, outcome)) if item is not None else ()
    return replace(outcome, status=verdict, sequence=sequence, cautions=cautions)


def _cautions(
    item: _Accepted, found: rules.SectionFacts, verdict: Status, outcome: Outcome
) -> Iterator[Caution]:
    wrong_side = any(
        v.hazard == Hazard.WRONG_SIDE and v.verdict == VerdictWord.OUTSIDE for v in verdict.verdicts
    )
    if item.outside or wrong_side:
        yield Caution(
            "protect_and_report",
            "Outside a wrong-side limit: a train may not be detected. Protect and report under your rules "
            "before adjusting, and keep the settings and readings.",
        )
    if outcome.clock_offset_s is not None and abs(outcome.clock_offset_s) > CLOCK_OFFSET_S:
        yield Caution(
            "clock_offset", f"The device's clock differs by {outcome.clock_offset_s} s from the server's."
        )
    yield from item.cautions
    for index, values in enumerate(item.rows):
        rule = reading_of(**values)
        doubt = readings.trust(rule, item.rule.visited_on, found.instruments, verdict.as_of)
        if doubt is not None and rule.doubtful is None:
            yield Caution(doubt.code, doubt.reason, f"/readings/{index}/instrument")
    if any(reading.quantity == "drop_shunt" for reading in item.draft.readings):
        yield Caution(
            "rail_surface_not_shown",
            "A clamped shunt does not meet the film that a wheel meets: a drop shunt says nothing of the "
            "rail surface.",
        )
    yield from _task_cautions(item, verdict)
    newer = [v for v in readings.counting(found.visits) if v.visited_at > item.rule.visited_at]
    if newer:
        yield Caution(
            "newer_visit", "A newer visit of this section is stored and decides where both measured."
        )


def _task_cautions(item: _Accepted, verdict: Status) -> Iterator[Caution]:
    states = {task.task: task for task in verdict.tasks}
    for index, claim in enumerate(item.draft.tasks):
        task = states.get(claim.task)
        if task is None:
            reason = "No task of this name applies to the section; it is kept as said."
            yield Caution("unknown_task", reason, f"/tasks/{index}/task")
        elif claim.done == "done":
            for reason_ in task.reasons:
                yield Caution(reason_.code, reason_.reason, f"/tasks/{index}")


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
        raise _second_holder(None)
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
