"""How a feed may be set, and how long a circuit may be, so that every requirement holds in any ballast.

Worst cases hold the pick-up to the clear case and the rest to the occupied one. Circuits come from
`circuits`; what a circuit does at one setting is in `calculations`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from service.application.circuit_cases import Cases, pointed
from service.application.circuits import Registered, not_registered
from service.application.equipment import Feed
from service.electrical import longest as lengths
from service.electrical import setting as settings
from service.electrical.changes import Spread
from service.electrical.longest import Longest
from service.electrical.setting import Adjust, Name, Requirements, Setting
from service.electrical.spans import Span
from service.errors import Fault, NotAcceptableError

_EASY = 1e-9
"""A share of pick-up, or a shunt, so small that the requirement it is put in binds nothing."""


@dataclass(frozen=True, slots=True)
class Adjustment:
    """What may be adjusted, between which values, at which of them alone, and what stands beside it.

    `fixed_ohm` is the part of the feed's resistance that is not adjusted: settings are without it.
    """

    adjust: Adjust
    low: float
    high: float
    steps: tuple[float, ...] = ()
    step: float | None = None
    fixed_ohm: float = 0.0


@dataclass(frozen=True, slots=True)
class Step:
    """One step of a resistor, or one tap, and the margin it leaves on each requirement."""

    value: float
    margins: dict[Name, float]


@dataclass(frozen=True, slots=True)
class Window:
    """Settings that serve both worst cases; None where none does. `binds` as in `Setting`."""

    window: Span | None
    binds: tuple[str, str] | None


@dataclass(frozen=True, slots=True)
class Settings:
    """The nominal setting, the steps that were asked for or lie beside the best one, and the worst window."""

    nominal: Setting
    steps: tuple[Step, ...]
    worst: Window | None


def adjustment(asked: Adjustment | None, registered: Registered | None) -> Adjustment:
    """What was asked for, or what the register says may be adjusted: the taps of the feed, else its resistor.

    Raises
    ------
    NotAcceptableError
        Neither is stated, each missing member named.
    """
    if asked is not None:
        return asked
    if registered is None:
        fault = Fault("missing", "must be given for a circuit that is not registered", "/adjustment")
        raise NotAcceptableError("It is not stated what may be adjusted.", (fault,))
    feed = _feed(registered)
    if feed.taps_v is not None and len(set(feed.taps_v)) > 1:
        taps_v = tuple(sorted(set(feed.taps_v)))
        return Adjustment("emf_v", taps_v[0], taps_v[-1], taps_v)
    low, high = feed.adjustable_from_ohm, feed.adjustable_to_ohm
    if low is None or high is None:
        ends = {"adjustable_from_ohm": low, "adjustable_to_ohm": high}
        raise not_registered(tuple(f"equipment.feed.{name}" for name, end in ends.items() if end is None))
    return Adjustment("feed_ohm", low, high, step=feed.adjustable_step_ohm, fixed_ohm=fixed_ohm(registered))


def fixed_ohm(registered: Registered) -> float:
    """Of the feed's resistance, what cannot be adjusted [ohm]."""
    series_ohm = _feed(registered).series_ohm
    assert series_ohm is not None  # or there would be no circuit
    return series_ohm[0]


def _feed(registered: Registered) -> Feed:
    equipment = registered.content.equipment
    assert equipment is not None
    assert equipment.feed is not None
    return equipment.feed


def setting(cases: Cases, requirements: Requirements, adjusted: Adjustment) -> Settings:
    """The window of an adjusted.

    Raises
    ------
    NotAcceptableError
        A range that no feed has, or a tap where there is no transformer.
    NoAnswerError
        A degenerate circuit.
    """
    fixed = adjusted.fixed_ohm
    low, high = adjusted.low + fixed, adjusted.high + fixed
    with pointed("/adjustment", whole=True):
        found = settings.setting(cases.nominal, requirements, adjusted.adjust, low, high)
        values = adjusted.steps or _beside(found.best - fixed, adjusted)
        margins = (
            settings.stepped(
                cases.nominal, requirements, adjusted.adjust, tuple(value + fixed for value in values)
            )
            if values
            else ()
        )
        worst = _worst(cases, requirements, adjusted.adjust, low, high)
    nominal = replace(found, window=_without(found.window, fixed), best=found.best - fixed)
    steps = tuple(Step(value, one) for value, one in zip(values, margins, strict=True))
    return Settings(nominal, steps, worst and Window(_without(worst.window, fixed), worst.binds))


