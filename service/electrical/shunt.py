"""What a shunt across the rails does: residual voltage, drop shunt and pick-up shunt at every place.

Closed forms from the impedance between the rails and the clear voltage at the coil; `worst` finds
the worst place. Says nothing of rail surface: a wheel on a film is not a clamped shunt.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Flags, Phasors, RealLike, Reals, not_negative
from service.electrical.chain import ratio
from service.electrical.circuit import PlainCircuit, check_reach, phasor, share_of
from service.electrical.worst import Condition, Found, search, track_of


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
    return phasor(track.clear_v * ratio(np.asarray(ohm), np.asarray(ohm) + seen_ohm, "the residual voltage"))


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
    >>> relay = Relay(20.0, 0.0, 1.62, 1.10)
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 3.0), relay)
    >>> drop = shunt_limits(circuit).drop_shunt_ohm
    >>> [round(float(r), 3) for r in (drop.feed_end, drop.middle, drop.relay_end)]
    [1.374, 1.371, 1.381]
    """
    track = track_of(circuit)
    relay = circuit.relay
    drop, pick_up = search(
        track,
        (
            Condition(*relay.shunt_terms(track.clear_v, relay.drop_away_v)),
            Condition(*relay.shunt_terms(track.clear_v, relay.pick_up_v)),
        ),
    )
    clear_v = phasor(np.broadcast_to(track.clear_v, drop.share.shape))
    length_m = np.asarray(circuit.line.length_m, dtype=np.float64)
    return ShuntLimits(
        clear_v,
        _along(drop, length_m),
        _along(pick_up, length_m),
        np.logical_not(drop.exists),
        np.logical_not(pick_up.exists),
    )


def lifting_shunts(circuit: PlainCircuit, position_m: RealLike) -> tuple[Reals, Reals]:
    """Range of resistances that would lift a relay that is down with no train [ohm, ohm].

    Only a vane relay can be lifted: a shunt turns the control voltage towards its ideal angle.

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.
    position_m : array_like
        Place of the shunt, from the feed end [m].

    Returns
    -------
    tuple of array
        Between the two the relay picks up; both zero where no shunt lifts it, or where it picks up
        with no train and so needs no lifting.

    Raises
    ------
    NonPhysicalError
        Outside the section.
    NoAnswerError
        Code `degenerate` or `tuned_zone`.

    Notes
    -----
    The quadratic of `shunt_limits` with a < 0: two positive roots where b > 0 and b^2 > 4 |a| |Z|^2.

    Examples
    --------
    A relay whose control voltage is 1.4 rad from its ideal angle: down with no train, up with some shunts.

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import VaneRelay
    >>> vane = VaneRelay(4 + 3j, 0.0, 1.5, 0.8, local_v=110.0, rated_local_v=110.0, ideal_angle_rad=-1.8)
    >>> circuit = PlainCircuit(50.0, Feed(6.0, 0.2 + 2j), Line(800.0, 0.31 + 0.39j, 8.0), vane)
    >>> [round(float(ohm), 2) for ohm in lifting_shunts(circuit, 0.0)]
    [1.2, 2.99]
    """
    share = share_of(circuit, position_m, ("shunt", "position_m"))
    check_reach(circuit, position_m)
    track = track_of(circuit)
    seen_ohm, _ = track.seen(share)
    condition = Condition(*circuit.relay.shunt_terms(track.clear_v, circuit.relay.pick_up_v))
    return condition.between(seen_ohm)


def _along(found: Found, length_m: Reals) -> Along:
    place_m = np.where(found.exists, found.share * length_m, np.inf)
    return Along(found.first, found.middle, found.last, Place(place_m, found.least))
