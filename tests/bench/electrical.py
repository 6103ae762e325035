"""The electrical figures: shunt limits against the circuit simulator, calculations over HTTP, errors.

`p6`, `p7` and `p9` are called by `run.py`; ngspice must be on the path for `p6` and `p9`.
"""

from __future__ import annotations

import importlib.util
import json
import math
import statistics
import time
from collections import defaultdict
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from types import ModuleType
from typing import Any

import httpx
import numpy as np
import tools
import world as worlds
from data import ngspice_ladders

from service.electrical.bonding import bonding_proof
from service.electrical.circuit import Feed, Line, PlainCircuit, Shunt, operating_point
from service.electrical.hiding import Ranges
from service.electrical.layout import Bond, Layout, LayoutFeed, LayoutRelay, Leg, without_bond
from service.electrical.relay import Relay
from service.electrical.shunt import residual_voltage, shunt_limits
from support import postgres
from support.calculations import UK

POINTS = 100_000
SECTIONS = 400
REQUESTS = 300


def p6(_servers: postgres.Databases) -> None:
    """Time a point of `shunt_limits` on arrays, as a share of one ngspice run of a 400-section ladder.

    A run is taken whole, and again without what it takes ngspice to start and to read next to nothing.
    """
    chance = np.random.default_rng(1)
    for name, frequency_hz in (("DC", 0.0), ("AC", 50.0)):
        reactive = 1j if frequency_hz else 0.0
        circuit = PlainCircuit(
            frequency_hz,
            Feed(chance.uniform(5, 12, POINTS), chance.uniform(2, 8, POINTS) + 0.5 * reactive),
            Line(
                chance.uniform(100, 1500, POINTS),
                chance.uniform(0.05, 0.6, POINTS) + 0.6 * reactive,
                chance.uniform(2, 50, POINTS),
            ),
            Relay(chance.uniform(4, 60, POINTS) + 3 * reactive, 0.1, 1.0, 0.6),
        )
        shunt_limits(circuit)
        ours_s = min(_took(lambda circuit=circuit: shunt_limits(circuit)) for _ in range(3)) / POINTS
        case = next(
            one for one in _plain() if (one["frequency_hz"] > 0) == bool(frequency_hz) and not one["shunt"]
        )
        with _sections(SECTIONS):
            lines = ngspice_ladders.plain_netlist(case).lines
        nothing = ["V0 relay 0 DC 1 AC 1", "R1 relay 0 1.0"]
        whole_s, empty_s = (
            statistics.median(
                _took(lambda netlist=netlist: ngspice_ladders.solve(netlist, frequency_hz, ["relay"]))  # noqa: B023
                for _ in range(15)
            )
            for netlist in (lines, nothing)
        )
        whole, bare = whole_s / ours_s, (whole_s - empty_s) / ours_s
        tools.say(
            "P6",
            f"{name}: 1/{whole:,.0f} of an ngspice run, 1/{bare:,.0f} of one that need not start "
            f"({ours_s * 1e6:.2f} µs a point, {whole_s * 1e3:.1f} ms a run, {empty_s * 1e3:.1f} ms of it "
            "without a ladder; first bar 1/5,000, aim 1/50,000)",
        )


def p7(servers: postgres.Databases) -> None:
    """What a calculation takes over HTTP beyond an endpoint that does nothing, on one connection."""
    with servers.cloned(lambda _url: None) as url:
        world = worlds.build(url, 1, 10)
        key = world.keys[world.depots[0]]
        world.service.database.close()
        with tools.served("service", url) as base, httpx.Client(base_url=base, timeout=60) as client:
            client.headers["Authorization"] = f"Bearer {key}"
            asks: dict[str, Callable[[], httpx.Response]] = {
                "empty": lambda: client.get("/health/live"),
                "with a key": lambda: client.get("/v1/key"),
                "operating-point": lambda: _ask(client, "operating-point"),
                "shunt-limits": lambda: _ask(client, "shunt-limits"),
            }
            for ask in asks.values():
                for _ in range(30):
                    assert ask().status_code == 200, ask().text[:300]
            times: dict[str, list[float]] = {name: [] for name in asks}
            for _ in range(REQUESTS):
                for name, ask in asks.items():
                    times[name].append(_took(ask))
        median = {name: statistics.median(found) * 1e3 for name, found in times.items()}
        for name in ("operating-point", "shunt-limits"):
            over, over_key = median[name] - median["empty"], median[name] - median["with a key"]
            tools.say(
                "P7",
                f"{name}: + {over:.2f} ms over an empty endpoint ({median['empty']:.2f} ms), "
                f"+ {over_key:.2f} ms over one that checks the key (first bar + 4 ms, aim + 1.5 ms)",
            )


def p9(_servers: postgres.Databases) -> None:
    """Largest relative error of every closed form against ladders of at least 400 sections."""
    against = _against()
    errors: dict[str, list[float]] = defaultdict(list)
    for case in _plain():
        circuit, shunt = against.circuit_of(case), case["shunt"]
        if shunt is not None:
            place_m = case["length_m"] * shunt["section"] / ngspice_ladders.SECTIONS
            shunt = Shunt(place_m, shunt["ohm"])
            found = residual_voltage(circuit, shunt.position_m, shunt.ohm)
            errors["residual"].append(_off(complex(found), case["ngspice"]["relay_v"]))
        point = operating_point(circuit, shunt)
        errors["operating point"] += [
            _off(complex(getattr(point, name)), volts) for name, volts in case["ngspice"].items()
        ]
    for case in against.KEPT["layouts"]:
        found, expected = _layout_volts(against, case), complex(*case["ngspice"]["relay_v"])
        # Where a fault leaves nothing at the relay both methods leave their rounding: a share of the emf.
        nothing = abs(expected) < 1e-6 * case["feed"]["emf_v"]
        whole = case["feed"]["emf_v"] if nothing else abs(expected)
        errors["layout, nothing left" if nothing else "layout"].append(abs(found - expected) / whole)
    errors["drop shunt"] = list(_drop_shunt_errors(against))
    for name, found_errors in errors.items():
        tools.say(
            "P9",
            f"{name}: {max(found_errors):.1e} at most in {len(found_errors)} (first bar 1e-5, aim 1e-6)",
        )


