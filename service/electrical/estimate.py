"""Ballast of a DC circuit from what was measured at both its ends, and the drop-away a shunt test implies.

Rail impedance is held at a known value; the exact pair of both is for long circuits only. Circuits
whose feed is in doubt, and AC circuits, are fitted in `fit`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Flags, RealLike, Reals, not_negative, passive, positive
from service.electrical.circuit import PlainCircuit, ends_of
from service.electrical.shunt import residual_voltage
from service.errors import NoAnswerError, NonPhysicalError

# A difference known no better than to this share of itself bears no further working.
_WORST_SHARE = 0.5
# Newton's method for the half angle reaches rounding in six for every line that carries anything.
_ROUNDS = 10


@dataclass(frozen=True, slots=True)
class Reading:
    """A value and its standard uncertainty, both in the value's unit."""

    value: RealLike
    u: RealLike


@dataclass(frozen=True, slots=True)
class BothEnds:
    """Rail voltages [V], current into the rails at the feed end and out of them at the relay end [A]."""

    feed_v: Reading
    feed_a: Reading
    relay_v: Reading
    relay_a: Reading

    def __post_init__(self) -> None:
        """Refuse readings that cannot be meant."""
        for name in ("feed_v", "feed_a", "relay_v", "relay_a"):
            positive((name,), getattr(self, name).value)
            not_negative((name,), getattr(self, name).u)


@dataclass(frozen=True, slots=True)
class Estimate:
    """Ballast [ohm·km], its relative standard uncertainty, and the handbook formula's value beside it."""

    ballast_ohm_km: Reals
    relative_u: Reals
    handbook_ohm_km: Reals


def ballast_from_readings(
    ends: BothEnds, length_m: RealLike, loop_ohm_per_km: RealLike, loop_relative_u: RealLike
) -> Estimate:
    """Ballast of a DC circuit with the rails' impedance held.

    Parameters
    ----------
    ends : BothEnds
        Readings of one moment; arrays broadcast.
    length_m : array_like
        [m].
    loop_ohm_per_km : array_like
        Of both rails, held at this value [ohm/km].
    loop_relative_u : array_like
        Its relative standard uncertainty.

    Returns
    -------
    Estimate
        The leakage between the two ends, as a line.

    Raises
    ------
    NonPhysicalError
        A reading or a length that is not greater than zero.
    NoAnswerError
        Code `ill_conditioned`: the two currents differ by less than twice what is known of their
        difference, or the leakage is more than the line's form can carry.

    Notes
    -----
    Exact for a uniform line: (If - Ir)/(Vf + Vr) = tanh(gl/2)/Zc. With h = gl/2 and zl held,
    h tanh h = zl (If - Ir)/(2 (Vf + Vr)). The handbook formula R = (Vf + Vr)/(2 (If - Ir)) is the same
    with tanh h taken as h, and so reads high.

    References
    ----------
    The handbook formula is from training notes; the rest follows from the line equations.

    Examples
    --------
    HELM Workbook 30's line, 0.34 ohm/km and 3 ohm·km, with meters good to 0.5 %:

    >>> ends = BothEnds(*(Reading(x, 0.005 * x) for x in (1.31597, 0.53681, 1.20526, 0.120526)))
    >>> found = ballast_from_readings(ends, 1000.0, 0.34, 0.05)
    >>> [round(float(x), 3) for x in (found.ballast_ohm_km, found.handbook_ohm_km, found.relative_u)]
    [3.0, 3.028, 0.008]
    """
    positive(("length_m",), length_m)
    passive(("loop_ohm_per_km",), loop_ohm_per_km)
    km = np.asarray(length_m) / 1000
    difference = np.asarray(ends.feed_a.value) - np.asarray(ends.relay_a.value)
    difference_u = np.hypot(ends.feed_a.u, ends.relay_a.u)
    _resolved(
        difference, difference_u, "the currents at the two ends do not differ by enough to tell the leakage"
    )
    total_v = np.asarray(ends.feed_v.value) + np.asarray(ends.relay_v.value)
    half = difference / total_v
    w = np.asarray(loop_ohm_per_km) * km * half / 2
    s = _half_angle_squared(w)
    spread = np.divide(s, w, out=np.ones_like(w), where=w > 0)
    # d ln s/d ln w, from w = sqrt(s) tanh sqrt(s); 1 without rail impedance.
    h = np.sqrt(s)
    steep = np.divide(2 * w, w + h * h / np.cosh(h) ** 2, out=np.ones_like(w), where=w > 0)
    half_u = np.hypot(difference_u / difference, np.hypot(ends.feed_v.u, ends.relay_v.u) / total_v)
    return Estimate(
        ballast_ohm_km=np.asarray(km / (2 * half * spread)),
        relative_u=np.hypot(steep * half_u, (steep - 1) * np.asarray(loop_relative_u)),
        handbook_ohm_km=np.asarray(km / (2 * half)),
    )


