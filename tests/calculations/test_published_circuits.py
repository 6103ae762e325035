"""Calculations of plain circuits over HTTP against published figures, the source beside each.

The same figures are checked on the models themselves; here they pass through the wire.
"""

from __future__ import annotations

from typing import Any

import pytest

from support.calculations import Bench, plain_circuit

HELM: dict[str, Any] = {
    "frequency_hz": 0,
    "feed": {"emf_v": 4, "series_ohm": [5, 0]},
    "line": {"length_m": 1000, "loop_ohm_per_km": [0.34, 0], "ballast_ohm_km": 3},
    "relay": {"impedance_ohm": [10, 0], "pick_up_v": 0.9, "drop_away_v": 0.6},
}
"""HELM Workbook 30, section 30.5, Engineering Example 1 as a uniform line (inputs read)."""

CONDITIONS = {"dry": (0.025 + 1.53) / (0.025 * 1.53), "wet": (0.4 + 2.0) / (0.4 * 2.0)}
"""Ballast of the university model of UK DC circuits, Space Weather 2023 (read in its code) [ohm·km]."""


def exam(
    emf_v: float, feed: float, relay: float, pick_up_a: float, km: float, ballast: Any
) -> dict[str, Any]:
    """An institution's exam question: lossless rails, drop-away 68 % of pick-up (inputs read)."""
    return {
        "frequency_hz": 0,
        "feed": {"emf_v": emf_v, "series_ohm": [feed, 0]},
        "line": {"length_m": km * 1000, "loop_ohm_per_km": [0, 0], "ballast_ohm_km": ballast},
        "relay": {
            "impedance_ohm": [relay, 0],
            "pick_up_v": pick_up_a * relay,
            "drop_away_v": 0.68 * pick_up_a * relay,
        },
    }


EXAMS = [
    pytest.param(5.0, 12.0, 9.0, 0.040, 2.5, 2.407, 1.836, 0.663, id="2008"),
    pytest.param(5.0, 6.0, 9.0, 0.050, 2.5, 3.935, 1.148, 0.409, id="2010"),
    pytest.param(50.0, 50.0, 25.0, 0.4, 75.0, 3.000, 21.25, 11.49, id="2013"),
]


def requirements(wet: float, dry: float | None, **changes: Any) -> dict[str, Any]:
    given = {"least_pick_up": 1.0, "minimum_shunt_ohm": 1e-3, "residual_share": 1.0}
    return given | {"wet_ohm_km": wet, "dry_ohm_km": dry} | changes


def test_operating_point_of_the_helm_ladder(bench: Bench) -> None:
    """Computed by the uniform-line formula from the workbook's inputs."""
    found = bench.ask("operating-point", {"circuit": HELM})
    assert found["relay_current_a"] == [pytest.approx(0.12053, abs=5e-6), 0.0]
    assert found["relay_v"] == [pytest.approx(1.2053, abs=5e-5), 0.0]
    assert found["feed_current_a"] == [pytest.approx(0.53681, abs=5e-6), 0.0]
    assert found["feed_end_rail_v"] == [pytest.approx(1.31597, abs=5e-6), 0.0]
    assert found["relay_state"] == "picks_up"
    taken = sum(element["power_w"] for element in found["elements"])
    assert taken == pytest.approx(4 * found["elements"][0]["current_a"][0], rel=1e-9)


@pytest.mark.parametrize(("position_m", "milliampere"), [(0, 28.10), (500, 28.31), (1000, 27.43)])
def test_operating_point_with_a_shunt(bench: Bench, position_m: float, milliampere: float) -> None:
    """0.5 ohm at feed end, middle, relay end of the same line (computed): the middle is the worst place."""
    found = bench.ask("operating-point", {"circuit": HELM, "shunt": {"position_m": position_m, "ohm": 0.5}})
    assert found["relay_current_a"][0] * 1000 == pytest.approx(milliampere, abs=0.005)
    assert found["relay_state"] == "released"
    at = next(place for place in found["rails"] if place["position_m"] == position_m)
    assert at["rail_v"][0] == pytest.approx(found["elements"][2]["voltage_v"][0], rel=1e-9)


