"""A circuit from its wettest ballast to its driest: where its relay works and where a train shunts it.

One setting, all weathers. Which setting serves all weathers is asked in `setting`; what a depot's
readings say of the weather to come, in `forecast`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Phasors, Reals, positive, positive_or_infinite
from service.electrical.changes import with_ballast
from service.electrical.circuit import PlainCircuit
from service.electrical.shunt import shunt_limits
from service.electrical.spans import Margin, Span, spans
from service.errors import NonPhysicalError

# Enough that AC circuits, which need not be monotone, show each of their turns.
_POINTS = 241


@dataclass(frozen=True, slots=True)
class Season:
    """One circuit over a range of ballast.

    Attributes
    ----------
    ballast_ohm_km : array
        From wet to dry, evenly spaced in leakage; the last may be infinite.
    relay_v : array of complex
        At the coil with no train [V].
    drop_shunt_ohm : array
        At the worst place [ohm]; infinite where the relay is released with no train.
    picks_up, holds, shunts : tuple of (float, float)
        Intervals of ballast in which the relay picks up with no train; in which it holds if it was up;
        in which it is released by the minimum shunt wherever that lies [ohm·km].
    """

    ballast_ohm_km: Reals
    relay_v: Phasors
    drop_shunt_ohm: Reals
    picks_up: tuple[Span, ...]
    holds: tuple[Span, ...]
    shunts: tuple[Span, ...]


def season(circuit: PlainCircuit, wet_ohm_km: float, dry_ohm_km: float, minimum_shunt_ohm: float) -> Season:
    """Sweep a circuit from wet to dry.

    Parameters
    ----------
    circuit : PlainCircuit
        Plain numbers, no arrays; its own ballast is left aside.
    wet_ohm_km, dry_ohm_km : float
        Ends of the range, the second may be `math.inf` [ohm·km].
    minimum_shunt_ohm : float
        Resistance that must release the relay anywhere [ohm].

    Returns
    -------
    Season
        Curve and intervals.

    Raises
    ------
    NonPhysicalError
        Wet over dry, or not greater than zero.

    Examples
    --------
    The 2010 exam circuit (5 V, 6 ohm, 9 ohm relay of 50 mA, drop-away 68 %) with lossless rails at
    3.935 km: 0.5 ohm releases it in the wet and not in the dry.

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import relay_by_current
    >>> relay = relay_by_current(9.0, 0.0, 0.05, 0.034)
    >>> circuit = PlainCircuit(0.0, Feed(5.0, 6.0), Line(3935.0, 0.0, 2.5), relay)
    >>> found = season(circuit, 2.5, math.inf, 0.5)
    >>> [[round(end, 2) for end in span] for span in found.shunts]
    [[2.5, 8.83]]
    """
    grid = leakages(wet_ohm_km, dry_ohm_km, _POINTS)
    positive(("minimum_shunt_ohm",), minimum_shunt_ohm)
    relay = circuit.relay

    def pull(threshold_v: float) -> Margin:
        """By how much the clear relay is over a voltage, as a share of it."""
        return lambda leakage: (
            relay.pull_v(shunt_limits(_at(circuit, leakage)).relay_clear_v) / threshold_v - 1
        )

    def shunted(leakage: Reals) -> Reals:
        """By how much the drop shunt is over its minimum."""
        return over_minimum(shunt_limits(_at(circuit, leakage)).drop_shunt_ohm.worst.ohm, minimum_shunt_ohm)

    curve = shunt_limits(_at(circuit, grid[::-1]))
    return Season(
        ballast_ohm_km=np.asarray(_at(circuit, grid[::-1]).line.ballast_ohm_km),
        relay_v=curve.relay_clear_v,
        drop_shunt_ohm=curve.drop_shunt_ohm.worst.ohm,
        picks_up=_ballasts(spans(pull(float(relay.pick_up_v)), grid)),
        holds=_ballasts(spans(pull(float(relay.drop_away_v)), grid)),
        shunts=_ballasts(spans(shunted, grid)),
    )


def leakages(wet_ohm_km: float, dry_ohm_km: float, points: int) -> Reals:
    """Leakages from the driest ballast to the wettest, evenly spaced [S/km].

    Raises
    ------
    NonPhysicalError
        Wet over dry, or not greater than zero.

    Examples
    --------
    >>> leakages(2.0, math.inf, 3).tolist()
    [0.0, 0.25, 0.5]
    """
    positive(("wet_ohm_km",), wet_ohm_km)
    positive_or_infinite(("dry_ohm_km",), dry_ohm_km)
    if wet_ohm_km > dry_ohm_km:
        raise NonPhysicalError(("wet_ohm_km",), "the wettest ballast resists more than the driest")
    return np.linspace(1 / dry_ohm_km, 1 / wet_ohm_km, points)


def ballast_of(leakage_s_per_km: Reals) -> Reals:
    """Ballast from leakage, infinite for none [ohm·km]."""
    return np.divide(
        1.0, leakage_s_per_km, out=np.full_like(leakage_s_per_km, np.inf), where=leakage_s_per_km > 0
    )


def over_minimum(drop_shunt_ohm: Reals, minimum_ohm: float) -> Reals:
    """Margin of a drop shunt over its minimum, from -1 for none to 1 for released with no train.

    (R - Rmin)/(R + Rmin): zero at the minimum, and finite for every drop shunt there is.

    Examples
    --------
    >>> over_minimum(np.array([0.0, 0.5, 1.5, np.inf]), 0.5).tolist()
    [-1.0, 0.0, 0.5, 1.0]
    """
    return 1 - 2 * minimum_ohm / (minimum_ohm + drop_shunt_ohm)


def _at(circuit: PlainCircuit, leakage: Reals) -> PlainCircuit:
    return with_ballast(circuit, ballast_of(leakage))


def _ballasts(found: tuple[Span, ...]) -> tuple[Span, ...]:
    """Intervals of leakage as intervals of ballast, wettest first."""
    return tuple((1 / high, math.inf if low == 0 else 1 / low) for low, high in reversed(found))
