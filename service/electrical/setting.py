"""The adjustment of a feed that meets every requirement in every ballast.

Requirements come from the caller. Settings of one variable only: resistance, emf or tap of the
feed. How a circuit at one setting passes the seasons is shown in `season`, how long it may be in
`longest`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal, TypeAlias

import numpy as np

from service.electrical.arrays import Reals, positive
from service.electrical.changes import with_ballast, with_emf, with_feed_ohm, with_feed_ratio
from service.electrical.circuit import PlainCircuit
from service.electrical.season import ballast_of, leakages, over_minimum
from service.electrical.shunt import shunt_limits
from service.electrical.spans import Span, peak, spans
from service.errors import NonPhysicalError

Adjust: TypeAlias = Literal["feed_ohm", "emf_v", "feed_ratio"]
Name: TypeAlias = Literal["pick_up", "shunt", "excitation"]

NAMES: tuple[Name, ...] = ("pick_up", "shunt", "excitation")
# Settings looked at before the edges are refined.
_POINTS = 129
# In AC the worst ballast may lie inside the range; in DC at an end of it.
_BALLASTS = 65


@dataclass(frozen=True, slots=True)
class Requirements:
    """What a setting must meet with any ballast of the range.

    Attributes
    ----------
    least_pick_up : float
        With no train, at least so many times pick-up.
    minimum_shunt_ohm : float
        Test shunt [ohm].
    residual_share : float
        With that shunt at the worst place, at most this share of drop-away is left.
    most_pick_up : float
        With no train, at most so many times pick-up; `math.inf` for no such bound.
    wet_ohm_km, dry_ohm_km : float
        The range of ballast, the second may be `math.inf` [ohm·km].
    """

    least_pick_up: float
    minimum_shunt_ohm: float
    residual_share: float
    most_pick_up: float
    wet_ohm_km: float
    dry_ohm_km: float

    def __post_init__(self) -> None:
        """Refuse what no setting could be held to."""
        for name in ("least_pick_up", "minimum_shunt_ohm", "residual_share"):
            positive((name,), getattr(self, name))
        if self.residual_share > 1:
            raise NonPhysicalError(("residual_share",), "more than drop-away does not release the relay")
        if not self.most_pick_up > self.least_pick_up:
            raise NonPhysicalError(("most_pick_up",), "must be over the least excitation")
        leakages(self.wet_ohm_km, self.dry_ohm_km, 2)


@dataclass(frozen=True, slots=True)
class Setting:
    """The window of one adjustment.

    Attributes
    ----------
    window : (float, float), optional
        In which every requirement is met; None where there is no such setting.
    binds : (str, str), optional
        What ends it below and above: a requirement, or `range`, the end of the adjustment.
    best : float
        Where the least margin is greatest, in the window or outside.
    margins : dict
        At `best`, of each requirement: `pick_up` and `excitation` as a share of their voltage,
        `shunt` by `season.over_minimum`, the drop shunt being that at the residual share. Negative
        is not met.
    opens : dict
        Empty where there is a window; else the best margin that each requirement can have while the
        others are met: easing that one by so much would open a window. -inf where the others
        cannot be met together, so that easing it alone opens nothing.
    """

    window: Span | None
    binds: tuple[str, str] | None
    best: float
    margins: dict[Name, float]
    opens: dict[Name, float]


def setting(
    circuit: PlainCircuit, requirements: Requirements, adjust: Adjust, low: float, high: float
) -> Setting:
    """Find the window of a continuous adjustment.

    Parameters
    ----------
    circuit : PlainCircuit
        Plain numbers; its own setting and ballast are left aside.
    requirements : Requirements
        What must hold, and over which ballast.
    adjust : {"feed_ohm", "emf_v", "feed_ratio"}
        The feed's series resistance [ohm], its emf [V] or the turns ratio of its transformer.
    low, high : float
        Ends of the adjustment.

    Returns
    -------
    Setting
        Window, what binds it, best-centred setting.

    Raises
    ------
    NonPhysicalError
        A range upside down, or values that no feed has.

    Notes
    -----
    The least margin over the requirements is looked at on a grid and its edges refined; the window
    is the one that holds the best setting. In DC with resistance or emf there is only one.

    Examples
    --------
    The 20 ohm circuit of the Space Weather 2023 model, over all its ballast:

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import relay_by_current
    >>> relay = relay_by_current(20.0, 0.0, 0.081, 0.055)
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 3.0), relay)
    >>> found = setting(circuit, Requirements(1.1, 0.5, 0.85, np.inf, 3.0, np.inf), "feed_ohm", 1.0, 30.0)
    >>> [round(end, 2) for end in found.window], found.binds
    ([4.71, 11.95], ('shunt', 'pick_up'))
    """
    if not low < high:
        raise NonPhysicalError(("low",), "the low end is not under the high end")
    change = adjusted_by(circuit, adjust)
    grid = np.linspace(low, high, _POINTS)

    def least(values: Reals) -> Reals:
        """Least margin at each setting."""
        return least_of(margins_of(change(values), requirements))

    best = peak(least, grid)
    margins = _named(change, requirements, best)
    around = np.unique(np.append(grid, best))
    held = [span for span in spans(least, around) if span[0] <= best <= span[1]]
    if not held:
        return Setting(None, None, best, margins, _opens(change, requirements, around))
    window = held[0]
    binds = (_binding(change, requirements, window[0], low), _binding(change, requirements, window[1], high))
    return Setting(window, binds, best, margins, {})


def stepped(
    circuit: PlainCircuit, requirements: Requirements, adjust: Adjust, steps: tuple[float, ...]
) -> tuple[dict[Name, float], ...]:
    """Margins of each requirement at each step of a stepped resistor or at each tap.

    Parameters
    ----------
    circuit : PlainCircuit
        Plain numbers.
    requirements : Requirements
        What must hold, and over which ballast.
    adjust : {"feed_ohm", "emf_v", "feed_ratio"}
        What the steps are values of.
    steps : tuple of float
        At least one.

    Returns
    -------
    tuple of dict
        In the order of `steps`; a step serves where none of its margins is negative, and the best
        one is that whose least margin is greatest.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import relay_by_current
    >>> relay = relay_by_current(20.0, 0.0, 0.081, 0.055)
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 3.0), relay)
    >>> needs = Requirements(1.1, 0.5, 0.85, np.inf, 3.0, np.inf)
    >>> [min(margins.values()) >= 0 for margins in stepped(circuit, needs, "feed_ohm", (4.0, 8.0, 12.0))]
    [False, True, False]
    """
    if not steps:
        raise NonPhysicalError(("steps",), "no steps are given")
    values = np.asarray(steps, dtype=np.float64)
    found = margins_of(adjusted_by(circuit, adjust)(values), requirements)
    return tuple(dict(zip(NAMES, map(float, column), strict=True)) for column in found.T)


def adjusted_by(circuit: PlainCircuit, adjust: Adjust) -> Callable[[Reals], PlainCircuit]:
    """Make the circuit at an array of settings, ballast to come on a last axis."""

    def feed_ohm(values: Reals) -> PlainCircuit:
        """Resistance changed, reactance kept."""
        return with_feed_ohm(circuit, values + 1j * np.asarray(circuit.feed.series_ohm).imag)

    changes: dict[Adjust, Callable[[Reals], PlainCircuit]] = {
        "feed_ohm": feed_ohm,
        "emf_v": lambda values: with_emf(circuit, values),
        "feed_ratio": lambda values: with_feed_ratio(circuit, values),
    }
    return lambda values: changes[adjust](values[..., np.newaxis])


def margins_of(circuit: PlainCircuit, requirements: Requirements) -> Reals:
    """Least margin of each requirement over the ballast, the requirements on the first axis."""
    relay = circuit.relay
    dc = np.all(np.asarray(circuit.frequency_hz) == 0)
    grid = ballast_of(leakages(requirements.wet_ohm_km, requirements.dry_ohm_km, 2 if dc else _BALLASTS))
    eased = replace(relay, drop_away_v=np.asarray(relay.drop_away_v) * requirements.residual_share)
    found = shunt_limits(replace(with_ballast(circuit, grid), relay=eased))
    pull = relay.pull_v(found.relay_clear_v) / np.asarray(relay.pick_up_v)
    margins: tuple[Reals, ...] = (
        pull / requirements.least_pick_up - 1,
        over_minimum(found.drop_shunt_ohm.worst.ohm, requirements.minimum_shunt_ohm),
        1 - pull / requirements.most_pick_up,
    )
    return np.asarray([margin.min(axis=-1) for margin in margins])


def least_of(margins: Reals) -> Reals:
    """Least margin over the requirements on the first axis."""
    least: Reals = margins.min(axis=0)
    return least


def _named(
    change: Callable[[Reals], PlainCircuit], requirements: Requirements, value: float
) -> dict[Name, float]:
    margins = margins_of(change(np.asarray([value])), requirements)[:, 0]
    return dict(zip(NAMES, map(float, margins), strict=True))


def _binding(
    change: Callable[[Reals], PlainCircuit], requirements: Requirements, edge: float, end: float
) -> str:
    if edge == end:
        return "range"
    margins = _named(change, requirements, edge)
    return min(margins, key=margins.__getitem__)


def _opens(
    change: Callable[[Reals], PlainCircuit], requirements: Requirements, grid: Reals
) -> dict[Name, float]:
    """What each requirement comes to where all others are met; those that this opens are in conflict."""
    opens: dict[Name, float] = {}
    for at, name in enumerate(NAMES):
        others = [other for other in range(len(NAMES)) if other != at]

        def least(values: Reals, others: list[int] = others) -> Reals:
            return least_of(margins_of(change(values), requirements)[others])

        edges = [edge for span in spans(least, grid) for edge in span]
        opens[name] = max((_named(change, requirements, edge)[name] for edge in edges), default=-np.inf)
    return opens
