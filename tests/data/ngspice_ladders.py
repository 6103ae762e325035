"""Make `ngspice_ladders.json`: track circuits as lumped ladders, solved by the circuit simulator ngspice.

An independent method for the closed forms of `service/electrical`, of which nothing is used here. Run
`python tests/data/ngspice_ladders.py` with ngspice on the path; the tests read what it leaves.
"""

from __future__ import annotations

import itertools
import json
import math
import random
import re
import subprocess
from collections.abc import Iterator
from pathlib import Path
from typing import Any

KEPT = Path(__file__).with_suffix(".json")
SECTIONS = 1000  # pi sections of a plain line; their error is about |gl|^2/(12 n^2)
LEG_SECTIONS = 400  # of one leg of a layout, each rail on its own
SEED = 20261201
PLAIN = 240

Case = dict[str, Any]


def solve(netlist: list[str], frequency_hz: float, nodes: list[str]) -> dict[str, list[float]]:
    """Node voltages [re, im] by ngspice, an operating point in DC, one frequency in AC."""
    analysis = "op" if frequency_hz == 0 else f"ac lin 1 {frequency_hz!r} {frequency_hz!r}"
    lines = ["ladder", *netlist, ".control", "set numdgt=15", analysis]
    lines += [f"print v({node})" for node in nodes]
    lines += ["quit", ".endc", ".end", ""]
    ran = subprocess.run(
        ["ngspice", "-b", "/dev/stdin"], input="\n".join(lines), capture_output=True, text=True, check=False
    )
    found: dict[str, list[float]] = {}
    for node in nodes:
        match = re.search(rf"^v\({node}\) = (\S+?)(?:,\s*(\S+))?$", ran.stdout, re.MULTILINE)
        if match is None:
            raise RuntimeError(ran.stdout + ran.stderr)
        found[node] = [float(match[1]), float(match[2] or 0.0)]
    return found


def version() -> str:
    """What `ngspice --version` calls itself."""
    printed = subprocess.run(["ngspice", "--version"], capture_output=True, text=True, check=True).stdout
    match = re.search(r"ngspice-\S+", printed)
    assert match is not None
    return match[0]


class Netlist:
    """Lines of a netlist, elements numbered as they come."""

    def __init__(self, frequency_hz: float) -> None:
        self.frequency_hz = frequency_hz
        self.lines: list[str] = []

    def resistor(self, one: str, other: str, ohm: float) -> None:
        self.lines.append(f"R{len(self.lines)} {one} {other} {ohm!r}")

    def impedance(self, one: str, other: str, ohm: complex) -> None:
        """Resistance, and an inductance or a capacitance of this reactance at the frequency, in series."""
        ohm = complex(ohm)
        if ohm.imag == 0:
            self.resistor(one, other, ohm.real)
            return
        between = f"m{len(self.lines)}"
        omega = 2 * math.pi * self.frequency_hz
        if ohm.real > 0:
            self.resistor(one, between, ohm.real)
        else:
            between = one
        if ohm.imag > 0:
            self.lines.append(f"L{len(self.lines)} {between} {other} {ohm.imag / omega!r}")
        else:
            self.lines.append(f"C{len(self.lines)} {between} {other} {-1 / (omega * ohm.imag)!r}")

    def source(self, plus: str, minus: str, emf_v: float) -> None:
        self.lines.append(f"V{len(self.lines)} {plus} {minus} DC {emf_v!r} AC {emf_v!r}")

    def transformer(self, primary: str, secondary: str, ratio: float) -> None:
        """Ideal, `ratio` : 1, both windings to node 0: a controlled voltage and a controlled current."""
        at = len(self.lines)
        sense = f"t{at}"
        self.lines.append(f"E{at} {sense} 0 {primary} 0 {1 / ratio!r}")
        self.lines.append(f"V{at} {sense} {secondary} DC 0")
        self.lines.append(f"F{at} {primary} 0 V{at} {1 / ratio!r}")


def plain_netlist(case: Case) -> Netlist:
    """A circuit: feed, end equipment if it has any, pi sections, end equipment, relay; rail 2 is node 0."""
    net = Netlist(case["frequency_hz"])
    net.source("s", "0", case["emf_v"])
    net.impedance("s", "feed", complex(*case["feed_ohm"]))
    rails, relay = "feed", "relay"
    if case.get("ends"):
        ends = case["ends"]
        net.transformer("feed", "fx", ends["feed_ratio"])
        net.impedance("fx", "n0", complex(*ends["feed_series_ohm"]))
        net.impedance("n0", "0", complex(*ends["bond_ohm"]))
        rails = "n0"
    nodes = [rails, *(f"n{at}" for at in range(1, SECTIONS)), "relayend"]
    km = case["length_m"] / 1000 / SECTIONS
    for one, other in itertools.pairwise(nodes):
        net.impedance(one, other, complex(*case["loop_ohm_per_km"]) * km)
    if case["ballast_ohm_km"] is not None:
        ohm = case["ballast_ohm_km"] / km
        for at, node in enumerate(nodes):
            net.resistor(node, "0", 2 * ohm if at in (0, SECTIONS) else ohm)
    if case.get("ends"):
        net.impedance("relayend", "0", complex(*case["ends"]["bond_ohm"]))
        net.impedance("relayend", "rx", complex(*case["ends"]["relay_series_ohm"]))
        net.transformer("rx", "relay", 1 / case["ends"]["relay_ratio"])
    else:
        net.impedance("relayend", "relay", complex(*case["relay_series_ohm"]))
    net.impedance(relay, "0", complex(*case["relay_ohm"]))
    if case["shunt"] is not None:
        net.resistor(nodes[case["shunt"]["section"]], "0", case["shunt"]["ohm"])
    return net


