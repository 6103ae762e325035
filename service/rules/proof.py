"""What keeps a reading from proving anything: instrument, shunt, ballast, or an earlier failure.

A reading can condemn more easily than it can clear: nothing here turns `outside` into anything better.
"""

from __future__ import annotations

from service.rules.bounds import OPEN, resolve, weigh, wrong_side
from service.rules.editions import Bounds, Limit
from service.rules.evidence import RATED, Evidence, Series
from service.rules.facts import Reading
from service.rules.quantities import QUANTITIES, Quantity
from service.rules.words import Ballast, Reason, RelativeTo, Source, VerdictWord

OUTSIDE, UNPROVEN = VerdictWord.OUTSIDE, VerdictWord.UNPROVEN

DRIEST = (Ballast.DRY, Ballast.FROZEN)
WETTER_THAN_ANY = 4
"""Wetness of a pass in unknown ballast; a failure in unknown ballast is taken as in the driest."""


def named(test_points: tuple[str, ...], required: tuple[str, ...]) -> tuple[str, ...]:
    """A limit's test points, with every required leg in place of `legs`."""
    if "legs" not in test_points:
        return test_points
    legs = [point for point in required if point.startswith("leg:")]
    return tuple(dict.fromkeys((*(point for point in test_points if point != "legs"), *legs)))


def covers(limit: Limit, point: str, required: tuple[str, ...]) -> bool:
    """Whether a reading at the test point can be put to the limit."""
    return limit.test_points is None or point in named(limit.test_points, required)


def bounds_at(limit: Limit, point: str, evidence: Evidence) -> tuple[Bounds, Reason | None]:
    """The limit's bounds at a test point, and what is wrong with what they are a multiple of.

    With no base to multiply the bounds are open, and the reason says what is lacking.
    """
    if limit.relative_to is None:
        return resolve(limit, None), None
    if limit.relative_to is RelativeTo.SET_UP:
        base, doubt = evidence.record.set_up.get((limit.quantity, point)), None
        lacks = Reason("no_set_up_value", "no set-up value is kept for this test point")
    else:
        unit = QUANTITIES[limit.quantity].unit
        base, doubt = evidence.rated(limit.relative_to, unit)
        lacks = Reason("no_rated_value", f"the fitted relay has no {RATED[limit.relative_to, unit][0]}")
    return (OPEN, lacks) if base is None else (resolve(limit, base), doubt)


def lacking(
    word: VerdictWord, limit: Limit, order: int, reading: Reading, evidence: Evidence
) -> tuple[Reason, ...]:
    """Why a reading that a limit's bounds make `word` proves no more than it condemns; empty if it does."""
    untrusted = evidence.trust(order, reading)
    if word is OUTSIDE:
        return () if untrusted is None else (untrusted,)
    reasons = []
    if word is UNPROVEN:
        reasons.append(Reason("undecided", "the reading is a half-line that reaches across the limit"))
    if untrusted is not None:
        reasons.append(untrusted)
    if limit.shunt_ohm is not None:
        other = shunted(limit.shunt_ohm, reading)
        if other is not None:
            reasons.append(other)
    if limit.ballast_dry:
        ballast = evidence.visit(order).ballast
        if ballast is None:
            reasons.append(
                Reason("ballast_unknown", "the limit holds in dry ballast; the visit does not say how wet")
            )
        elif ballast not in DRIEST:
            reasons.append(
                Reason("measured_wet", f"the limit holds in dry ballast; the ballast was {ballast}")
            )
    return tuple(reasons)


def shunted(shunt_ohm: float, reading: Reading) -> Reason | None:
    """Why a pass was not measured with the limit's own shunt, or a harder one, across the rails."""
    if reading.source is Source.TRAIN:
        return Reason(
            "measured_under_train", f"the limit holds with {shunt_ohm} Ω across; measured under a train"
        )
    if reading.shunt_ohm is None or reading.shunt_ohm < shunt_ohm:
        measured = "unknown" if reading.shunt_ohm is None else f"{reading.shunt_ohm} Ω"
        return Reason("other_shunt", f"the limit holds with {shunt_ohm} Ω across; the shunt was {measured}")
    return None


def open_failure(
    series: Series, limit: Limit, bounds: Bounds, evidence: Evidence
) -> tuple[int, Reading] | None:
    """The newest reading outside a wrong-side bound that nothing since has cleared, with its order.

    What clears it is a pass that proves itself in ballast no wetter, or work that changed the
    circuit, or a return from out of use. All are judged by the bounds now in force.
    """
    bounds = wrong_side(bounds)
    if _none_fails(series, bounds, QUANTITIES[limit.quantity]):
        return None
    driest_pass = WETTER_THAN_ANY + 1
    for order, reading in reversed(series):
        if order < evidence.fresh_from or driest_pass == 0:
            return None
        ballast = evidence.visit(order).ballast
        word = weigh(*evidence.span(order, reading), bounds)[0]
        if word is OUTSIDE:
            if driest_pass > (0 if ballast is None else ballast.wetness):
                return order, reading
        elif word is not UNPROVEN and _proved(limit, order, reading, evidence):
            driest_pass = min(driest_pass, WETTER_THAN_ANY if ballast is None else ballast.wetness)
    return None


def _none_fails(series: Series, bounds: Bounds, quantity: Quantity) -> bool:
    """Whether it is plain at a glance that no reading is outside; False also where that takes a closer look.

    No quantity that wetness matters to has a box that leaves the true value below the reading.
    """
    least, most = bounds.min, bounds.max
    if most is not None and (least is not None or quantity.steps_up):
        return False
    if most is not None:
        return all(reading.value <= most for _, reading in series)
    return least is None or all(reading.value > least for _, reading in series)


def _proved(limit: Limit, order: int, reading: Reading, evidence: Evidence) -> bool:
    if limit.shunt_ohm is not None and shunted(limit.shunt_ohm, reading) is not None:
        return False
    return evidence.trust(order, reading) is None
