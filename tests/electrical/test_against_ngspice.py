"""Closed forms against ladders solved by the circuit simulator ngspice: the kept results, and live runs.

`tests/data/ngspice_ladders.json` says what made it. The bar is a relative 1e-6 of what the simulator gave.
"""

from __future__ import annotations

import json
import math
import random
from typing import Any

import numpy as np
import pytest
from data import ngspice_ladders

from service.electrical.circuit import Feed, Line, PlainCircuit, Shunt, operating_point
from service.electrical.layout import (
    Bond,
    Layout,
    LayoutFeed,
    LayoutRelay,
    Leg,
    with_break,
    without_bond,
)
from service.electrical.network import Leakage, Network, network
from service.electrical.presets import RailEnd, ac_double_rail
from service.electrical.relay import Relay
from service.electrical.shunt import residual_voltage

KEPT = json.loads(ngspice_ladders.KEPT.read_text(encoding="utf-8"))
BAR = 1e-6

Case = dict[str, Any]


def circuit_of(case: Case) -> PlainCircuit:
    ballast = math.inf if case["ballast_ohm_km"] is None else case["ballast_ohm_km"]
    feed = Feed(case["emf_v"], complex(*case["feed_ohm"]))
    line = Line(case["length_m"], complex(*case["loop_ohm_per_km"]), ballast)
    relay = Relay(complex(*case["relay_ohm"]), complex(*case["relay_series_ohm"]), 1.0, 0.5)
    ends = case.get("ends")
    if ends is None:
        return PlainCircuit(case["frequency_hz"], feed, line, relay)
    return ac_double_rail(
        case["frequency_hz"],
        feed,
        RailEnd(ends["feed_ratio"], complex(*ends["feed_series_ohm"])),
        complex(*ends["bond_ohm"]),
        line,
        complex(*ends["bond_ohm"]),
        RailEnd(ends["relay_ratio"], complex(*ends["relay_series_ohm"])),
        relay,
    )


def layout_of(case: Case) -> Layout:
    return Layout(
        frequency_hz=case["frequency_hz"],
        loop_ohm_per_km=complex(*case["loop_ohm_per_km"]),
        ballast_ohm_km=math.inf,
        rail_to_earth_ohm_km=None,
        legs=tuple(
            Leg(leg["name"], tuple(leg["start"]), tuple(leg["end"]), leg["length_m"]) for leg in case["legs"]
        ),
        bonds=tuple(
            Bond(bond["name"], tuple(bond["between"]), bond["resistance_ohm"]) for bond in case["bonds"]
        ),
        joints=(),
        feed=LayoutFeed(
            tuple(case["feed"]["across"]), case["feed"]["emf_v"], complex(*case["feed"]["series_ohm"])
        ),
        relay=LayoutRelay(tuple(case["relay"]["across"]), complex(*case["relay"]["impedance_ohm"]), 1.0, 0.5),
    )


def network_of(case: Case, layout: Layout) -> Network:
    g, e = (case["ballast_ohm_km"], case["rail_to_earth_ohm_km"])
    return network(layout, Leakage(*(np.array([0.0 if ohm is None else 1 / ohm]) for ohm in (g, e))))


def check_plain(case: Case, found: Case) -> None:
    shunt = case["shunt"]
    if shunt is not None:
        position_m = case["length_m"] * shunt["section"] / ngspice_ladders.SECTIONS
        shunt = Shunt(position_m, shunt["ohm"])
        closed = residual_voltage(circuit_of(case), shunt.position_m, shunt.ohm)
        assert complex(closed) == pytest.approx(complex(*found["relay_v"]), rel=BAR)
    point = operating_point(circuit_of(case), shunt)
    for name, volts in found.items():
        assert complex(getattr(point, name)) == pytest.approx(complex(*volts), rel=BAR), name


def check_layout(case: Case, found: Case) -> None:
    """Faults built into the network, and the same break in closed form."""
    layout = layout_of(case)
    if case["open_bond"]:
        layout = without_bond(layout, case["open_bond"])
    legs = {leg.name: leg for leg in layout.legs}
    sections = ngspice_ladders.LEG_SECTIONS
    # Where a fault leaves nothing, both methods leave their rounding: within a millionth of the emf.
    close = {"rel": BAR, "abs": 1e-6 * case["feed"]["emf_v"]}
    expected = complex(*found["relay_v"])
    if case["break"]:
        leg, rail = legs[case["break"]["leg"]], case["break"]["rail"]
        position_m = leg.length_m * case["break"]["section"] / sections
        closed = network_of(case, layout).broken_v(leg, rail, np.array([position_m]))[0, 0]
        assert complex(closed) == pytest.approx(expected, **close)
        layout = with_break(layout, leg, rail, position_m)
    solved = network_of(case, layout)
    if case["shunt"]:
        leg = legs[case["shunt"]["leg"]]
        position_m = leg.length_m * case["shunt"]["section"] / sections
        volts = solved.shunted_v(leg, np.array([position_m]), case["shunt"]["ohm"])[0, 0]
    else:
        volts = solved.relay_v()[0]
    assert complex(volts) == pytest.approx(expected, **close)


def test_enough_circuits_are_kept() -> None:
    plain, layouts = KEPT["plain"], KEPT["layouts"]
    assert len(plain) >= 200
    assert {case["frequency_hz"] == 0 for case in plain} == {True, False}
    assert any(case.get("ends") for case in plain)
    assert any(case["ballast_ohm_km"] is None for case in plain)
    assert sum(case["break"] is not None for case in layouts) > 5
    assert sum(case["open_bond"] is not None for case in layouts) > 5
    assert "ngspice" in KEPT["provenance"]


@pytest.mark.parametrize("case", KEPT["plain"])
def test_kept_circuits(case: Case) -> None:
    check_plain(case, case["ngspice"])


@pytest.mark.parametrize("case", KEPT["layouts"])
def test_kept_layouts(case: Case) -> None:
    check_layout(case, case["ngspice"])


@pytest.mark.ngspice
def test_ngspice_still_says_what_is_kept() -> None:
    for case in KEPT["plain"][::40]:
        again = ngspice_ladders.solve_plain(case)
        for name, volts in case["ngspice"].items():
            assert again[name] == pytest.approx(volts, rel=1e-9)
    for case in KEPT["layouts"][::10]:
        assert ngspice_ladders.solve_layout(case)["relay_v"] == pytest.approx(
            case["ngspice"]["relay_v"], rel=1e-6, abs=1e-9
        )


@pytest.mark.ngspice
def test_live_circuits() -> None:
    """Circuits of another seed than the kept ones."""
    for case in list(ngspice_ladders.plain_cases(random.Random(1)))[:12]:
        check_plain(case, ngspice_ladders.solve_plain(case))
    for case in list(ngspice_ladders.layout_cases(random.Random(1)))[:5]:
        check_layout(case, ngspice_ladders.solve_layout(case))