def _layout_volts(against: ModuleType, case: dict[str, Any]) -> complex:
    """The relay of a sound, broken or shunted layout, in closed form."""
    layout = against.layout_of(case)
    if case["open_bond"]:
        layout = without_bond(layout, case["open_bond"])
    solved = against.network_of(case, layout)
    legs = {leg.name: leg for leg in layout.legs}
    volts = solved.relay_v()[0]
    at = case["break"] or case["shunt"]
    if at:
        leg = legs[at["leg"]]
        place_m = np.asarray([leg.length_m * at["section"] / ngspice_ladders.LEG_SECTIONS])
        if case["break"]:
            volts = solved.broken_v(leg, at["rail"], place_m)[0, 0]
        else:
            volts = solved.shunted_v(leg, place_m, at["ohm"])[0, 0]
    return complex(volts)


def _drop_shunt_errors(against: ModuleType) -> Iterator[float]:
    """Drop shunts put across ladders: by how much the simulator's relay misses its drop-away."""
    unshunted = [case for case in _plain() if case["shunt"] is None][:24]
    for case in unshunted:
        circuit = against.circuit_of(case)
        limits = shunt_limits(circuit)
        if bool(limits.released):
            continue
        for section, ohm in (
            (0, limits.drop_shunt_ohm.feed_end),
            (ngspice_ladders.SECTIONS // 2, limits.drop_shunt_ohm.middle),
            (ngspice_ladders.SECTIONS, limits.drop_shunt_ohm.relay_end),
        ):
            shunted = case | {"shunt": {"section": section, "ohm": float(ohm)}}
            volts = abs(complex(*ngspice_ladders.solve_plain(shunted)["relay_v"]))
            yield abs(volts / float(circuit.relay.drop_away_v) - 1)


def proof(_servers: postgres.Databases) -> None:
    """A bonding proof of twelve legs: every bond and rail opened and every joint shorted."""
    layout = _twelve_legs()
    for name, ranges in (
        ("earth path unknown", Ranges((4.0, 40.0), None)),
        ("ballast and earth path in ranges", Ranges((4.0, 40.0), (5.0, 50.0))),
    ):
        took_s = min(_took(lambda ranges=ranges: bonding_proof(layout, ranges, 0.5)) for _ in range(3))
        tools.say("proof", f"12 legs, {name}: {1000 * took_s:.0f} ms (first bar 500 ms, aim 50 ms)")


def _twelve_legs() -> Layout:
    """Eight legs one after the other through bonds, and four that hang on at points."""
    main = [Leg(f"m{n}", (f"m{n}s1", f"m{n}s2"), (f"m{n}e1", f"m{n}e2"), 60.0) for n in range(8)]
    side = [Leg(f"d{n}", (f"d{n}s1", f"d{n}s2"), (f"d{n}e1", f"d{n}e2"), 40.0) for n in range(4)]
    pairs = {f"k{n}.{rail}": (f"m{n}e{rail}", f"m{n + 1}s{rail}") for n in range(7) for rail in (1, 2)} | {
        f"h{n}.{rail}": (f"m{2 * n}e{rail}", f"d{n}s{rail}") for n in range(4) for rail in (1, 2)
    }
    return Layout(
        frequency_hz=0.0,
        loop_ohm_per_km=0.06,
        ballast_ohm_km=10.0,
        rail_to_earth_ohm_km=None,
        legs=(*main, *side),
        bonds=tuple(Bond(name, pair, 0.0015) for name, pair in pairs.items()),
        joints=(),
        feed=LayoutFeed(("m0s1", "m0s2"), 5.0, 3.0),
        relay=LayoutRelay(("m7e1", "m7e2"), 9.0, 1.4, 0.95),
    )


def _ask(client: httpx.Client, calculation: str) -> httpx.Response:
    return client.post(f"/v1/calculations/{calculation}", json={"circuit": UK})


def _plain() -> list[dict[str, Any]]:
    kept: list[dict[str, Any]] = json.loads(ngspice_ladders.KEPT.read_text(encoding="utf-8"))["plain"]
    return kept


def _against() -> ModuleType:
    """How the tests make circuits of kept cases; by its path, for `electrical` is this module's name too."""
    path = Path(__file__).parents[1] / "electrical" / "test_against_ngspice.py"
    spec = importlib.util.spec_from_file_location("against_ngspice", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@contextmanager
def _sections(count: int) -> Iterator[None]:
    """Ladders of so many sections while it lasts."""
    kept, ngspice_ladders.SECTIONS = ngspice_ladders.SECTIONS, count
    try:
        yield
    finally:
        ngspice_ladders.SECTIONS = kept


def _took(action: Callable[[], object]) -> float:
    began = time.perf_counter()
    action()
    return time.perf_counter() - began


def _off(found: complex, volts: list[float]) -> float:
    expected = complex(*volts)
    return abs(found - expected) / abs(expected) if abs(expected) else math.inf
