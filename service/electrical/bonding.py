"""The bonding proof: which open bond, broken rail or shorted joint does a layout's relay reveal?

Every fault in turn, at the worst leakage inside its range and the worst place. Where one is not
revealed: where would a train then go undetected? What a layout is stands in `layout`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Reals, positive
from service.electrical.hiding import Box, Ranges, Worst, worst_of
from service.electrical.layout import (
    Layout,
    Leg,
    check_connected,
    with_break,
    with_short,
    without_bond,
)
from service.electrical.network import Leakage, Network, network
from service.electrical.spans import spans
from service.errors import NonPhysicalError

_SHUNT_PLACES = 101


@dataclass(frozen=True, slots=True)
class Stretch:
    """Where a train would go undetected on a leg, from its start [m]."""

    leg: str
    from_m: float
    to_m: float


@dataclass(frozen=True, slots=True)
class Fault:
    """One fault and what the relay makes of it.

    Attributes
    ----------
    relay_v : complex
        With the layout's own figures, a rail opened at its middle [V].
    worst_relay_v : complex
        Highest over the ranges and, for a rail, over every place [V].
    worst_position_m : float, optional
        That place, from the start of the leg [m].
    revealed : bool
        The relay releases even so.
    undetected_stretches : tuple of Stretch
        Empty where it is revealed.
    """

    relay_v: complex
    worst_relay_v: complex
    worst_position_m: float | None
    revealed: bool
    undetected_stretches: tuple[Stretch, ...]


@dataclass(frozen=True, slots=True)
class Proof:
    """Relay voltage of the sound layout [V], and each fault by name.

    `opened` has every bond by its name and every rail as `leg/rail1` and `leg/rail2`, `shorted`
    every joint by its name.
    """

    relay_v: complex
    opened: dict[str, Fault]
    shorted: dict[str, Fault]


def bonding_proof(layout: Layout, ranges: Ranges, shunt_ohm: float) -> Proof:
    """Open every bond and rail and short every joint in turn.

    Parameters
    ----------
    layout : Layout
        With the emf at its highest; its ballast and earth path as they are given for `relay_v`.
    ranges : Ranges
        Inside which the worst is looked for. Where the earth path is not known all of the ballast's
        leakage is taken to pass through earth, the worst that this ballast allows.
    shunt_ohm : float
        Of the train [ohm].

    Returns
    -------
    Proof
        A fault is revealed where the relay's worst voltage is not over its drop-away.

    Raises
    ------
    NonPhysicalError
        The layout does not hang together (`check_connected`).
    NoAnswerError
        Code `degenerate`.

    Notes
    -----
    The worst is the best of a grid over the leakages and places, narrowed around it until what is
    left changes no sixth digit. Undetected stretches are those where the relay stays over its
    drop-away with the shunt across: without leakage, and in the leakage that hides the fault best.

    Examples
    --------
    10 V, 7.2 ohm and a 20 ohm relay on 1 km: a broken rail is not revealed with 0.2 S/km from each
    rail to earth.

    >>> from service.electrical.layout import LayoutFeed, LayoutRelay
    >>> layout = Layout(
    ...     frequency_hz=0.0,
    ...     loop_ohm_per_km=0.0578,
    ...     ballast_ohm_km=10.0,
    ...     rail_to_earth_ohm_km=None,
    ...     legs=(Leg("a", ("f1", "f2"), ("r1", "r2"), 1000.0),),
    ...     bonds=(),
    ...     joints=(),
    ...     feed=LayoutFeed(("f1", "f2"), 10.0, 7.2),
    ...     relay=LayoutRelay(("r1", "r2"), 20.0, 1.62, 1.10),
    ... )
    >>> fault = bonding_proof(layout, Ranges((10.0, 10.0), None), 0.5).opened["a/rail1"]
    >>> round(fault.worst_relay_v.real, 2), fault.revealed
    (1.34, False)
    """
    check_connected(layout)
    positive(("shunt_ohm",), shunt_ohm)
    return _proof(layout, ranges, shunt_ohm)


def second_faults(layout: Layout, ranges: Ranges, shunt_ohm: float, first: str) -> Proof:
    """Combine one fault, which nothing reveals, with every second one.

    Parameters
    ----------
    layout : Layout
        Sound, as for `bonding_proof`.
    ranges : Ranges
        As for `bonding_proof`.
    shunt_ohm : float
        Of the train [ohm].
    first : str
        Name of the first fault; a rail is opened at its worst place.

    Returns
    -------
    Proof
        Of the layout with the first fault in it. A rail cut in two answers for both its parts with
        the worse.

    Raises
    ------
    NonPhysicalError
        Path `("first",)`: no such fault.
    """
    check_connected(layout)
    positive(("shunt_ohm",), shunt_ohm)
    for bond in layout.bonds:
        if bond.name == first:
            return _proof(without_bond(layout, first), ranges, shunt_ohm)
    for joint in layout.joints:
        if joint.name == first:
            return _proof(with_short(layout, joint), ranges, shunt_ohm)
    for leg in layout.legs:
        for rail in (0, 1):
            if _rail_name(leg, rail) == first:
                start = network(layout, Box.of(ranges).leakage())
                place_m = _worst_break(start, ranges, leg, rail).place_m
                return _proof(with_break(layout, leg, rail, place_m), ranges, shunt_ohm)
    raise NonPhysicalError(("first",), f"the layout has no bond, rail or joint {first!r}")


def _proof(layout: Layout, ranges: Ranges, shunt_ohm: float) -> Proof:
    given = network(layout, _given(layout))
    start = network(layout, Box.of(ranges).leakage())
    opened = {
        bond.name: _changed(without_bond(layout, bond.name), ranges, shunt_ohm) for bond in layout.bonds
    }
    for leg in layout.legs:
        for rail in (0, 1):
            fault = _broken(given, start, ranges, leg, rail, shunt_ohm)
            name = _rail_name(leg, rail)
            opened[name] = _worse(opened[name], fault) if name in opened else fault
    shorted = {joint.name: _changed(with_short(layout, joint), ranges, shunt_ohm) for joint in layout.joints}
    return Proof(complex(given.relay_v()[0]), opened, shorted)


def _changed(layout: Layout, ranges: Ranges, shunt_ohm: float) -> Fault:
    """Judge a fault that has no place."""
    start = network(layout, Box.of(ranges).leakage())
    worst = worst_of(start, ranges, lambda solved, _: solved.relay_v()[:, np.newaxis], 0.0)
    relay_v = complex(network(layout, _given(layout)).relay_v()[0])
    return _judged(layout, relay_v, worst, None, shunt_ohm)


def _broken(given: Network, start: Network, ranges: Ranges, leg: Leg, rail: int, shunt_ohm: float) -> Fault:
    relay_v = complex(given.broken_v(leg, rail, np.asarray([leg.length_m / 2]))[0, 0])
    worst = _worst_break(start, ranges, leg, rail)
    cut = with_break(given.layout, leg, rail, worst.place_m)
    return _judged(cut, relay_v, worst, leg.offset_m + worst.place_m, shunt_ohm)


def _worst_break(start: Network, ranges: Ranges, leg: Leg, rail: int) -> Worst:
    return worst_of(start, ranges, lambda solved, places: solved.broken_v(leg, rail, places), leg.length_m)


def _judged(
    layout: Layout, relay_v: complex, worst: Worst, position_m: float | None, shunt_ohm: float
) -> Fault:
    revealed = abs(worst.relay_v) <= layout.relay.drop_away_v
    stretches = () if revealed else _undetected(layout, worst.leakage, shunt_ohm)
    return Fault(relay_v, worst.relay_v, position_m, revealed, stretches)


def _undetected(layout: Layout, hiding: Leakage, shunt_ohm: float) -> tuple[Stretch, ...]:
    """Stretches of a faulty layout where a train leaves the relay up, in dry ballast or in `hiding`."""
    solved = network(
        layout, Leakage(np.append(hiding.rail_to_rail, 0.0), np.append(hiding.rail_to_earth, 0.0))
    )
    found = []
    for leg in layout.legs:

        def margin(places: Reals, leg: Leg = leg) -> Reals:
            volts: Reals = np.abs(solved.shunted_v(leg, places, shunt_ohm)).max(axis=0)
            return volts - layout.relay.drop_away_v

        held = spans(margin, np.linspace(0.0, leg.length_m, _SHUNT_PLACES))
        found += [(leg.name, leg.offset_m + low, leg.offset_m + high) for low, high in held]
    return _merged(found)


def _merged(found: list[tuple[str, float, float]]) -> tuple[Stretch, ...]:
    """Join stretches that meet where a rail was cut."""
    merged: list[Stretch] = []
    for name, low, high in sorted(found):
        if merged and merged[-1].leg == name and low <= merged[-1].to_m:
            merged[-1] = Stretch(name, merged[-1].from_m, max(high, merged[-1].to_m))
        else:
            merged.append(Stretch(name, low, high))
    return tuple(merged)


def _given(layout: Layout) -> Leakage:
    earth = layout.rail_to_earth_ohm_km
    return Leakage(np.asarray([1 / layout.ballast_ohm_km]), np.asarray([0.0 if earth is None else 1 / earth]))


def _worse(one: Fault, other: Fault) -> Fault:
    return one if abs(one.worst_relay_v) >= abs(other.worst_relay_v) else other


def _rail_name(leg: Leg, rail: int) -> str:
    return f"{leg.name}/rail{rail + 1}"
