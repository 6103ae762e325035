"""A limit's bounds in figures, and where an interval lies against them.

No sections, visits or instruments here: numbers in, a verdict word with its hazard and margin out.
A value exactly on a bound is inside. Everything is decimal, rounded once, so the same reading gives
the same word in every unit.
"""

from __future__ import annotations

from math import inf

from service.rules.editions import Bounds, Limit
from service.rules.quantities import difference, product, total
from service.rules.words import Hazard, VerdictWord

OUTSIDE, UNPROVEN = VerdictWord.OUTSIDE, VerdictWord.UNPROVEN
NEAR, WITHIN = VerdictWord.NEAR, VerdictWord.WITHIN

OPEN = Bounds(None, None, None, None, None, None)
"""The bounds of a limit whose base is not known."""

KEPT = 4096
"""How many bases a limit remembers; more only costs working them out again."""


Weighed = tuple[VerdictWord, Hazard | None, float | None, float | None]
"""Where an interval lies: word, hazard of the bound that decides, the end that was judged, margin.

The margin is positive inside. `unproven` means undecided: the interval reaches across the bound, and
nothing was judged.
"""


def resolve(limit: Limit, base: float | None) -> Bounds:
    """The bounds of `limit`; `base` is what a relative limit is a multiple of, None if absolute.

    Values in the quantity's base unit. Kept on the limit, since the same bases come back.
    """
    found = limit.resolved.get(base)
    if found is None:
        low, high = limit.minimum, limit.maximum
        least = most = near_min = near_max = None
        if low is not None:
            least = low.value if base is None else product(low.value, base)
            near_min = None if low.near_margin is None else total(least, low.near_margin)
        if high is not None:
            most = high.value if base is None else product(high.value, base)
            near_max = None if high.near_margin is None else difference(most, high.near_margin)
        hazards = (None if low is None else low.hazard, None if high is None else high.hazard)
        found = Bounds(least, near_min, near_max, most, *hazards)
        if len(limit.resolved) >= KEPT:
            limit.resolved.clear()
        limit.resolved[base] = found
    return found


def wrong_side(bounds: Bounds) -> Bounds:
    """The same bounds with every bound that is not wrong-side left open."""
    if bounds.min is not None and bounds.min_hazard is not Hazard.WRONG_SIDE:
        bounds = bounds._replace(min=None)
    if bounds.max is not None and bounds.max_hazard is not Hazard.WRONG_SIDE:
        bounds = bounds._replace(max=None)
    return bounds


def weigh(low: float, high: float, bounds: Bounds) -> Weighed:
    """Judge the interval from `low` to `high` (±inf for a half-line) against both bounds.

    Each bound is judged at the interval's unfavourable end; the graver word wins, then the smaller
    margin. A half-line is outside if wholly beyond, inside if wholly inside, else undecided.

    >>> b = Bounds(0.5, 0.6, None, None, Hazard.WRONG_SIDE, None)
    >>> [weigh(low, low + 0.1, b)[0].value for low in (0.6, 0.5, 0.4)]
    ['within', 'near', 'outside']
    >>> weigh(0.6, 0.7, b)[3]
    0.1
    >>> weigh(0.3, inf, b)[0].value
    'unproven'
    """
    bottom, near_min, near_max, top, min_hazard, max_hazard = bounds
    if top is None:
        if bottom is None:
            return WITHIN, None, None, None
        return _against_minimum(low, high, bottom, near_min, min_hazard)
    most = _against_maximum(low, high, top, near_max, max_hazard)
    if bottom is None:
        return most
    least = _against_minimum(low, high, bottom, near_min, min_hazard)
    if least[0] is not most[0]:
        return least if least[0].gravity < most[0].gravity else most
    if least[3] is None or most[3] is None:
        return least
    return least if least[3] <= most[3] else most


def _against_minimum(
    low: float, high: float, bound: float, near: float | None, hazard: Hazard | None
) -> Weighed:
    if low == -inf:
        if high > bound:
            return UNPROVEN, hazard, None, None
        return OUTSIDE, hazard, high, difference(high, bound)
    if low < bound:
        if high == inf:
            return UNPROVEN, hazard, None, None
        return OUTSIDE, hazard, low, difference(low, bound)
    word = WITHIN if near is None or low >= near else NEAR
    return word, hazard, low, difference(low, bound)


def _against_maximum(
    low: float, high: float, bound: float, near: float | None, hazard: Hazard | None
) -> Weighed:
    if high == inf:
        if low <= bound:
            return UNPROVEN, hazard, None, None
        return OUTSIDE, hazard, low, difference(bound, low)
    if high > bound:
        if low == -inf:
            return UNPROVEN, hazard, None, None
        return OUTSIDE, hazard, high, difference(bound, high)
    word = WITHIN if near is None or high <= near else NEAR
    return word, hazard, high, difference(bound, high)