@pytest.mark.parametrize(
    ("condition", "drop", "pick_up"),
    [
        ("dry", [0.957, 0.959, 0.962], [1.560, 1.564, 1.568]),
        ("wet", [1.374, 1.371, 1.381], [3.052, 3.045, 3.067]),
    ],
)
def test_shunt_limits(bench: Bench, condition: str, drop: list[float], pick_up: list[float]) -> None:
    """Feed end, middle, relay end of the 20 ohm circuit (computed from the model's inputs)."""
    circuit = plain_circuit(line={"ballast_ohm_km": CONDITIONS[condition]})
    found = bench.ask("shunt-limits", {"circuit": circuit})
    for member, expected in (("drop_shunt_ohm", drop), ("pick_up_shunt_ohm", pick_up)):
        limit = found[member]
        assert [limit[at] for at in ("feed_end", "middle", "relay_end")] == pytest.approx(expected, abs=1e-3)
        assert limit["worst"]["ohm"] <= min(limit["feed_end"], limit["middle"], limit["relay_end"])
    assert (found["drop_shunt_reason"], found["pick_up_shunt_reason"]) == (None, None)


@pytest.mark.parametrize(("emf", "feed", "relay", "pick_up_a", "ballast", "km", "wet", "dry"), EXAMS)
def test_longest_and_shunts_of_exam_circuits(
    bench: Bench,
    emf: float,
    feed: float,
    relay: float,
    pick_up_a: float,
    ballast: float,
    km: float,
    wet: float,
    dry: float,
) -> None:
    """Longest length, drop shunt there and with infinite ballast (computed from the papers' inputs)."""
    body = {"circuit": exam(emf, feed, relay, pick_up_a, 1.0, ballast), "upto_m": 6000}
    found = bench.ask("longest", body | {"requirements": requirements(ballast, ballast)})
    assert (found["length_m"] / 1000, found["binds"]) == (pytest.approx(km, abs=5e-4), "pick_up")
    for condition, expected in ((ballast, wet), (None, dry)):
        circuit = exam(emf, feed, relay, pick_up_a, found["length_m"] / 1000 * 0.999999, condition)
        limits = bench.ask("shunt-limits", {"circuit": circuit})
        assert limits["drop_shunt_ohm"]["worst"]["ohm"] == pytest.approx(expected, abs=5e-3)


def test_released_with_no_train(bench: Bench) -> None:
    """2010, second part: 1.5 ohm·km, 0.287 V on the rails, under the 0.306 V drop-away; no drop shunt."""
    circuit = exam(5.0, 6.0, 9.0, 0.050, 3.935, 1.5)
    point = bench.ask("operating-point", {"circuit": circuit})
    assert point["relay_end_rail_v"][0] == pytest.approx(0.287, abs=5e-4)
    assert point["relay_state"] == "released"
    found = bench.ask("shunt-limits", {"circuit": circuit})
    assert (found["drop_shunt_ohm"], found["pick_up_shunt_ohm"]) == (None, None)
    assert found["drop_shunt_reason"].startswith("released with no train")
    assert found["pick_up_shunt_reason"]


def test_the_2010_circuit_passes_wet_and_fails_dry(bench: Bench) -> None:
    """0.5 ohm releases it at its own ballast and not when dry (computed from the paper's inputs)."""
    circuit = exam(5.0, 6.0, 9.0, 0.050, 3.935, None)
    body = {"circuit": circuit, "wet_ohm_km": 2.5, "minimum_shunt_ohm": 0.5}
    found = bench.ask("season", body)
    ((low, high),) = found["shunts"]
    assert (low, found["dry_ohm_km"]) == (2.5, None)
    assert 2.5 < high < 40
    assert found["curve"][-1]["ballast_ohm_km"] is None
    assert found["curve"][-1]["drop_shunt_ohm"] == pytest.approx(0.409, abs=5e-3)


