"""What a shunt across the rails does: residual voltage, drop shunt and pick-up shunt at every place.

Closed forms from the impedance between the rails and the clear voltage at the coil; the worst
place is found, not assumed. Says nothing of rail surface: a wheel on a film is not a clamped shunt.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields
from typing import TypeAlias

import numpy as np

from service.electrical.arrays import Flags, Numbers, Phasors, RealLike, Reals, not_negative
from service.electrical.chain import ratio
from service.electrical.circuit import Ends, PlainCircuit, check_reach, ends_of, phasor, share_of
from service.errors import NoAnswerError

Measure: TypeAlias = Callable[[Numbers, Numbers, Numbers], tuple[Reals, Reals]]


@dataclass(frozen=True, slots=True)
class Place:
    """The smallest value along the section [ohm] and where it is, from the feed end [m]."""

    position_m: Reals
    ohm: Reals


@dataclass(frozen=True, slots=True)
class Along:
    """A shunt limit at the feed end, in the middle, at the relay end and at the worst place [ohm]."""

    feed_end: Reals
    middle: Reals
    relay_end: Reals
    worst: Place


@dataclass(frozen=True, slots=True)
class ShuntLimits:
    """Drop shunt and pick-up shunt of a circuit.

    Attributes
    ----------
    relay_clear_v : array
        At the coil with no train [V].
    drop_shunt_ohm, pick_up_shunt_ohm : Along
        Infinite, and no number to print, where `released` or `not_picked_up` holds.
    released : array of bool
        Released with no train: there is no drop shunt.
    not_picked_up : array of bool
        Does not pick up with no train: there is no pick-up shunt.
    """

    relay_clear_v: Phasors
    drop_shunt_ohm: Along
    pick_up_shunt_ohm: Along
    released: Flags
    not_picked_up: Flags


@dataclass(frozen=True, slots=True)
class Track:
    """Ends of a circuit with what does not change along it: the common denominator W of the line.

    `under` is (Zf C + A) Zr + Zf A + B of the whole line; E Zr/W is the clear rail voltage at the relay end.
    """

    ends: Ends
    under: Numbers
    first: Reals
    last: Reals

    def seen(self, share: Reals) -> tuple[Numbers, Numbers]:
        """Impedance between the rails at a share of the line [ohm], and its slope over that share.

        Z = Nf Nr/W with Nf = Zf A + B before and Nr = Zr A + B behind; dNf = z Df with
        Df = Zf C + A, so dZ = z (Df Nr - Nf Dr)/W.
        """
        ends = self.ends
        before, behind = ends.line(share), ends.line(1 - share)
        over_f, under_f = ends.feed_ohm * before.a + before.b, ends.feed_ohm * before.c + before.a
        over_r, under_r = ends.relay_ohm * behind.a + behind.b, ends.relay_ohm * behind.c + behind.a
        return (
            over_f * over_r / self.under,
            ends.loop_ohm * (under_f * over_r - over_f * under_r) / self.under,
        )


def residual_voltage(circuit: PlainCircuit, position_m: RealLike, ohm: RealLike) -> Phasors:
    """Voltage at the coil with a resistance across the rails: V R/(R + Z).

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.
    position_m, ohm : array_like
        Place from the feed end [m] and resistance, zero allowed [ohm]; they broadcast.

    Returns
    -------
    array of complex
        [V].

    Raises
    ------
    NonPhysicalError
        Outside the section, or a negative resistance.
    NoAnswerError
        Code `degenerate` or `tuned_zone`.

    Notes
    -----
    V is the clear voltage at the coil and Z the impedance between the rails at the place, feed and
    relay in circuit; with one feed a dead short leaves nothing at the coil, hence the form.

    Examples
    --------
    HELM Workbook 30's ladder as a uniform line, 0.5 ohm at the feed end, middle and relay end, in mA:

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(0.0, Feed(4.0, 5.0), Line(1000.0, 0.34, 3.0), Relay(10.0, 0.0, 0.9, 0.6))
    >>> v = residual_voltage(circuit, np.array([0.0, 500.0, 1000.0]), 0.5)
    >>> [round(i, 2) for i in (v.real * 100).tolist()]
    [28.1, 28.31, 27.43]
    """
    not_negative(("shunt", "ohm"), ohm)
    share = share_of(circuit, position_m, ("shunt", "position_m"))
    check_reach(circuit, position_m)
    track = track_of(circuit)
    seen_ohm, _ = track.seen(share)
    return phasor(_clear_v(track) * ratio(np.asarray(ohm), np.asarray(ohm) + seen_ohm, "the residual voltage"))


def shunt_limits(circuit: PlainCircuit) -> ShuntLimits:
    """Drop shunt and pick-up shunt at both ends, in the middle and at the worst place.

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.

    Returns
    -------
    ShuntLimits
        Arrays of the broadcast shape.

    Raises
    ------
    NoAnswerError
        Code `degenerate`.

    Notes
    -----
    With k = |V|/V_drop, DC gives R = Z/(k - 1); AC the positive root of
    (k^2 - 1) R^2 - 2 R Re Z - |Z|^2 = 0; a vane relay a quadratic of the same kind. Z varies along
    the section and V does not. Interior minima are bracketed by the sign of the exact slope.

    References
    ----------
    IEC 60050-821, 821-03-30, for what the drop shunt is: the *largest* resistance that releases.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 3.0), Relay(20.0, 0.0, 1.62, 1.10))
    >>> drop = shunt_limits(circuit).drop_shunt_ohm
    >>> [round(float(r), 3) for r in (drop.feed_end, drop.middle, drop.relay_end)]
    [1.375, 1.371, 1.381]
    """
    track = track_of(circuit)
    clear_v = _clear_v(track)
    relay = circuit.relay
    grid = _grid(track)
    seen = track.seen(grid)
    length_m = np.asarray(circuit.line.length_m, dtype=np.float64)
    drop, released = _along(track, grid, seen, relay.shunt_terms(clear_v, relay.drop_away_v), length_m)
    pick_up, not_up = _along(track, grid, seen, relay.shunt_terms(clear_v, relay.pick_up_v), length_m)
    return ShuntLimits(phasor(clear_v), drop, pick_up, released, not_up)
