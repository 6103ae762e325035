"""Traction current in the rails: how it divides, what it magnetises, what it puts across a relay.

Circuits are given at the interfering frequency, their impedances as they are there; their own emf
plays no part. Normal and fault current are asked apart. Limits come from the caller.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, TypeAlias

import numpy as np

from service.electrical.arrays import (
    PhasorLike,
    Phasors,
    RealLike,
    Reals,
    not_negative,
    passive,
    positive,
)
from service.electrical.chain import ratio
from service.electrical.changes import with_length
from service.electrical.circuit import PlainCircuit, ends_of, phasor
from service.electrical.line import sinhc
from service.electrical.spans import spans
from service.errors import NoAnswerError

Train: TypeAlias = Literal["none", "feed_end", "relay_end"]

_POINTS = 65


@dataclass(frozen=True, slots=True)
class RailBalance:
    """How the return current divides between two rails.

    Attributes
    ----------
    rail_1_a, rail_2_a : array
        Currents of one moment [A].
    difference_a : array
        I1 - I2 [A].
    of_total, of_mean : array
        |I1 - I2| over I1 + I2, and over half of that: a limit names which base it means.
    ampere_turns : array
        Of an impedance bond of N turns: (N/2)(I1 - I2), without sign [A].
    saturation_margin : array
        1 - (ampere turns)/(those at which the bond saturates); negative is saturated.
    """

    rail_1_a: Reals
    rail_2_a: Reals
    difference_a: Reals
    of_total: Reals
    of_mean: Reals
    ampere_turns: Reals
    saturation_margin: Reals


def rail_balance(
    drop_1_v: RealLike,
    drop_2_v: RealLike,
    length_m: RealLike,
    rail_ohm_per_km: RealLike,
    bond_turns: RealLike,
    saturation_ampere_turns: RealLike,
) -> RailBalance:
    """Balance of two rails from two voltage drops.

    Parameters
    ----------
    drop_1_v, drop_2_v : array_like
        Over equal, joint-free lengths of the two rails at one moment [V].
    length_m : array_like
        That length [m].
    rail_ohm_per_km : array_like
        Size of one rail's impedance at the traction frequency [ohm/km].
    bond_turns : array_like
        Whole turns of the impedance bond from rail to rail.
    saturation_ampere_turns : array_like
        At which the bond is taken as saturated [A].

    Returns
    -------
    RailBalance
        Arrays of the broadcast shape.

    Raises
    ------
    NonPhysicalError
        A negative drop, a length or resistance not greater than zero.
    NoAnswerError
        Code `degenerate`: no current in either rail.

    References
    ----------
    Two millivolt drops over equal lengths of rail: common practice, no source.

    Examples
    --------
    >>> found = rail_balance(0.0525, 0.0475, 5.0, 0.035, 10.0, 600.0)
    >>> [round(float(x), 2) for x in (found.rail_1_a, found.rail_2_a, found.of_total, found.ampere_turns)]
    [300.0, 271.43, 0.05, 142.86]
    """
    for path, value in (("drop_1_v", drop_1_v), ("drop_2_v", drop_2_v)):
        not_negative((path,), value)
    for path, value in (
        ("length_m", length_m),
        ("rail_ohm_per_km", rail_ohm_per_km),
        ("bond_turns", bond_turns),
        ("saturation_ampere_turns", saturation_ampere_turns),
    ):
        positive((path,), value)
    ohm = np.asarray(rail_ohm_per_km) * np.asarray(length_m) / 1000
    first, second = np.asarray(drop_1_v) / ohm, np.asarray(drop_2_v) / ohm
    share = ratio(np.abs(first - second), first + second, "the balance of rails without current")
    turns = np.abs(first - second) * np.asarray(bond_turns) / 2
    margin = 1 - turns / np.asarray(saturation_ampere_turns)
    return RailBalance(first, second, first - second, share, 2 * share, turns, margin)


def interference(
    circuit: PlainCircuit,
    current_a: PhasorLike,
    rail_ohm_per_km: PhasorLike,
    train: Train,
    axle_ohm: RealLike,
) -> Phasors:
    """Voltage at the coil from traction current along the rails of a circuit.

    Parameters
    ----------
    circuit : PlainCircuit
        With its impedances at the interfering frequency, 0 for DC stray.
    current_a : array_like
        Single rail: the return current in the rail that carries it, all of it where a bond that
        shares it is broken. Double rail: the difference of the two rails' currents, the share of
        it at the signalling frequency [A].
    rail_ohm_per_km : array_like
        What one ampere in that rail drops around the loop of both rails: one rail's impedance, its
        mutual impedance with the other taken off [ohm/km].
    train : {"none", "feed_end", "relay_end"}
        Where the train stands whose current runs the length of the section; `none` is outside.
    axle_ohm : array_like
        Resistance of that train across the rails; greater than zero [ohm].

    Returns
    -------
    array of complex
        [V].

    Raises
    ------
    NonPhysicalError
        A negative resistance.
    NoAnswerError
        Code `degenerate`.

    Notes
    -----
    A series voltage U spread evenly along the line: dV/dx = -z I + U/l, dI/dx = -y V, with -V/I = Zf
    at the feed end and V/I = Zr at the relay end:
    V(l) = U Zr (sinh(gl)/(gl) + Zf y l (sinh(gl/2)/(gl/2))^2/2)/W, W as in `worst`.

    Examples
    --------
    300 A along 0.45 km of 0.36 ohm/km before a relay that draws nothing to speak of, a dead short
    of a train at the feed end: some 49 V, about the 50 V that such a circuit's relay is immune to.

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> rails = Line(450.0, 0.72, np.inf)
    >>> circuit = PlainCircuit(50.0, Feed(1.0, 5.0), rails, Relay(9000.0, 0.0, 1.4, 0.95))
    >>> round(abs(complex(interference(circuit, 300.0, 0.36, "feed_end", 0.001))), 1)
    48.6
    """
    passive(("rail_ohm_per_km",), rail_ohm_per_km)
    positive(("axle_ohm",), axle_ohm)
    ends = ends_of(circuit)
    axle = np.asarray(axle_ohm)
    feed_ohm = _beside(ends.feed_ohm, axle) if train == "feed_end" else ends.feed_ohm
    relay_ohm = _beside(ends.relay_ohm, axle) if train == "relay_end" else ends.relay_ohm
    whole = ends.line.part(1.0)
    under = (feed_ohm * whole.c + whole.a) * relay_ohm + feed_ohm * whole.a + whole.b
    spread, half = sinhc(ends.line.angle), sinhc(ends.line.angle / 2)
    series_v = np.asarray(current_a) * np.asarray(rail_ohm_per_km) * np.asarray(circuit.line.length_m) / 1000
    over = series_v * relay_ohm * (spread + feed_ohm * ends.line.leakage_s * half * half / 2)
    return phasor(ratio(over, under, "the interference") * ends.coil_per_rail)


def largest_current(
    circuit: PlainCircuit, rail_ohm_per_km: PhasorLike, train: Train, axle_ohm: RealLike, limit_v: RealLike
) -> Reals:
    """Largest traction current that leaves a relay under a voltage [A].

    Parameters
    ----------
    circuit, rail_ohm_per_km, train, axle_ohm
        As for `interference`.
    limit_v : array_like
        The relay's immunity against AC, or its drop-away against DC stray [V].

    Returns
    -------
    array
        The voltage is proportional to the current.

    Raises
    ------
    NonPhysicalError
        The limit is not greater than zero.
    NoAnswerError
        Code `degenerate`: the current puts nothing across the relay, so none is the largest.

    Examples
    --------
    The circuit of `interference`, 450 m with a relay immune to 50 V:

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(50.0, Feed(1.0, 5.0), Line(450.0, 0.72, np.inf), Relay(9000.0, 0.0, 1.4, 0.95))
    >>> round(float(largest_current(circuit, 0.36, "feed_end", 0.001, 50.0)))
    309
    """
    positive(("limit_v",), limit_v)
    for_one = np.abs(interference(circuit, 1.0, rail_ohm_per_km, train, axle_ohm))
    return ratio(np.asarray(limit_v), for_one, "the largest current")


def longest_immune(
    circuit: PlainCircuit,
    current_a: float,
    rail_ohm_per_km: complex,
    train: Train,
    axle_ohm: float,
    limit_v: float,
    upto_m: float,
) -> float:
    """Length up to which a traction current leaves a relay under a voltage [m].

    Parameters
    ----------
    circuit, current_a, rail_ohm_per_km, train, axle_ohm
        As for `interference`, plain numbers; the circuit's own length is left aside.
    limit_v : float
        The relay's immunity against AC, or its drop-away against DC stray [V].
    upto_m : float
        Where the search ends [m].

    Returns
    -------
    float
        Every shorter circuit is under the limit too; `upto_m` if all are.

    Raises
    ------
    NoAnswerError
        Code `no_length`: over the limit however short.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(50.0, Feed(1.0, 5.0), Line(450.0, 0.72, np.inf), Relay(9000.0, 0.0, 1.4, 0.95))
    >>> round(longest_immune(circuit, 300.0, 0.36, "feed_end", 0.001, 50.0, 2000.0))
    463
    """
    positive(("limit_v",), limit_v)
    positive(("upto_m",), upto_m)

    def margin(lengths_m: Reals) -> Reals:
        """By how much each length is under the limit, as a share of it."""
        at = with_length(circuit, lengths_m)
        return 1 - np.abs(interference(at, current_a, rail_ohm_per_km, train, axle_ohm)) / limit_v

    found = spans(margin, np.linspace(upto_m / _POINTS, upto_m, _POINTS))
    if not found or found[0][0] > upto_m / _POINTS:
        raise NoAnswerError("no_length", "the relay is over the limit on the shortest circuit looked at")
    return found[0][1]


def _beside(ohm: Phasors | Reals, axle_ohm: Reals) -> Phasors | Reals:
    return ohm * axle_ohm / (ohm + axle_ohm)