def longest(
    cases: Cases, requirements: Requirements, upto_m: float, adjusted: Adjustment | None
) -> tuple[Longest, Longest | None]:
    """The longest length; in the worst cases only with the feed as it is.

    Raises
    ------
    NotAcceptableError
        A range that no feed has.
    NoAnswerError
        Code `no_length`: the requirements are met at no length.
    """
    span = None
    if adjusted is not None:
        low, high = adjusted.low + adjusted.fixed_ohm, adjusted.high + adjusted.fixed_ohm
        if not low < high:
            raise _upside_down()
        span = (adjusted.adjust, low, high)
    with pointed("/adjustment", whole=True):
        nominal = lengths.longest(cases.nominal, requirements, upto_m, span)
    worst = cases.worst()
    if worst is None or adjusted is not None:
        return nominal, None
    found = [
        lengths.longest(case, held, upto_m, None)
        for case, held in zip(worst, _held(requirements), strict=True)
    ]
    return nominal, min(found, key=lambda one: one.length_m)


def _upside_down() -> NotAcceptableError:
    fault = Fault("not_physical", "the low end is not under the high end", "/adjustment")
    return NotAcceptableError("No real circuit has such a value.", (fault,))


def _held(requirements: Requirements) -> tuple[Requirements, Requirements]:
    """The requirements that the clear case is held to, and those of the occupied one."""
    clear = replace(requirements, minimum_shunt_ohm=_EASY, residual_share=1.0, most_pick_up=math.inf)
    return clear, replace(requirements, least_pick_up=min(_EASY, requirements.least_pick_up))


def _worst(
    cases: Cases, requirements: Requirements, adjust: Adjust, low: float, high: float
) -> Window | None:
    """Where the windows of both cases overlap; what is adjusted wanders with the rest."""
    worst = cases.worst()
    if worst is None or cases.spread is None:
        return None
    edges: list[tuple[Span, tuple[str, str]]] = []
    for case, held, factor in zip(worst, _held(requirements), _factors(cases.spread, adjust), strict=True):
        found = settings.setting(case, held, adjust, low * factor, high * factor)
        if found.window is None or found.binds is None:
            return Window(None, None)
        edges.append(((found.window[0] / factor, found.window[1] / factor), found.binds))
    lower, upper = max(edges, key=lambda edge: edge[0][0]), min(edges, key=lambda edge: edge[0][1])
    if lower[0][0] > upper[0][1]:
        return Window(None, None)
    return Window((lower[0][0], upper[0][1]), (lower[1][0], upper[1][1]))


def _factors(spread: Spread, adjust: Adjust) -> tuple[float, float]:
    """By how much what is adjusted is off its setting in the clear case and in the occupied one."""
    if adjust == "feed_ohm":
        return spread.feed_ohm[1], spread.feed_ohm[0]
    return spread.supply if adjust == "emf_v" else (1.0, 1.0)


def _beside(best: float, adjusted: Adjustment) -> tuple[float, ...]:
    """The steps of a resistor on either side of the best setting."""
    if adjusted.step is None or adjusted.step == 0:
        return ()
    below = math.floor((best - adjusted.low) / adjusted.step)
    values = (adjusted.low + at * adjusted.step for at in (below, below + 1))
    return tuple(value for value in values if adjusted.low <= value <= adjusted.high)


def _without(span: Span | None, fixed_ohm: float) -> Span | None:
    return None if span is None else (span[0] - fixed_ohm, span[1] - fixed_ohm)