def test_a_setting_serves_exactly_in_its_window(bench: Bench) -> None:
    """The UK circuit over all its ballast: at either edge what binds it is just met (property)."""
    needed = requirements(3.0, None, least_pick_up=1.1, minimum_shunt_ohm=0.5, residual_share=0.85)
    body = {"circuit": plain_circuit(), "requirements": needed}
    found = bench.ask("setting", body | {"adjustment": {"adjust": "feed_ohm", "range": [1, 30]}})
    low, high = found["window"]
    assert found["binds"] == ["shunt", "pick_up"]
    steps = [low * 0.99, low, found["best"], high, high * 1.01]
    stepped = bench.ask("setting", body | {"adjustment": {"adjust": "feed_ohm", "steps": steps}})
    assert [step["value"] for step in stepped["steps"]] == pytest.approx(steps)
    assert [step["serves"] for step in stepped["steps"]][::2] == [False, True, False]
    margins = [step["margins"] for step in stepped["steps"]]
    assert margins[1]["shunt"] == pytest.approx(0, abs=1e-6)
    assert margins[3]["pick_up"] == pytest.approx(0, abs=1e-6)


def test_no_window_says_what_would_open_one(bench: Bench) -> None:
    needed = requirements(3.0, None, least_pick_up=2.0, minimum_shunt_ohm=1.5)
    body = {"circuit": plain_circuit(), "requirements": needed}
    found = bench.ask("setting", body | {"adjustment": {"adjust": "emf_v", "range": [1, 30]}})
    assert (found["window"], found["binds"]) == (None, None)
    assert min(found["margins"].values()) < 0
    assert found["opens"]["shunt"] < 0


def test_ballast_from_readings(bench: Bench) -> None:
    """The helm line back from its own readings; the handbook formula reads 0.2 to 1.9 % high (computed)."""
    point = bench.ask("operating-point", {"circuit": HELM})
    readings = {
        name: {"value": point[of][0], "u": 1e-6}
        for name, of in (
            ("feed_v", "feed_end_rail_v"),
            ("feed_a", "feed_current_a"),
            ("relay_v", "relay_end_rail_v"),
            ("relay_a", "relay_current_a"),
        )
    }
    body = {"circuit": HELM, "readings": readings, "loop_relative_u": 0.0}
    limits = bench.ask("shunt-limits", {"circuit": HELM})
    shunt = {"position_m": 1000, "ohm": limits["drop_shunt_ohm"]["relay_end"]}
    found = bench.ask("ballast", body | {"drop_shunt": shunt})
    assert found["ballast_ohm_km"] == pytest.approx(3.0, rel=1e-9)
    assert 0.002 < found["handbook_ohm_km"] / 3.0 - 1 < 0.019
    assert found["exact"] == {
        "loop_ohm_per_km": pytest.approx(0.34, rel=1e-6),
        "ballast_ohm_km": pytest.approx(3.0, rel=1e-6),
        "reason": None,
    }
    assert found["working_drop_away_v"] == pytest.approx(0.6, rel=1e-9)
    voltages = {name: readings[name] for name in ("feed_v", "relay_v")}
    derived = body | {"readings": voltages, "feed_relative_u": 1e-5, "relay_relative_u": 1e-5}
    assert bench.ask("ballast", derived)["ballast_ohm_km"] == pytest.approx(3.0, rel=1e-6)


def test_ballast_of_an_ac_circuit(bench: Bench) -> None:
    """Fitted back from readings of the same circuit in other ballast (independent of the start)."""
    circuit = {
        "frequency_hz": 50,
        "feed": {"emf_v": 6, "series_ohm": [1.5, 0.5]},
        "line": {"length_m": 1000, "loop_ohm_per_km": [0.31, 0.39], "ballast_ohm_km": 4},
        "relay": {"impedance_ohm": [4, 3], "series_ohm": [0.1, 0], "pick_up_v": 1.0, "drop_away_v": 0.6},
    }
    point = bench.ask("operating-point", {"circuit": circuit})
    readings = {
        name: {"value": abs(complex(*point[of])), "u": 1e-5}
        for name, of in (
            ("feed_v", "feed_end_rail_v"),
            ("feed_a", "feed_current_a"),
            ("relay_v", "relay_end_rail_v"),
        )
    }
    start = circuit | {"line": circuit["line"] | {"ballast_ohm_km": 6}}  # type: ignore[operator]
    doubt = {"ballast": 1.0, "emf": 1e-3, "feed_ohm": 1e-3, "loop_ohm": 1e-3, "drop_away": 0.05}
    found = bench.ask("ballast", {"circuit": start, "readings": readings, "doubt": doubt})
    assert found["ballast_ohm_km"] == pytest.approx(4.0, rel=0.01)
    assert (found["handbook_ohm_km"], found["exact"]) == (None, None)


