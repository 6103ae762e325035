"""Any circuit that the wire lets in gets an answer in finite numbers, or a problem that says why not."""

from __future__ import annotations

import json
import math
from typing import Any

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from support.calculations import Bench

QUICK = settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


def between(low: float, high: float) -> st.SearchStrategy[float]:
    """Of every size between two positive ends, the ends among them."""
    sizes = st.floats(math.log(low), math.log(high)).map(math.exp).map(lambda x: min(max(x, low), high))
    return st.one_of(sizes, st.sampled_from([low, high]))


def impedances(*, reactive: bool) -> st.SearchStrategy[list[float]]:
    resistance = st.one_of(st.just(0.0), between(1e-9, 1e6))
    signed = st.tuples(between(1e-9, 1e6), st.sampled_from([-1, 0, 1])).map(lambda x: x[0] * x[1])
    reactance = signed if reactive else st.just(0.0)
    return st.tuples(resistance, reactance).map(list)


@st.composite
def circuits(draw: st.DrawFn) -> dict[str, Any]:
    """Anything at all between the wire's bounds, most of it no railway."""
    reactive = draw(st.booleans())
    pick_up_v = draw(between(1e-6, 1e4))
    return {
        "frequency_hz": draw(between(1e-3, 1e5)) if reactive else 0,
        "feed": {"emf_v": draw(between(1e-6, 1e4)), "series_ohm": draw(impedances(reactive=reactive))},
        "line": {
            "length_m": draw(between(1e-3, 1e5)),
            "loop_ohm_per_km": draw(impedances(reactive=reactive)),
            "ballast_ohm_km": draw(st.one_of(st.none(), between(1e-6, 1e6))),
        },
        "relay": {
            "impedance_ohm": draw(impedances(reactive=reactive)),
            "series_ohm": draw(impedances(reactive=reactive)),
            "pick_up_v": pick_up_v,
            "drop_away_v": draw(between(1e-6, pick_up_v)),
        },
    }


def constant(text: str) -> None:
    raise AssertionError(f"{text} is no JSON")


def check(bench: Bench, calculation: str, body: dict[str, Any]) -> None:
    response = bench.post(calculation, body)
    assert response.status_code in (200, 422), response.text
    found = json.loads(response.text, parse_constant=constant)
    if response.status_code == 422:
        assert all(fault["reason"] for fault in found["errors"])
        assert found["errors"]


@pytest.mark.parametrize("spread", [None, {"supply": [0.9, 1.1], "loop_ohm": [1, 2]}])
@QUICK
@given(circuit=circuits(), place=st.floats(0, 1), ohm=st.one_of(st.just(0.0), between(1e-9, 1e6)))
def test_points_and_limits(bench: Bench, spread: Any, circuit: Any, place: float, ohm: float) -> None:
    shunt = {"position_m": place * circuit["line"]["length_m"], "ohm": ohm}
    check(bench, "operating-point", {"circuit": circuit, "shunt": shunt, "spread": spread})
    check(bench, "operating-point", {"circuit": circuit, "spread": spread})
    check(bench, "shunt-limits", {"circuit": circuit, "spread": spread})


@settings(QUICK, max_examples=10)
@given(circuit=circuits(), wet=between(1e-6, 1e6), minimum=between(1e-6, 1e6), ends=st.booleans())
def test_seasons_and_settings(bench: Bench, circuit: Any, wet: float, minimum: float, ends: bool) -> None:
    spread = {"supply": [0.9, 1.1], "feed_ohm": [0.9, 1.1]} if ends else None
    asked = {"circuit": circuit, "spread": spread}
    check(bench, "season", asked | {"wet_ohm_km": wet, "minimum_shunt_ohm": minimum})
    needed = {"least_pick_up": 1.0, "residual_share": 0.9, "minimum_shunt_ohm": minimum, "wet_ohm_km": wet}
    adjustment = {"adjust": "emf_v" if ends else "feed_ohm", "range": [1e-3, 1e4]}
    check(bench, "setting", asked | {"requirements": needed, "adjustment": adjustment})
    check(bench, "longest", asked | {"requirements": needed, "upto_m": 5000})


@QUICK
@given(
    circuit=circuits(),
    fed=st.tuples(between(1e-6, 1e4), between(1e-6, 1e4)),
    arriving=st.tuples(st.floats(0.01, 1), st.floats(0.01, 1)),
    relative_u=st.one_of(st.just(0.0), between(1e-9, 1.0)),
    rail=impedances(reactive=True),
)
def test_readings_and_currents(
    bench: Bench,
    circuit: Any,
    fed: tuple[float, float],
    arriving: tuple[float, float],
    relative_u: float,
    rail: list[float],
) -> None:
    (volts, ampere), line = fed, circuit["line"]
    values = {"feed_v": volts, "relay_v": volts * arriving[0], "feed_a": ampere}
    values = {name: max(value, 1e-6) for name, value in values.items()}
    trust: dict[str, Any] = {"loop_relative_u": 0.1}
    if circuit["frequency_hz"]:
        trust = {"doubt": dict.fromkeys(("ballast", "emf", "feed_ohm", "loop_ohm", "drop_away"), 0.3)}
        line["ballast_ohm_km"] = line["ballast_ohm_km"] or 10.0
    else:
        values["relay_a"] = max(ampere * arriving[1], 1e-6)
    readings = {name: {"value": value, "u": value * relative_u} for name, value in values.items()}
    check(bench, "ballast", {"circuit": circuit, "readings": readings} | trust)
    current = {"normal_a": ampere, "rail_ohm_per_km": rail, "axle_ohm": 0.03, "upto_m": 5000}
    check(bench, "interference", {"circuit": circuit} | current)


@settings(QUICK, max_examples=15)
@given(
    circuit=circuits(),
    ballast=st.one_of(between(1e-6, 1e6), st.tuples(between(1e-6, 1.0), between(1.0, 1e6)).map(list)),
    earth=st.one_of(st.none(), between(1e-6, 1e6)),
    shunt=between(1e-6, 1e6),
    bond=between(1e-9, 1e6),
)
def test_layouts(bench: Bench, circuit: Any, ballast: Any, earth: Any, shunt: float, bond: float) -> None:
    """The circuit cut in two, its halves joined by bonds."""
    feed, line, relay = circuit["feed"], circuit["line"], circuit["relay"]
    pairs = [["a1", "a2"], ["b1", "b2"], ["c1", "c2"], ["d1", "d2"]]
    layout = {
        "frequency_hz": circuit["frequency_hz"],
        "loop_ohm_per_km": line["loop_ohm_per_km"],
        "ballast_ohm_km": ballast,
        "rail_to_earth_ohm_km": earth,
        "legs": [
            {"name": name, "start": pairs[at], "end": pairs[at + 1], "length_m": line["length_m"]}
            for name, at in (("a", 0), ("c", 2))
        ],
        "bonds": [
            {"name": f"k{at}", "between": [f"b{at}", f"c{at}"], "resistance_ohm": bond} for at in (1, 2)
        ],
        "joints": [{"name": "j", "between": ["b1", "c2"]}],
        "feed": {"across": pairs[0], "emf_v": feed["emf_v"], "series_ohm": feed["series_ohm"]},
        "relay": {"across": pairs[3]} | {name: relay[name] for name in ("pick_up_v", "drop_away_v")},
    }
    layout["relay"]["impedance_ohm"] = relay["impedance_ohm"]
    check(bench, "bonding-proof", {"layout": layout, "shunt_ohm": shunt})
