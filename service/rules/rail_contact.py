"""Whether the rail surface is in doubt: a wheel meets a film that a clamped shunt does not.

A drop shunt says nothing of it; only clean rails or a residual reading under a train clear it.
"""

from __future__ import annotations

from service.rules.bounds import weigh
from service.rules.editions import Applying
from service.rules.evidence import Evidence
from service.rules.facts import Reading
from service.rules.proof import bounds_at, covers
from service.rules.words import Rail, Reason, Source, VerdictWord


def poor_rail_contact(evidence: Evidence, applies: Applying) -> Reason | None:
    """The standing caution of poor rail contact; None if rails were clean last, or a train was seen well.

    Rusty or contaminated rails stand until a visit finds them clean, or reads a residual under a
    train inside the limits that apply, in that visit or a later one.
    """
    for place in range(len(evidence.visits) - 1, -1, -1):
        visit = evidence.visits[place]
        if visit.rail is Rail.CLEAN:
            return None
        if visit.rail is not None:
            if any(_train_seen(later, evidence, applies) for later in range(place, len(evidence.visits))):
                return None
            return Reason("poor_rail_contact", f"the rail was {visit.rail} on {visit.visited_on}")
    return None


def _train_seen(place: int, evidence: Evidence, applies: Applying) -> bool:
    """Whether the visit read residuals under a train, and every one of them inside limits that apply."""
    under_train = [
        _inside(order, reading, evidence, applies)
        for series in evidence.series.values()
        for order, reading in series
        if order // 2 == place and reading.source is Source.TRAIN
    ]
    return bool(under_train) and all(under_train)


def _inside(order: int, reading: Reading, evidence: Evidence, applies: Applying) -> bool:
    required = evidence.record.required_test_points
    words = [
        weigh(*evidence.span(order, reading), bounds_at(limit, reading.test_point, evidence)[0])[0]
        for limit, missing in applies.limits
        if limit.quantity == reading.quantity
        and missing is None
        and covers(limit, reading.test_point, required)
    ]
    proved = evidence.trust(order, reading) is None
    return proved and bool(words) and all(word in (VerdictWord.NEAR, VerdictWord.WITHIN) for word in words)
