"""Decide of each posted visit whether it is taken, and what its readings come to.

What can be told of a visit without the records is in `visit_content`; storing and judging in `visits`.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime
from typing import Any
from zoneinfo import ZoneInfo

from service.application import section_records, visit_content
from service.application.fact_rows import reading_of, version_on, visit_of
from service.application.facts import Register
from service.application.visit_content import Draft
from service.application.visit_reads import Known
from service.errors import ConflictError, Fault, ForbiddenError, NotAcceptableError, ShuntbookError
from service.records.unit_of_work import Transaction
from service.rules import doubtful, readings, verdicts
from service.rules import facts as rules
from service.rules.limits import in_force
from service.rules.quantities import to_base
from service.rules.verdicts import Verdict
from service.rules.words import SectionState, Stage


@dataclass(frozen=True, slots=True)
class Accepted:
    """A draft that is or will be stored: as rules take it, its readings as rows and as rules take them, and
    those outside a wrong-side limit of its day."""

    draft: Draft
    digest: str
    rule: rules.Visit
    rows: tuple[dict[str, Any], ...]
    readings: tuple[rules.Reading, ...]
    outside: tuple[Verdict, ...]

    @property
    def found_outside(self) -> bool:
        """Whether it was outside as found: a second holder voids or replaces it."""
        return any(verdict.stage == Stage.AS_FOUND for verdict in self.outside)


@dataclass(frozen=True, slots=True)
class Decision:
    """`outcome` is `stored`, `already_stored` or `refused`; `accepted` is None for the last alone."""

    draft: Draft
    outcome: str
    accepted: Accepted | None = None
    received_at: datetime | None = None
    clock_offset_s: int | None = None
    problem: ShuntbookError | None = None


@dataclass(frozen=True, slots=True)
class Intake:
    """The visits of one request, taken in order; `accepted` are those to be stored, by id."""

    tx: Transaction
    time_zone: str
    register: Register
    known: Mapping[str, Known]
    visits: Mapping[str, Sequence[rules.Visit]]
    """Each section's stored visits."""
    clock_offset_s: int | None
    accepted: dict[str, Accepted] = field(default_factory=dict)

    def decide(self, draft: Draft) -> Decision:
        """Take a draft unless something speaks against it. A refused id may be used again."""
        digest = visit_content.digest(draft)
        before, twin = self.known.get(draft.visit), self.accepted.get(draft.visit)
        stored = before or twin
        if stored is None:
            problem = self._refusal(draft)
            if problem is not None:
                return Decision(draft, "refused", problem=problem)
            taken = self.accepted[draft.visit] = self._accept(draft, digest)
            return Decision(draft, "stored", taken, self.tx.now, self.clock_offset_s)
        if stored.digest != digest:
            return Decision(draft, "refused", problem=_other_content(stored.digest))
        received_at, offset = self.tx.now, self.clock_offset_s
        if before is not None:
            received_at, offset = before.received_at, before.clock_offset_s
        taken = twin or self._accept(draft, digest)
        return Decision(draft, "already_stored", taken, received_at, offset)

    def _refusal(self, draft: Draft) -> ShuntbookError | None:
        device = self.tx.actor.device
        if device is not None and draft.device != device:
            fault = Fault("other_device", "this key posts only as the device it is bound to", "/device")
            return ForbiddenError("The key belongs to another device.", (fault,))
        faults = [*visit_content.faults(draft, self.tx.now), *self._section_faults(draft)]
        if draft.replaces is not None and draft.replaces != draft.visit:
            faults.extend(self._replaces_faults(draft, draft.replaces))
            if not faults and self._found_outside_by(draft.replaces) == self.tx.actor.holder:
                return second_holder("/replaces")
        if faults:
            return NotAcceptableError(
                "The visit cannot be taken as it is; nothing of it was stored.", tuple(faults)
            )
        return None

    def _section_faults(self, draft: Draft) -> Iterator[Fault]:
        versions = self.register.versions.get(draft.section)
        if not versions:
            yield Fault("unknown_section", "this depot has no such section", "/section")
            return
        if not visit_content.EARLIEST <= draft.visited_at <= self.tx.now + visit_content.AHEAD:
            return  # said already, and may have no day in the depot's zone
        day = draft.visited_at.astimezone(ZoneInfo(self.time_zone)).date()
        record = version_on(versions, day) or versions[0]
        if record.state == SectionState.RECOVERED:
            yield Fault("recovered_section", "the section had been recovered by then", "/section")

    def _replaces_faults(self, draft: Draft, replaces: str) -> Iterator[Fault]:
        if self._section_of(replaces) not in (None, draft.section):
            reason = "names a visit of another section: one at the wrong section is voided instead"
            yield Fault("other_section", reason, "/replaces")
        others = [item.rule for item in self.accepted.values()]
        own = rules.Visit(draft.visit, draft.visited_at, self.tx.now.date(), replaces=replaces)
        if readings.replaces_cycle([*self.visits.get(draft.section, ()), *others, own]):
            yield Fault("replaces_cycle", "the visits would replace each other in a circle", "/replaces")

    def _section_of(self, visit: str) -> str | None:
        """The section of a visit, if it was received."""
        if visit in self.accepted:
            return self.accepted[visit].draft.section
        return self.known[visit].section if visit in self.known else None

    def _found_outside_by(self, visit: str) -> str | None:
        """The holder who sent a visit, if that one found a wrong-side failure."""
        if visit in self.accepted:
            return self.tx.actor.holder if self.accepted[visit].found_outside else None
        stored = self.known.get(visit)
        return stored.holder if stored is not None and stored.found_outside else None

    def _accept(self, draft: Draft, digest: str) -> Accepted:
        """Convert, look for what cannot be, and judge by the limits in force on the visit's day."""
        rule = visit_of(ZoneInfo(self.time_zone), **judged_columns(draft), voided=False)
        versions = self.register.versions[draft.section]
        row = version_on(versions, rule.visited_on) or versions[0]
        record = self.register.record(row, rule.visited_on)
        rows = [_reading_row(draft.visit, reading) for reading in draft.readings]
        plain = [reading_of(**values) for values in rows]
        hints = doubtful.EquipmentHints(record.circuit_kind, section_records.feed_emf_v(row))
        for index, code in doubtful.doubts(hints, plain).items():
            rows[index]["doubtful"] = code
            plain[index] = replace(plain[index], doubtful=code)
        edition = in_force(self.register.editions.get(row.book or "", ()), rule.visited_on)
        outside: tuple[Verdict, ...] = ()
        if edition is not None:
            outside = verdicts.found_outside(record, edition, rule, plain, self.register.instruments)
        return Accepted(draft, digest, rule, tuple(rows), tuple(plain), outside)


def _reading_row(visit: str, reading: visit_content.ReadingDraft) -> dict[str, Any]:
    return {
        "visit": visit,
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


def judged_columns(draft: Draft) -> dict[str, Any]:
    """The columns of `visit` that `fact_rows.visit_of` takes."""
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


def _other_content(stored_digest: str) -> ConflictError:
    return ConflictError(
        "A visit with this id is stored with other content; a correction is a visit that replaces it.",
        (Fault("other_content", "this id is taken by another visit", "/visit"),),
        kind="id-reused",
        stored_digest=stored_digest,
    )


def second_holder(pointer: str | None) -> ConflictError:
    """What whoever found a wrong-side failure hears when they would take it back alone."""
    reason = "the visit found the section outside a wrong-side limit: another holder has to do this"
    return ConflictError(
        "A visit that found a wrong-side failure is voided or replaced by a second holder only.",
        (Fault("second_holder", reason, pointer),),
        kind="second-holder",
    )