def solve_plain(case: Case) -> Case:
    """Relay and rail voltages of one circuit."""
    rails = "n0" if case.get("ends") else "feed"
    found = solve(plain_netlist(case).lines, case["frequency_hz"], ["relay", "relayend", rails])
    return {"relay_v": found["relay"], "relay_end_rail_v": found["relayend"], "feed_end_rail_v": found[rails]}


def layout_netlist(case: Case) -> Netlist:
    """Legs of two rails each, leakage to each other and to earth (node 0), bonds, one fault, one shunt."""
    net = Netlist(case["frequency_hz"])
    for leg in case["legs"]:
        rails = [
            [
                leg["start"][rail],
                *(f"{leg['name']}r{rail}x{at}" for at in range(1, LEG_SECTIONS)),
                leg["end"][rail],
            ]
            for rail in (0, 1)
        ]
        _rails(net, case, leg, rails)
        if case["shunt"] is not None and case["shunt"]["leg"] == leg["name"]:
            at = case["shunt"]["section"]
            net.resistor(rails[0][at], rails[1][at], case["shunt"]["ohm"])
    for bond in case["bonds"]:
        if bond["name"] != case["open_bond"]:
            net.resistor(*bond["between"], bond["resistance_ohm"])
    feed, relay = case["feed"], case["relay"]
    net.source("s", feed["across"][1], feed["emf_v"])
    net.impedance("s", feed["across"][0], complex(*feed["series_ohm"]))
    net.impedance(*relay["across"], complex(*relay["impedance_ohm"]))
    # Gives the simulator a reference where nothing leads to earth; it carries no current then.
    net.resistor(feed["across"][1], "0", 1e15 if case["rail_to_earth_ohm_km"] else 1.0)
    return net


def _rails(net: Netlist, case: Case, leg: Case, rails: list[list[str]]) -> None:
    """Both rails of a leg and their leakage, half of it on each side of a gap."""
    km = leg["length_m"] / 1000 / LEG_SECTIONS
    ohm = complex(*case["loop_ohm_per_km"]) / 2 * km
    gap = case["break"] if case["break"] and case["break"]["leg"] == leg["name"] else None
    for rail in (0, 1):
        for at in range(LEG_SECTIONS):
            opened = gap is not None and (gap["rail"], gap["section"]) == (rail, at)
            net.impedance("cut" if opened else rails[rail][at], rails[rail][at + 1], ohm)
    for at in range(LEG_SECTIONS + 1):
        pair = [rails[0][at], rails[1][at]]
        share = 0.5 if at in (0, LEG_SECTIONS) else 1.0
        if gap is not None and gap["section"] == at:
            net.resistor("cut", "0", 1e15)
            _leaks(net, case, pair, km / 2)
            pair[gap["rail"]], share = "cut", 0.5
        _leaks(net, case, pair, km * share)


def _leaks(net: Netlist, case: Case, pair: list[str], km: float) -> None:
    """Leakage of a length of track, lumped: from rail to rail and from each rail to earth."""
    for one, other, ohm_km in (
        (pair[0], pair[1], case["ballast_ohm_km"]),
        (pair[0], "0", case["rail_to_earth_ohm_km"]),
        (pair[1], "0", case["rail_to_earth_ohm_km"]),
    ):
        if ohm_km is not None:
            net.resistor(one, other, ohm_km / km)


def solve_layout(case: Case) -> Case:
    """Relay voltage of one layout."""
    across = case["relay"]["across"]
    found = solve(layout_netlist(case).lines, case["frequency_hz"], across)
    return {"relay_v": [found[across[0]][part] - found[across[1]][part] for part in (0, 1)]}


