"""One limit against one section: what was measured, the limit, the margin, and why."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime

from service.rules.words import Comparison, Hazard, Stage, VerdictWord


@dataclass(frozen=True, slots=True)
class Reason:
    code: str
    reason: str


@dataclass(frozen=True, slots=True)
class Verdict:
    """As on the wire (contract, "Answers"). Values in the quantity's base unit.

    `hazard` is that of the bound that decides (the one exceeded, else the one with the smaller
    margin); `margin` is positive inside; None where nothing could be judged.
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
