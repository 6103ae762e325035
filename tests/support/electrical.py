"""Circuits for the electrical tests: a few named ones, and strategies that draw realistic ones."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

from hypothesis import strategies as st

from service.electrical.circuit import Feed, Line, PlainCircuit
from service.electrical.layout import Bond, Joint, Layout, LayoutFeed, LayoutRelay, Leg
from service.electrical.relay import Relay, VaneRelay


def uk(ballast_ohm_km: Any = 10.6, **line: Any) -> PlainCircuit:
    """10 V behind 7.2 ohm, 1 km, 20 ohm relay of 81 and 55 mA."""
    rails = replace(Line(1000.0, 0.0578, ballast_ohm_km), **line)
    return PlainCircuit(0.0, Feed(10.0, 7.2), rails, Relay(20.0, 0.0, 1.62, 1.10))


def ac(ballast_ohm_km: Any = 4.0, **line: Any) -> PlainCircuit:
    """A 50 Hz circuit on a kilometre of 1520 mm track."""
    rails = replace(Line(1000.0, 0.31 + 0.39j, ballast_ohm_km), **line)
    return PlainCircuit(50.0, Feed(6.0, 1.5 + 0.5j), rails, Relay(4.0 + 3.0j, 0.1, 1.0, 0.6))


def vane(ideal_angle_rad: float, local_angle_rad: float = 0.0, pick_up_v: float = 1.0) -> PlainCircuit:
    """The 50 Hz circuit with a double-element vane relay."""
    local_v = 110.0 * complex(math.cos(local_angle_rad), math.sin(local_angle_rad))
    relay = VaneRelay(4.0 + 3.0j, 0.1, pick_up_v, 0.7 * pick_up_v, local_v, 110.0, ideal_angle_rad)
    return replace(ac(), relay=relay)


def plain_line(**changes: Any) -> Layout:
    """The UK circuit as a layout of one leg."""
    layout = Layout(
        frequency_hz=0.0,
        loop_ohm_per_km=0.0578,
        ballast_ohm_km=10.0,
        rail_to_earth_ohm_km=None,
        legs=(Leg("a", ("f1", "f2"), ("r1", "r2"), 1000.0),),
        bonds=(),
        joints=(),
        feed=LayoutFeed(("f1", "f2"), 10.0, 7.2),
        relay=LayoutRelay(("r1", "r2"), 20.0, 1.62, 1.10),
    )
    return replace(layout, **changes)


def points(*, series: bool, duplicated: bool = False, **changes: Any) -> Layout:
    """Legs a and b straight on, c diverging: hung on in parallel, or rail 2 of the circuit led through it."""
    pairs = {"k1": ("b1", "c1"), "k2": ("b2", "c2"), "k3": ("b1", "e1"), "k4": ("b2", "e2")}
    if series:
        pairs = {"k1": ("b1", "c1"), "k2": ("b2", "e2"), "k3": ("g2", "c2"), "k4": ("g1", "c1")}
    bonds = [Bond(name, pair, 0.0015) for name, pair in pairs.items()]
    if duplicated:
        bonds += [replace(bond, name=f"{bond.name}'") for bond in bonds]
    layout = Layout(
        frequency_hz=0.0,
        loop_ohm_per_km=0.1,
        ballast_ohm_km=8.0,
        rail_to_earth_ohm_km=None,
        legs=(
            Leg("a", ("a1", "a2"), ("b1", "b2"), 60.0),
            Leg("b", ("c1", "c2"), ("d1", "d2"), 60.0),
            Leg("c", ("e1", "e2"), ("g1", "g2"), 40.0),
        ),
        bonds=tuple(bonds),
        joints=(Joint("ij", ("g1", "g2")),),
        feed=LayoutFeed(("a1", "a2"), 3.0, 1.5),
        relay=LayoutRelay(("d1", "d2"), 9.0, 1.4, 0.95),
    )
    return replace(layout, **changes)


def _between(low: float, high: float) -> st.SearchStrategy[float]:
    return st.floats(low, high, allow_nan=False, allow_infinity=False)


def ballasts() -> st.SearchStrategy[float]:
    """From a flooded yard to none at all."""
    return st.one_of(_between(0.5, 60.0), st.just(math.inf))


@st.composite
def circuits(draw: st.DrawFn, *, dc: bool) -> PlainCircuit:
    """Circuits such as depots have; some are released with no train."""
    reactive = 0.0 if dc else 1.0
    impedance = draw(_between(0.5, 60.0)) + 1j * reactive * draw(_between(-10.0, 40.0))
    pick_up_v = draw(_between(0.2, 3.0))
    return PlainCircuit(
        0.0 if dc else 50.0,
        Feed(
            draw(_between(1.0, 15.0)), draw(_between(0.2, 12.0)) + 1j * reactive * draw(_between(-2.0, 4.0))
        ),
        Line(
            draw(_between(20.0, 1500.0)),
            draw(_between(0.03, 0.6)) + 1j * reactive * draw(_between(0.0, 1.3)),
            draw(ballasts()),
        ),
        Relay(impedance, draw(_between(0.0, 2.0)), pick_up_v, pick_up_v * draw(_between(0.3, 1.0))),
    )