def test_rail_balance(bench: Bench) -> None:
    """Two millivolt drops over equal lengths (common practice, no source); by hand: 300 and 271.4 A."""
    body = {"drop_1_v": 0.0525, "drop_2_v": 0.0475, "length_m": 5, "rail_ohm_per_km": 0.035}
    found = bench.ask("rail-balance", body | {"bond_turns": 10, "saturation_ampere_turns": 600})
    assert [found["rail_1_a"], found["rail_2_a"]] == pytest.approx([300.0, 271.43], abs=0.005)
    assert (found["of_total"], found["of_mean"]) == (pytest.approx(0.05), pytest.approx(0.1))
    assert found["ampere_turns"] == pytest.approx(10 / 2 * 28.5714, abs=1e-3)
    assert found["saturation_margin"] == pytest.approx(1 - 142.857 / 600, abs=1e-5)
    without = bench.ask("rail-balance", body)
    assert (without["ampere_turns"], without["saturation_margin"]) == (None, None)


@pytest.mark.parametrize(("km", "immunity_v"), [(0.45, 50.0), (0.75, 80.0)])
def test_interference(bench: Bench, km: float, immunity_v: float) -> None:
    """300 A over 0.45 km at 50 V, over 0.75 km at 80 V: about 0.36 ohm/km (IR SEM 2021, computed)."""
    circuit = plain_circuit(
        frequency_hz=50,
        feed={"series_ohm": [1e-6, 0]},
        line={"length_m": km * 1000, "loop_ohm_per_km": [0.72, 0], "ballast_ohm_km": None},
        relay={"impedance_ohm": [1e6, 0]},
    )
    asked = {"normal_a": 300, "fault_a": 600, "rail_ohm_per_km": [0.36, 0], "axle_ohm": 0.0251}
    body = {"circuit": circuit, "upto_m": 3000, "limit_v": immunity_v} | asked
    found = bench.ask("interference", body)
    volts = abs(complex(*found["normal"]["relay_v"]["none"]))
    assert volts == pytest.approx(immunity_v, rel=0.03)
    assert found["largest_current_a"] == pytest.approx(300 * immunity_v / volts, rel=1e-6)
    assert found["normal"]["longest_m"] == pytest.approx(km * 1000 * immunity_v / volts, rel=1e-4)
    assert found["fault"]["under_limit"] is False
    assert found["fault"]["longest_m"] == pytest.approx(found["normal"]["longest_m"] / 2, rel=1e-4)


def test_bonding_proof_of_plain_line(bench: Bench) -> None:
    """10 V, 7.2 ohm, 20 ohm, 1 km: 0.2 S/km each rail to earth leaves 1.33 V, over 1.10 V (computed)."""
    layout = {
        "frequency_hz": 0,
        "loop_ohm_per_km": [0.0578, 0],
        "ballast_ohm_km": 1e6,
        "rail_to_earth_ohm_km": 5,
        "legs": [{"name": "a", "start": ["f1", "f2"], "end": ["r1", "r2"], "length_m": 1000}],
        "bonds": [],
        "joints": [{"name": "j", "between": ["f1", "f2"]}],
        "feed": {"across": ["f1", "f2"], "emf_v": 10, "series_ohm": [7.2, 0]},
        "relay": {"across": ["r1", "r2"], "impedance_ohm": [20, 0], "pick_up_v": 1.62, "drop_away_v": 1.1},
    }
    found = bench.ask("bonding-proof", {"layout": layout, "shunt_ohm": 0.5})
    rail = found["opened"]["a/rail1"]
    assert abs(complex(*rail["relay_v"])) == pytest.approx(1.33, abs=5e-3)
    assert rail["revealed"] is False
    assert found["shorted"]["j"]["revealed"] is True
    hidden = bench.ask("bonding-proof", {"layout": layout, "shunt_ohm": 100.0})["opened"]["a/rail1"]
    assert hidden["undetected_stretches"] == [{"leg": "a", "from_m": 0.0, "to_m": 1000.0}]
    second = bench.ask("bonding-proof", {"layout": layout, "shunt_ohm": 0.5, "first_fault": "a/rail1"})
    assert second["opened"]["a/rail2"]["revealed"] is True
