"""The electrical side of the invented sections: their constants, and circuits of many of them at once.

Impulse and coded circuits have no linear model. The levels of their pulses are taken here from a plain DC
circuit, as a stand-in that gives readings a consistent look; no answer of the service rests on it.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from service.electrical.arrays import Reals
from service.electrical.circuit import EquippedCircuit, Feed, Line, PlainCircuit, operating_point
from service.electrical.presets import RailEnd, ac_double_rail, ac_single_rail, direct_current
from service.electrical.relay import Relay, VaneRelay
from service.rules.words import CircuitKind

LOCAL_V = 110.0
ZONE_M = 20.0
"""Length of the tuned zones of every audio frequency section [m]."""

IDEAL_RAD = math.pi / 2

VANE = (CircuitKind.AC_SINGLE_RAIL, CircuitKind.AC_DOUBLE_RAIL)
"""Kinds whose relay has a local winding."""


@dataclass(frozen=True, slots=True)
class Wiring:
    """One section's constants [V, ohm, ohm/km, ohm·km, m]; a vane relay's local angle against the emf."""

    length_m: float
    loop_ohm_per_km: complex
    wet_ohm_km: float
    dry_ohm_km: float
    coil_ohm: complex
    pick_up_v: float
    drop_away_v: float
    feed_ohm: float
    emf_v: float = 1.0
    frequency_hz: float = 0.0
    relay_series_ohm: float = 0.0
    local_angle_deg: float = 0.0
    feed_ratio: float = 1.0
    relay_ratio: float = 1.0
    """Windings at the feed and at the relay : windings at the rails; `feed_ohm` is at the feed's."""
    bond_ohm: complex = 1.0


@dataclass(frozen=True, slots=True)
class State:
    """What differs from one moment to another, one value a wiring.

    `feed`, `supply` and `relay` are factors on the feed's resistance, on the supply and on the
    relay's working values; ballast in [ohm·km].
    """

    ballast_ohm_km: Reals
    feed: Reals
    supply: Reals
    relay: Reals


def circuits(kind: CircuitKind, wirings: Sequence[Wiring], state: State) -> PlainCircuit:
    """Circuits of one kind, as arrays in order of `wirings`."""

    def of(name: str) -> Reals:
        return np.asarray([getattr(wiring, name) for wiring in wirings])

    feed = Feed(of("emf_v") * state.supply, of("feed_ohm") * state.feed)
    line = Line(of("length_m"), of("loop_ohm_per_km"), state.ballast_ohm_km)
    pick_up_v, drop_away_v = of("pick_up_v") * state.relay, of("drop_away_v") * state.relay
    plain = Relay(of("coil_ohm"), of("relay_series_ohm"), pick_up_v, drop_away_v)
    if kind in VANE:
        local_v = LOCAL_V * state.supply * np.exp(1j * np.radians(of("local_angle_deg")))
        vane = VaneRelay(
            of("coil_ohm"), of("relay_series_ohm"), pick_up_v, drop_away_v, local_v, LOCAL_V, IDEAL_RAD
        )
        if kind is CircuitKind.AC_SINGLE_RAIL:
            direct = RailEnd(1.0, 0.0)
            return ac_single_rail(of("frequency_hz"), feed, direct, line, direct, vane)
        bond_ohm = of("bond_ohm")
        ends = (RailEnd(of("feed_ratio"), 0.0), RailEnd(of("relay_ratio"), 0.0))
        return ac_double_rail(of("frequency_hz"), feed, ends[0], bond_ohm, line, bond_ohm, ends[1], vane)
    if kind is CircuitKind.AUDIO_FREQUENCY:
        return EquippedCircuit(of("frequency_hz"), feed, line, plain, (), (), (ZONE_M, ZONE_M))
    return direct_current(feed, 0.0, line, 0.0, plain)


def steady(ballast_ohm_km: Reals) -> State:
    """Everything as set up, in a given ballast."""
    ones = np.ones(len(ballast_ohm_km))
    return State(ballast_ohm_km, ones, ones, ones)


def set_up(kind: CircuitKind, wirings: Sequence[Wiring], multiple: float) -> list[Wiring]:
    """Set each emf so that the dry relay has `multiple` times its pick-up, each local angle to its best."""
    dry = steady(np.asarray([wiring.dry_ohm_km for wiring in wirings]))
    relay_v = operating_point(circuits(kind, wirings, dry)).relay_v
    found = []
    for wiring, volts in zip(wirings, relay_v.tolist(), strict=True):
        emf_v = wiring.emf_v * multiple * wiring.pick_up_v / abs(volts)
        angle = math.degrees(cmath.phase(volts) - IDEAL_RAD) if kind in VANE else 0.0
        found.append(replace(wiring, emf_v=round(emf_v, 2), local_angle_deg=round(angle, 1)))
    return found