def exact_pair(ends: BothEnds, length_m: RealLike) -> tuple[Reals, Reals]:
    """Rail impedance and ballast of a DC circuit together [ohm/km, ohm·km].

    Parameters
    ----------
    ends : BothEnds
        Readings of one moment; arrays broadcast.
    length_m : array_like
        [m].

    Returns
    -------
    tuple of array
        Loop impedance and ballast.

    Raises
    ------
    NonPhysicalError
        A reading or a length that is not greater than zero.
    NoAnswerError
        Code `ill_conditioned`: the voltages or the currents at the two ends differ by less than
        twice what is known of their difference.

    Notes
    -----
    cosh gl - 1 = (Vf - Vr)(If - Ir)/(Vf Ir + Vr If), which keeps the digits that the ratio itself
    loses near 1; Zc^2 = (Vf^2 - Vr^2)/(If^2 - Ir^2).

    Examples
    --------
    >>> ends = BothEnds(*(Reading(x, 0.0001) for x in (1.31597, 0.53681, 1.20526, 0.120526)))
    >>> [round(float(x), 2) for x in exact_pair(ends, 1000.0)]
    [0.34, 3.0]
    """
    positive(("length_m",), length_m)
    km = np.asarray(length_m) / 1000
    vf, vr = np.asarray(ends.feed_v.value), np.asarray(ends.relay_v.value)
    jf, jr = np.asarray(ends.feed_a.value), np.asarray(ends.relay_a.value)
    _resolved(
        vf - vr,
        np.hypot(ends.feed_v.u, ends.relay_v.u),
        "the voltages at the two ends do not differ by enough",
    )
    _resolved(
        jf - jr,
        np.hypot(ends.feed_a.u, ends.relay_a.u),
        "the currents at the two ends do not differ by enough",
    )
    angle = 2 * np.arcsinh(np.sqrt((vf - vr) * (jf - jr) / (2 * (vf * jr + vr * jf))))
    surge_ohm = np.sqrt((vf - vr) * (vf + vr) / ((jf - jr) * (jf + jr)))
    return np.asarray(angle * surge_ohm / km), np.asarray(km * surge_ohm / angle)


def currents_from_voltages(
    circuit: PlainCircuit,
    feed_v: Reading,
    relay_v: Reading,
    feed_relative_u: RealLike,
    relay_relative_u: RealLike,
) -> BothEnds:
    """Derive the currents that were not measured from what stands at the two ends of a DC circuit.

    Parameters
    ----------
    circuit : PlainCircuit
        Its feed and relay are taken as given; its line is not used.
    feed_v, relay_v : Reading
        Between the rails at the feed end and at the relay end [V].
    feed_relative_u, relay_relative_u : array_like
        Relative standard uncertainty of the feed's and the relay's resistance.

    Returns
    -------
    BothEnds
        If = (E - Vf)/Rf and Ir = Vr/Rr with their uncertainties, the emf taken as exact.

    Raises
    ------
    NonPhysicalError
        Path `("frequency_hz",)`: not a DC circuit; path `("feed_v",)`: over the emf.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(0.0, Feed(4.0, 5.0), Line(1000.0, 0.34, 3.0), Relay(10.0, 0.0, 0.9, 0.6))
    >>> ends = currents_from_voltages(circuit, Reading(1.316, 0.002), Reading(1.205, 0.002), 0.01, 0.01)
    >>> tuple(round(float(x), 4) for x in (ends.feed_a.value, ends.feed_a.u, ends.relay_a.value))
    (0.5368, 0.0054, 0.1205)
    """
    if np.any(np.asarray(circuit.frequency_hz) != 0):
        raise NonPhysicalError(("frequency_hz",), "voltages alone give no currents in an AC circuit")
    ends = ends_of(circuit)
    if np.any(np.asarray(feed_v.value) >= ends.emf_v):
        raise NonPhysicalError(("feed_v",), "the rails show more than the feed's emf")
    feed_a = (ends.emf_v - np.asarray(feed_v.value)) / ends.feed_ohm
    relay_a = np.asarray(relay_v.value) / ends.relay_ohm
    return BothEnds(
        feed_v,
        Reading(feed_a, np.hypot(np.asarray(feed_v.u) / ends.feed_ohm, feed_a * feed_relative_u)),
        relay_v,
        Reading(relay_a, np.hypot(np.asarray(relay_v.u) / ends.relay_ohm, relay_a * relay_relative_u)),
    )


def working_drop_away(circuit: PlainCircuit, position_m: RealLike, drop_shunt_ohm: RealLike) -> Reals:
    """Find the coil voltage at which the relay in fact released, from a measured drop shunt [V].

    Parameters
    ----------
    circuit : PlainCircuit
        In the state of the test; its relay's own drop-away is not used.
    position_m : array_like
        Where the shunt was [m].
    drop_shunt_ohm : array_like
        The largest resistance that released the relay [ohm].

    Returns
    -------
    array
        Against which pick-up and drop-away count, so for a vane relay at rated local voltage.

    Raises
    ------
    NonPhysicalError
        Outside the section.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> relay = Relay(20.0, 0.0, 1.62, 1.10)
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 3.0), relay)
    >>> round(float(working_drop_away(circuit, 1000.0, 1.381)), 2)
    1.1
    """
    positive(("drop_shunt_ohm",), drop_shunt_ohm)
    return circuit.relay.pull_v(residual_voltage(circuit, position_m, drop_shunt_ohm))


def _resolved(difference: Reals, u: Reals, reason: str) -> None:
    poor: Flags = ~(difference > 0) | (u > _WORST_SHARE * difference)
    if np.any(poor):
        raise NoAnswerError("ill_conditioned", reason)


def _half_angle_squared(w: Reals) -> Reals:
    """Solve sqrt(s) tanh sqrt(s) = w by Newton's method; rising and concave in s, so ten rounds serve."""
    s: Reals = w * (1 + w)
    for _ in range(_ROUNDS):
        h = np.sqrt(s)
        tanh = np.tanh(h)
        both = tanh / np.where(h > 0, h, 1.0) + 1 - tanh * tanh
        s = s - (h * tanh - w) / np.where(h > 0, both / 2, 1.0)
    return s