def plain_cases(chance: random.Random) -> Iterator[Case]:
    """Circuits such as depots have: DC and AC by turns, one in six with no leakage, two in three shunted."""
    for at in range(PLAIN):
        ac = at % 2 == 1
        resistance = chance.uniform(0.04, 0.6)
        reactance = chance.uniform(0.3, 1.3) if ac else 0.0
        case: Case = {
            "frequency_hz": chance.choice([25.0, 50.0, 75.0, 83.3]) if ac else 0.0,
            "emf_v": round(chance.uniform(1.0, 12.0), 3),
            "feed_ohm": [round(chance.uniform(0.3, 12.0), 3), round(chance.uniform(0, 2), 3) if ac else 0.0],
            "length_m": float(chance.randint(50, 1500)),
            "loop_ohm_per_km": [round(resistance, 4), round(reactance, 4)],
            "ballast_ohm_km": None if at % 6 < 1 else round(math.exp(chance.uniform(0.0, 3.7)), 3),
            "relay_ohm": [
                round(chance.uniform(0.5, 60.0), 3),
                round(chance.uniform(0, 30), 3) if ac else 0.0,
            ],
            "relay_series_ohm": [round(chance.uniform(0.0, 1.0), 3) + 0.01, 0.0],
            "shunt": None,
        }
        if at % 3:
            case["shunt"] = {
                "section": chance.randint(0, SECTIONS),
                "ohm": round(chance.uniform(0.02, 3.0), 3),
            }
        if ac and at % 8 == 1:
            case["ends"] = {
                "feed_ratio": round(chance.uniform(5, 30), 2),
                "feed_series_ohm": [0.2, 0.3],
                "bond_ohm": chance.choice([[0.03, 0.35], [2.5, 0.4]]),
                "relay_series_ohm": [0.05, 0.02],
                "relay_ratio": round(chance.uniform(2, 20), 2),
            }
            case |= {"emf_v": 110.0, "relay_ohm": [150.0, 260.0], "relay_series_ohm": [0.0, 0.0]}
        yield case


def layout_cases(chance: random.Random) -> Iterator[Case]:
    """Plain line, series and parallel bonding through points; sound, broken, a bond open, shunted."""
    for at in range(40):
        ac = at % 4 == 3
        lengths = [round(chance.uniform(20, 400), 1) for _ in range(3)]
        case: Case = {
            "frequency_hz": 50.0 if ac else 0.0,
            "loop_ohm_per_km": [
                round(chance.uniform(0.05, 0.6), 4),
                round(chance.uniform(0.5, 1.2), 4) if ac else 0.0,
            ],
            "ballast_ohm_km": chance.choice([None, round(chance.uniform(2, 40), 2)]) if at % 3 else 8.0,
            "rail_to_earth_ohm_km": chance.choice([None, round(chance.uniform(2, 30), 2)]) if at % 2 else 5.0,
            "legs": [{"name": "a", "start": ["a1", "a2"], "end": ["b1", "b2"], "length_m": lengths[0]}],
            "bonds": [],
            "feed": {"across": ["a1", "a2"], "emf_v": 10.0, "series_ohm": [3.0, 1.0 if ac else 0.0]},
            "relay": {"across": ["b1", "b2"], "impedance_ohm": [9.0, 4.0 if ac else 0.0]},
            "break": None,
            "open_bond": None,
            "shunt": None,
        }
        if at % 5 >= 2:
            _through_points(case, lengths, series=at % 5 == 4)
        leg = chance.choice(case["legs"])["name"]
        if at % 3 == 1:
            case["break"] = {
                "leg": leg,
                "rail": chance.randint(0, 1),
                "section": chance.randint(1, LEG_SECTIONS - 1),
            }
        elif at % 3 == 2:
            case["shunt"] = {
                "leg": leg,
                "section": chance.randint(0, LEG_SECTIONS),
                "ohm": round(chance.uniform(0.05, 1), 3),
            }
        if case["bonds"] and at % 2:
            case["open_bond"] = chance.choice(case["bonds"])["name"]
        yield case


def _through_points(case: Case, lengths: list[float], *, series: bool) -> None:
    """Add a leg straight on and a diverging one, parallel at its toe, or with rail 2 running through it."""
    case["legs"] += [
        {"name": "b", "start": ["c1", "c2"], "end": ["d1", "d2"], "length_m": lengths[1]},
        {"name": "c", "start": ["e1", "e2"], "end": ["g1", "g2"], "length_m": lengths[2]},
    ]
    pairs = {"k1": ("b1", "c1"), "k2": ("b2", "c2"), "k3": ("b1", "e1"), "k4": ("b2", "e2")}
    if series:
        pairs = {"k1": ("b1", "c1"), "k2": ("b2", "e2"), "k3": ("g2", "c2"), "k4": ("b1", "e1")}
    case["bonds"] = [{"name": n, "between": list(p), "resistance_ohm": 0.0015} for n, p in pairs.items()]
    case["relay"]["across"] = ["d1", "d2"]


def main() -> None:
    """Solve every case and keep it with what ngspice gave."""
    chance = random.Random(SEED)
    plain = [case | {"ngspice": solve_plain(case)} for case in plain_cases(chance)]
    layouts = [case | {"ngspice": solve_layout(case)} for case in layout_cases(chance)]
    provenance = (
        f"Made by tests/data/ngspice_ladders.py with {version()} (Debian), seed {SEED}: {SECTIONS} pi "
        f"sections a line, {LEG_SECTIONS} a leg of a layout with each rail on its own; volts as [re, im]."
    )
    parts = [f'"provenance": {json.dumps(provenance)}']
    for name, cases in (("plain", plain), ("layouts", layouts)):
        rows = ",\n".join(json.dumps(case) for case in cases)
        parts.append(f'"{name}": [\n{rows}\n]')
    KEPT.write_text("{" + ",\n".join(parts) + "}\n", encoding="utf-8")


if __name__ == "__main__":
    main()
