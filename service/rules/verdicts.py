"""One limit against one section: what was measured, the limit, the margin, and why.

Judges readings and register values against the bounds of the limits that apply. Which limits apply
is in `limits`, how readings stand to one another in `evidence`, the whole section in `status`.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime

from service.rules.bounds import OPEN, Weighed, resolve, weigh, wrong_side
from service.rules.editions import Bounds, Edition, Limit, Permission
from service.rules.evidence import Evidence, Series
from service.rules.facts import Concession, Instrument, Reading, SectionFacts, SectionRecord, Visit
from service.rules.limits import applying
from service.rules.proof import DRIEST, bounds_at, covers, lacking, named, open_failure, shunted
from service.rules.quantities import QUANTITIES
from service.rules.register import Registered, registered
from service.rules.words import Comparison, Hazard, Reason, Stage, VerdictWord

__all__ = ["Reason", "Verdict", "found_outside", "judge_limit", "judge_permission"]

OUTSIDE, UNPROVEN, NOT_MEASURED = VerdictWord.OUTSIDE, VerdictWord.UNPROVEN, VerdictWord.NOT_MEASURED
NEAR, WITHIN = VerdictWord.NEAR, VerdictWord.WITHIN

BEYOND_CONCESSION = Reason("beyond_concession", "outside what the concession allows too")

Concessions = Mapping[str, Sequence[Concession]]
"""Live concessions by limit."""


@dataclass(slots=True, unsafe_hash=True)
class Verdict:
    """As on the wire (contract, "Answers"). Values in the quantity's base unit.

    `hazard` is that of the bound that decides (the one exceeded, else the one with the smaller
    margin); `margin` is positive inside; None where nothing could be judged. Never changed once
    made: not declared frozen only because making frozen ones takes ten times as long, and an audit
    makes millions.
    """

    limit: str
    quantity: str
    test_point: str | None
    verdict: VerdictWord
    hazard: Hazard | None
    unit: str
    measured: float | None
    comparison: Comparison | None
    judged: float | None
    min: float | None
    near_min: float | None
    near_max: float | None
    max: float | None
    margin: float | None
    book: str
    edition: str
    clause: str
    confirmed: bool
    concession: str | None
    visit: str | None
    visited_at: datetime | None
    stage: Stage | None
    instrument: str | None
    doubtful: str | None
    reasons: tuple[Reason, ...] = ()


def judge_limit(
    edition: Edition, limit: Limit, missing: str | None, evidence: Evidence, concessions: Concessions
) -> list[Verdict]:
    """The verdicts of one limit that applies: one for each test point, or each register value.

    `missing` is the attribute without which it cannot be said that the limit applies. Where the
    limit is for all required test points, others that were read are judged too, but only condemn.
    """
    if QUANTITIES[limit.quantity].from_register:
        values = registered(evidence.record, limit.quantity)
        return [_of_register(edition, limit, missing, one, concessions) for one in values]
    required = evidence.record.required_test_points
    points = required if limit.test_points is None else named(limit.test_points, required)
    if limit.test_points is None and not required:
        return [
            _unread(edition, limit, None, UNPROVEN, (_attribute_missing(missing or "required_test_points"),))
        ]
    if missing is not None:
        return [_unread(edition, limit, point, UNPROVEN, (_attribute_missing(missing),)) for point in points]
    found, read = [], 0
    for point in points:
        series = evidence.series.get((limit.quantity, point))
        if series is None:
            found.append(_unread(edition, limit, point, NOT_MEASURED, ()))
        else:
            read += 1
            found.append(_of_series(edition, limit, series, evidence, concessions))
    if limit.test_points is None and len(evidence.points.get(limit.quantity, ())) > read:
        found += _elsewhere(edition, limit, evidence, concessions)
    return found


def _elsewhere(edition: Edition, limit: Limit, evidence: Evidence, concessions: Concessions) -> list[Verdict]:
    """What readings at test points that are not required condemn."""
    read = evidence.points.get(limit.quantity, ())
    others = [point for point in read if point not in evidence.record.required_test_points]
    series = [evidence.series[limit.quantity, point] for point in others]
    judged = [_of_series(edition, limit, one, evidence, concessions) for one in series]
    return [verdict for verdict in judged if verdict.verdict is OUTSIDE]


def _attribute_missing(attribute: str | None) -> Reason:
    return Reason("attribute_missing", f"the register does not say: {attribute}")


def _of_series(
    edition: Edition, limit: Limit, series: Series, evidence: Evidence, concessions: Concessions
) -> Verdict:
    """The verdict at a test point that was read: by its newest reading, and what lies open before it."""
    order, reading = series[-1]
    visit = evidence.visits[order // 2]
    bounds, doubt = bounds_at(limit, reading.test_point, evidence)
    span = evidence.span(order, reading)
    weighed = weigh(*span, bounds)
    verdict = _of_reading(edition, limit, bounds, visit, reading, weighed)
    plain = doubt is None and order >= evidence.fresh_from and _stands(weighed[0], limit, reading, visit)
    if plain and evidence.trust(order, reading) is None:
        return verdict
    if not QUANTITIES[limit.quantity].of_item and (stale := evidence.stale(order)) is not None:
        verdict.verdict, verdict.reasons = UNPROVEN, (stale,)
        return verdict
    reasons = lacking(weighed[0], limit, order, reading, evidence)
    if doubt is not None:
        reasons = (*reasons, doubt)
    if reasons and verdict.verdict is not OUTSIDE:
        verdict.verdict = UNPROVEN
    if QUANTITIES[limit.quantity].wetness_matters and _may_hide_failure(verdict, visit):
        failure = open_failure(series, limit, bounds, evidence)
        if failure is not None:
            verdict.verdict, verdict.hazard = OUTSIDE, Hazard.WRONG_SIDE
            span = evidence.span(*failure)
            reasons = (_not_repeated_dry(failure, evidence), *reasons)
    verdict.reasons = reasons
    if verdict.verdict is OUTSIDE and limit.limit in concessions:
        _concede(verdict, span, concessions[limit.limit])
    return verdict


def _stands(word: VerdictWord, limit: Limit, reading: Reading, visit: Visit) -> bool:
    """Whether a fresh word needs no more than a good instrument: a pass with its shunt in the driest ballast.

    Only spares the common case the questions that follow; they would answer the same.
    """
    if word is not WITHIN and word is not NEAR:
        return False
    if limit.shunt_ohm is not None and shunted(limit.shunt_ohm, reading) is not None:
        return False
    if limit.ballast_dry or QUANTITIES[limit.quantity].wetness_matters:
        return visit.ballast in DRIEST
    return True


def _may_hide_failure(verdict: Verdict, visit: Visit) -> bool:
    """Not if it is outside on the wrong side itself, nor if it passes in the driest: that clears all."""
    if verdict.verdict is OUTSIDE:
        return verdict.hazard is not Hazard.WRONG_SIDE
    return verdict.verdict is UNPROVEN or visit.ballast not in DRIEST


def _not_repeated_dry(failure: tuple[int, Reading], evidence: Evidence) -> Reason:
    visit = evidence.visit(failure[0])
    ballast = "unknown" if visit.ballast is None else visit.ballast.value
    return Reason(
        "not_repeated_dry",
        f"outside on {visit.visited_on} in {ballast} ballast, and not since shown inside in ballast as dry",
    )


def _concede(verdict: Verdict, span: tuple[float, float], concessions: Sequence[Concession]) -> None:
    """Name the concession that the interval judged keeps to, else say that it goes beyond one."""
    beyond = False
    for concession in concessions:
        if concession.test_point is not None and concession.test_point != verdict.test_point:
            continue
        least, most = concession.allowed_min, concession.allowed_max
        if (least is None or span[0] >= least) and (most is None or span[1] <= most):
            verdict.concession = concession.concession
            return
        beyond = True
    if beyond:
        verdict.reasons = (
            *verdict.reasons,
            Reason("beyond_concession", "outside what the concession allows"),
        )


def _of_reading(
    edition: Edition, limit: Limit, bounds: Bounds, visit: Visit, reading: Reading, weighed: Weighed
) -> Verdict:
    word, hazard, judged, margin = weighed
    return Verdict(
        limit.limit,
        limit.quantity,
        reading.test_point,
        word,
        hazard,
        QUANTITIES[limit.quantity].unit,
        reading.value,
        reading.comparison,
        judged,
        bounds.min,
        bounds.near_min,
        bounds.near_max,
        bounds.max,
        margin,
        edition.book,
        edition.edition,
        limit.clause,
        limit.confirmed,
        None,
        visit.visit,
        visit.visited_at,
        reading.stage,
        reading.instrument,
        reading.doubtful,
    )


def _unread(
    edition: Edition,
    limit: Limit,
    point: str | None,
    word: VerdictWord,
    reasons: tuple[Reason, ...],
    value: float | None = None,
) -> Verdict:
    """A verdict that rests on no reading: nothing was read, or the register has the value."""
    bounds = OPEN if limit.relative_to is not None else resolve(limit, None)
    weighed = (word, None, None, None) if value is None else weigh(value, value, bounds)
    return Verdict(
        limit.limit,
        limit.quantity,
        point,
        weighed[0],
        weighed[1],
        QUANTITIES[limit.quantity].unit,
        value,
        None,
        weighed[2],
        bounds.min,
        bounds.near_min,
        bounds.near_max,
        bounds.max,
        weighed[3],
        edition.book,
        edition.edition,
        limit.clause,
        limit.confirmed,
        None,
        None,
        None,
        None,
        None,
        None,
        reasons,
    )


def _of_register(
    edition: Edition, limit: Limit, missing: str | None, found: Registered, concessions: Concessions
) -> Verdict:
    point, value, attribute = found
    if missing is not None or value is None:
        return _unread(edition, limit, point, UNPROVEN, (_attribute_missing(missing or attribute),))
    verdict = _unread(edition, limit, point, UNPROVEN, (), value)
    if verdict.verdict is OUTSIDE and limit.limit in concessions:
        _concede(verdict, (value, value), concessions[limit.limit])
    return verdict


def judge_permission(
    edition: Edition, permission: Permission, record: SectionRecord, concessions: Concessions
) -> Verdict:
    """Whether the book permits the circuit kind under the traction, as a configuration verdict."""
    permitted, limit = permission
    if permitted is None:
        return _unread(edition, limit, None, UNPROVEN, (_attribute_missing("return_rails"),))
    verdict = _unread(edition, limit, None, UNPROVEN, (), float(permitted))
    if not permitted:
        text = f"{record.circuit_kind} under {record.traction} is not among the book's permitted combinations"
        verdict.reasons = (Reason("combination_not_permitted", text),)
        _concede(verdict, (0.0, 0.0), concessions.get(limit.limit, ()))
    return verdict


def found_outside(
    record: SectionRecord,
    edition: Edition,
    visit: Visit,
    readings: Sequence[Reading],
    instruments: Mapping[str, Instrument],
) -> tuple[Verdict, ...]:
    """Every reading of one visit, as found or as left, that is outside a wrong-side bound in force then.

    Rests on the visit and on the record and edition valid that day, and on nothing else; a
    reading that cannot be relied on condemns all the same. `stage` tells as found from as left.
    """
    facts = SectionFacts(record, (replace(visit, voided=False),), tuple(readings), instruments, ())
    evidence = Evidence(facts, visit.visited_on)
    found = []
    for limit, missing in applying(edition, record).limits:
        if missing is not None:
            continue
        for point in evidence.points.get(limit.quantity, ()):
            if not covers(limit, point, record.required_test_points):
                continue
            bounds = bounds_at(limit, point, evidence)[0]
            for order, reading in evidence.series[limit.quantity, point]:
                weighed = weigh(*evidence.span(order, reading), wrong_side(bounds))
                if weighed[0] is OUTSIDE:
                    verdict = _of_reading(edition, limit, bounds, visit, reading, weighed)
                    verdict.reasons = lacking(OUTSIDE, limit, order, reading, evidence)
                    found.append(verdict)
    return tuple(found)
