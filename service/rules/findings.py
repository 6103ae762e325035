"""What is wrong with a section and persists from audit to audit: found, merged with what stands, ranked.

Identifiers, responses and tables are elsewhere.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass
from datetime import date, timedelta

from service.rules.facts import SectionFacts
from service.rules.quantities import QUANTITIES
from service.rules.status import Status, live
from service.rules.verdicts import Verdict
from service.rules.words import (
    Compliance,
    FindingKind,
    Hazard,
    Stage,
    TaskState,
    VerdictWord,
)

LAPSING = timedelta(days=28)
"""How long before its last day a concession is called lapsing: four weekly lists. Our choice, no source."""

Identity = tuple[FindingKind, str | None, str | None, str | None]
"""Kind, quantity, test point, task; never the edition that judged."""


@dataclass(frozen=True, slots=True)
class FindingSeed:
    """One thing found wrong at a judgement; `verdict` None where it rests on a task or a caution."""

    kind: FindingKind
    hazard: Hazard | None = None
    quantity: str | None = None
    test_point: str | None = None
    task: str | None = None
    verdict: Verdict | None = None
    concession: str | None = None


@dataclass(frozen=True, slots=True)
class Merged:
    """What an audit does to findings, by what makes each the same.

    `opened` were not open before, `seen` stand, `cleared` are no longer found.
    """

    opened: tuple[str, ...]
    seen: tuple[str, ...]
    cleared: tuple[str, ...]


def identity(one: FindingSeed) -> Identity:
    """What makes two findings of one section the same finding."""
    return (one.kind, one.quantity, one.test_point, one.task)


def findings_of(status: Status, facts: SectionFacts, as_of: date) -> tuple[FindingSeed, ...]:
    """Everything wrong with the section as judged; nothing for a section that is not judged.

    One seed for each identity: of several limits on a quantity the gravest verdict stands. What was
    found outside is not here: it comes from a visit, by `found_outside_seeds`.
    """
    if status.compliance is None:
        return ()
    seeds = [seed for verdict in status.verdicts if (seed := _of_verdict(verdict)) is not None]
    if status.compliance is Compliance.NOT_SHOWN and not seeds:
        seeds.append(FindingSeed(FindingKind.NOT_SHOWN))
    if any(caution.code == "poor_rail_contact" for caution in status.cautions):
        seeds.append(FindingSeed(FindingKind.POOR_RAIL_CONTACT, Hazard.WRONG_SIDE))
    for task in status.tasks:
        if task.state is TaskState.OVERDUE:
            seeds.append(FindingSeed(FindingKind.OVERDUE, task=task.task, concession=task.concession))
        elif task.state is TaskState.DUE and task.due_on is None:
            seeds.append(FindingSeed(FindingKind.NOT_SHOWN, task=task.task))
    seeds += _lapsing(status, facts, as_of)
    return tuple(sorted(_gravest(seeds), key=_order))


def _gravest(seeds: Iterable[FindingSeed]) -> tuple[FindingSeed, ...]:
    """One seed of each identity."""
    found: dict[Identity, FindingSeed] = {}
    for seed in sorted(seeds, key=_gravity):
        found.setdefault(identity(seed), seed)
    return tuple(found.values())


def _of_verdict(verdict: Verdict) -> FindingSeed | None:
    if verdict.verdict in (VerdictWord.NEAR, VerdictWord.WITHIN):
        return None
    if verdict.verdict is VerdictWord.OUTSIDE:
        of_register = QUANTITIES[verdict.quantity].from_register
        kind = FindingKind.CONFIGURATION if of_register else FindingKind.OUTSIDE
    elif verdict.doubtful is not None:
        kind = FindingKind.DOUBTFUL
    else:
        kind = FindingKind.NOT_SHOWN
    return FindingSeed(
        kind,
        verdict.hazard,
        verdict.quantity,
        verdict.test_point,
        verdict=verdict,
        concession=verdict.concession,
    )


def _lapsing(status: Status, facts: SectionFacts, as_of: date) -> list[FindingSeed]:
    quantities = {verdict.limit: verdict.quantity for verdict in status.verdicts}
    return [
        FindingSeed(
            FindingKind.CONCESSION_LAPSING,
            quantity=None if one.limit is None else quantities.get(one.limit),
            test_point=one.test_point,
            task=one.task,
            concession=one.concession,
        )
        for one in facts.concessions
        if live(one, as_of) and one.until_on - as_of <= LAPSING
    ]


def _gravity(seed: FindingSeed) -> tuple[int, int, float, str]:
    """Gravest first; last by name, so that the order of limits or concessions is no matter."""
    verdict = seed.verdict
    if verdict is None:
        return (0, 0, 0.0, seed.concession or "")
    margin = 0.0 if verdict.margin is None else verdict.margin
    return (seed.hazard is not Hazard.WRONG_SIDE, verdict.verdict.gravity, margin, verdict.limit)


def _order(seed: FindingSeed) -> tuple[int, str, str, str]:
    return (
        rank(seed.kind, seed.hazard, reported=False),
        seed.quantity or "",
        seed.test_point or "",
        seed.task or "",
    )


def found_outside_seeds(verdicts: Iterable[Verdict]) -> tuple[FindingSeed, ...]:
    """What a visit found outside a wrong-side limit, from `verdicts.found_outside`: as found only."""
    kind = FindingKind.FOUND_OUTSIDE
    return _gravest(
        FindingSeed(kind, verdict.hazard, verdict.quantity, verdict.test_point, verdict=verdict)
        for verdict in verdicts
        if verdict.stage is Stage.AS_FOUND
    )


def merge(standing: Mapping[str, FindingKind], found: Collection[str]) -> Merged:
    """Bring findings up to a judgement: those that stand with their kinds, and what was found now.

    What was found outside is never cleared here: only its response does that.
    """
    seen = {name for name, kind in standing.items() if name in found or kind is FindingKind.FOUND_OUTSIDE}
    return Merged(
        opened=tuple(name for name in found if name not in standing),
        seen=tuple(name for name in standing if name in seen),
        cleared=tuple(name for name in standing if name not in seen),
    )


def weeks_open(opened_on: date, until: date) -> int:
    """Whole weeks from the day it was opened; none before it."""
    return max((until - opened_on).days, 0) // 7


_RANKS = {
    FindingKind.NOT_SHOWN: 3,
    FindingKind.DOUBTFUL: 4,
    FindingKind.OVERDUE: 5,
    FindingKind.CONCESSION_LAPSING: 6,
}


def rank(kind: FindingKind, hazard: Hazard | None, *, reported: bool) -> int:
    """The place of a finding in the weekly list, 0 at the top.

    First what was found outside and is not yet reported; then what is wrong on the wrong side, what
    is on the right side, what is not shown, doubtful, overdue, and a concession about to lapse.

    >>> rank(FindingKind.FOUND_OUTSIDE, Hazard.WRONG_SIDE, reported=False)
    0
    """
    if kind is FindingKind.FOUND_OUTSIDE and not reported:
        return 0
    if kind in _RANKS:
        return _RANKS[kind]
    return 1 if hazard is Hazard.WRONG_SIDE else 2
