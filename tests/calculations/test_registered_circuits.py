"""Sections of the register as circuits: each kind, its worst case beside it, what is missing named."""

from __future__ import annotations

import json
import math
from typing import Any

import pytest

from service.application import layouts
from service.application.section_content import Configuration
from support.calculations import LOCAL, REGISTERED, Bench, equipment, named, plain_circuit
from support.limit_books import limit

MIDDLE_OHM_KM = math.sqrt(3.0 * 40.7)
"""Nominal ballast of the section under test."""


def nominal_circuit(**changes: Any) -> dict[str, Any]:
    """What the DC section under test says, as a plain circuit."""
    relay = {"pick_up_v": 0.081 * 20, "drop_away_v": 0.055 * 20}
    return plain_circuit(line={"ballast_ohm_km": MIDDLE_OHM_KM}, relay=relay, **changes)


@pytest.fixture(scope="module")
def dc(bench: Bench) -> str:
    return bench.section("DC1")


def test_nominal_is_the_plain_circuit(bench: Bench, dc: str) -> None:
    for calculation in ("operating-point", "shunt-limits"):
        found = bench.ask(calculation, named(dc))
        alone = bench.ask(calculation, {"circuit": nominal_circuit()})
        assert found["nominal"] == {name: alone[name] for name in found["nominal"]}
        assert (found["depot"], found["section"]) == ("ashby", dc)


def test_worst_cases_are_those_of_the_design(bench: Bench, dc: str) -> None:
    """Clear: low supply, high rails, wet. Occupied: high supply, low rails, no ballast (from memory)."""
    clear = plain_circuit(
        feed={"emf_v": 9.5},
        line={"loop_ohm_per_km": [0.0867, 0], "ballast_ohm_km": 3.0},
        relay={"pick_up_v": 0.081 * 20, "drop_away_v": 0.055 * 20},
    )
    occupied = plain_circuit(
        feed={"emf_v": 11.0},
        line={"ballast_ohm_km": None},
        relay={"pick_up_v": 0.081 * 20, "drop_away_v": 0.055 * 20},
    )
    found = bench.ask("operating-point", named(dc))["worst_case"]
    alone = bench.ask("operating-point", {"circuit": clear})
    assert found["relay_v"] == pytest.approx(alone["relay_v"])
    shunt = {"position_m": 400, "ohm": 0.5}
    found = bench.ask("operating-point", named(dc, shunt=shunt))["worst_case"]
    alone = bench.ask("operating-point", {"circuit": occupied, "shunt": shunt})
    assert found["relay_v"] == pytest.approx(alone["relay_v"])
    found = bench.ask("shunt-limits", named(dc))["worst_case"]
    alone = bench.ask("shunt-limits", {"circuit": occupied})
    assert found["drop_shunt_ohm"]["worst"] == pytest.approx(alone["drop_shunt_ohm"]["worst"])
    # 10 V behind 7.2 ohm at 11 V and infinite ballast: 0.836 ohm (computed from the model's inputs).
    assert found["drop_shunt_ohm"]["worst"]["ohm"] == pytest.approx(0.836, abs=1e-3)


def test_a_cold_coil_lowers_the_worst_drop_shunt(bench: Bench, dc: str) -> None:
    """-10 °C: 0.812 ohm at 10 V (computed from the Space Weather 2023 model's inputs)."""
    spread = {"supply": [1, 1], "coil_c": [-10, 40]}
    found = bench.ask("shunt-limits", named(dc, spread=spread))
    assert found["worst_case"]["drop_shunt_ohm"]["worst"]["ohm"] == pytest.approx(0.812, abs=1e-3)
    assert any("-10 and 40 °C" in assumption for assumption in found["assumptions"])
    plain = bench.ask("shunt-limits", {"circuit": nominal_circuit(), "spread": spread})
    assert plain["worst_case"] == found["worst_case"]


def test_a_bench_test_goes_before_type_data_and_widens_the_worst_case(bench: Bench) -> None:
    relay = {"impedance_ohm": [20, 0], "rated_pick_up_v": 1.7, "rated_drop_away_v": 1.0}
    relay |= {"bench_pick_up_v": 1.62, "bench_drop_away_v": 1.1}
    bench.section("BENCH", equipment=equipment("dc", relay=relay))
    found = bench.ask("shunt-limits", named("BENCH"))
    alone = bench.ask("shunt-limits", {"circuit": plain_circuit(line={"ballast_ohm_km": MIDDLE_OHM_KM})})
    assert found["nominal"]["drop_shunt_ohm"]["worst"] == pytest.approx(alone["drop_shunt_ohm"]["worst"])
    lower = plain_circuit(feed={"emf_v": 11}, line={"ballast_ohm_km": None}, relay={"drop_away_v": 1.0})
    alone = bench.ask("shunt-limits", {"circuit": lower})
    assert found["worst_case"]["drop_shunt_ohm"]["worst"] == pytest.approx(alone["drop_shunt_ohm"]["worst"])


@pytest.mark.parametrize(
    "kind", ["dc", "dc_ac_immune", "ac_single_rail", "ac_double_rail", "audio_frequency"]
)
def test_every_kind_with_a_model_answers(bench: Bench, kind: str) -> None:
    section = bench.section(f"K-{kind}", kind, length_m=600.0)
    point = bench.ask("operating-point", named(section))
    assert point["nominal"]["relay_state"] == "picks_up"
    limits = bench.ask("shunt-limits", named(section))
    worst, nominal = (limits[case]["drop_shunt_ohm"]["worst"]["ohm"] for case in ("worst_case", "nominal"))
    assert 0 < worst < nominal
    across = {"position_m": limits["nominal"]["drop_shunt_ohm"]["worst"]["position_m"], "ohm": nominal * 0.99}
    assert bench.ask("operating-point", named(section, shunt=across))["nominal"]["relay_state"] == "released"
    season = bench.ask("season", named(section, minimum_shunt_ohm=0.1))
    assert season["wet_ohm_km"] == 3.0
    assert season["dry_ohm_km"] is None
    assert season["nominal"]["picks_up"]
    assert "rail surface" in season["caution"]
    assert season["model"]
    assert len(season["assumptions"]) >= 4


def test_elements_stand_where_the_kind_has_them(bench: Bench) -> None:
    bench.section("BONDED", "ac_double_rail", length_m=600.0)
    found = bench.ask("operating-point", named("BONDED"))["nominal"]
    names = [element["name"] for element in found["elements"]]
    assert names[1] == "feed transformer"
    assert names.index("feed bond") < names.index("line") < names.index("relay bond")
    # 13 : 1 from the rails to the relay, which the register writes 1 : 13 from the feed's side.
    transformer = found["elements"][names.index("relay transformer")]
    relay = found["elements"][-1]
    step_up = abs(complex(*relay["voltage_v"])) / abs(complex(*transformer["voltage_v"]))
    assert step_up == pytest.approx(13.0, rel=1e-9)


def test_a_vane_relay_that_is_down_is_searched_for_shunts_that_lift_it(bench: Bench) -> None:
    """The circuit of the model's own example, whose clear angle is 1.4 rad from its ideal."""
    relay = {"impedance_ohm": [4, 3], "rated_pick_up_v": 1.5, "rated_drop_away_v": 0.8} | LOCAL
    relay |= {"local_angle_deg": 0.0, "ideal_angle_deg": math.degrees(-1.8)}
    changes = {"feed": {"emf_v": 6.0, "series_ohm": [0.2, 2]}, "relay": relay}
    changes |= {"ballast_wet_ohm_km": 8.0, "ballast_dry_ohm_km": 8.0}
    bench.section("VANE", "ac_single_rail", 800.0, equipment=equipment("ac_single_rail", **changes))
    found = bench.ask("shunt-limits", named("VANE"))["nominal"]
    assert found["pick_up_shunt_ohm"] is None
    lifting = found["lifting_shunt"]
    assert 0 < lifting["from_ohm"] < lifting["to_ohm"]
    middle = {"position_m": lifting["position_m"], "ohm": (lifting["from_ohm"] + lifting["to_ohm"]) / 2}
    assert bench.ask("operating-point", named("VANE", shunt=middle))["nominal"]["relay_state"] == "picks_up"


@pytest.mark.parametrize("kind", ["impulse", "coded"])
@pytest.mark.parametrize("calculation", ["operating-point", "shunt-limits"])
def test_kinds_without_a_linear_model_say_so(bench: Bench, kind: str, calculation: str) -> None:
    section = bench.section(f"{kind}-{calculation}", kind)
    problem = bench.post(calculation, named(section)).json()
    assert (problem["status"], problem["type"]) == (422, "/problems/no-answer")
    assert "no linear model applies" in problem["detail"]
    assert [fault["code"] for fault in problem["errors"]] == ["no_linear_model"]


def test_no_answer_inside_a_tuned_zone(bench: Bench) -> None:
    section = bench.section("AF", "audio_frequency", length_m=600.0)
    for position_m, code in ((10.0, "tuned_zone"), (590.0, "tuned_zone")):
        body = named(section, shunt={"position_m": position_m, "ohm": 0.15})
        assert bench.refused("operating-point", body) == [(code, None)]
    limits = bench.ask("shunt-limits", named(section))["nominal"]
    assert 20 <= limits["drop_shunt_ohm"]["worst"]["position_m"] <= 580


def test_several_receivers_have_no_answer(bench: Bench) -> None:
    section = bench.section("TWO", equipment=equipment("dc", receivers=2))
    assert bench.refused("shunt-limits", named(section)) == [("several_receivers", None)]


MISSING = [
    ("dc", {"feed": {"emf_v": 10.0}}, ["equipment.feed.series_ohm"]),
    (
        "dc",
        {"line": None, "ballast_wet_ohm_km": None},
        ["equipment.line.loop_ohm_per_km", "equipment.ballast_wet_ohm_km"],
    ),
    (
        "dc",
        {"relay": {"impedance_ohm": [20, 0]}},
        ["equipment.relay.bench_pick_up_v", "equipment.relay.bench_drop_away_v"],
    ),
    ("ac_single_rail", {"frequency_hz": None}, ["equipment.frequency_hz"]),
    (
        "ac_single_rail",
        {"relay": {"impedance_ohm": [4, 3], "rated_pick_up_v": 1, "rated_drop_away_v": 0.6, "local_v": 110}},
        [f"equipment.relay.{name}" for name in ("local_angle_deg", "rated_local_v", "ideal_angle_deg")],
    ),
    ("ac_double_rail", {"feed_bond": None}, ["equipment.feed_bond.impedance_ohm"]),
    ("audio_frequency", {"relay_tuned_zone_m": None}, ["equipment.relay_tuned_zone_m"]),
]


@pytest.mark.parametrize(("kind", "changes", "missing"), MISSING)
def test_what_the_register_lacks_is_named(
    bench: Bench, kind: str, changes: dict[str, Any], missing: list[str]
) -> None:
    section = bench.section(f"M-{kind}-{len(missing[0])}", equipment=equipment(kind, **changes), kind=kind)
    problem = bench.post("shunt-limits", named(section)).json()
    assert problem["status"] == 422
    reasons = [(fault["code"], fault["pointer"], fault["reason"]) for fault in problem["errors"]]
    assert reasons == [
        ("not_registered", "/section", f"the register does not say {name}") for name in missing
    ]


def test_an_empty_record_names_all_of_it(bench: Bench) -> None:
    section = bench.section("EMPTY", equipment=None, length_m=None)
    reasons = [fault["reason"] for fault in bench.post("season", named(section)).json()["errors"]]
    assert "the register does not say length_m" in reasons
    assert len(reasons) == 9


def test_what_no_circuit_has_is_told_of_the_register(bench: Bench) -> None:
    relay = {"impedance_ohm": [20, 5], "rated_pick_up_a": 0.081, "rated_drop_away_a": 0.055}
    section = bench.section("REACTIVE", equipment=equipment("dc", relay=relay))
    problem = bench.post("shunt-limits", named(section)).json()
    ((code, pointer, reason),) = [(one["code"], one["pointer"], one["reason"]) for one in problem["errors"]]
    assert (code, pointer) == ("not_physical", "/section")
    assert "relay.impedance_ohm" in reason


def test_weather_and_shunt_come_from_record_and_book(bench: Bench) -> None:
    minimum = {"value": 0.6, "hazard": "wrong_side", "near_margin": 0.1}
    limits = [
        limit(test_points=["feed_end"]),
        limit(limit="stricter", minimum=minimum, test_points=["relay_end"]),
    ]
    book = bench.book(limits=limits, dry_ballast_ohm_km=500)
    section = bench.section("BOOKED", book=book)
    found = bench.ask("season", named(section))
    assert (found["wet_ohm_km"], found["dry_ohm_km"], found["minimum_shunt_ohm"]) == (3.0, 500.0, 0.6)
    assert any("ballast 3 to 500" in assumption for assumption in found["assumptions"])
    occupied = bench.ask("shunt-limits", named(section))["worst_case"]["drop_shunt_ohm"]["worst"]["ohm"]
    assert found["worst_case"]["curve"][-1]["drop_shunt_ohm"] == pytest.approx(occupied)
    (shunts,) = found["worst_case"]["shunts"]
    assert shunts == [3.0, 500.0]
    # The clear case's own shunt would do better, and is not what is shown.
    assert (
        found["worst_case"]["curve"][-1]["drop_shunt_ohm"] < found["nominal"]["curve"][-1]["drop_shunt_ohm"]
    )


def test_without_a_book_the_shunt_must_be_stated(bench: Bench, dc: str) -> None:
    assert bench.refused("season", named(dc)) == [("missing", "/minimum_shunt_ohm")]
    needed = {"least_pick_up": 1.1, "residual_share": 0.85}
    refused = bench.refused("longest", named(dc, requirements=needed, upto_m=2000))
    assert refused == [("missing", "/requirements/minimum_shunt_ohm")]


NEEDED = {"least_pick_up": 1.0, "minimum_shunt_ohm": 0.5, "residual_share": 1.0}


def test_a_registered_resistor_is_set_in_its_own_ohms(bench: Bench) -> None:
    feed = REGISTERED["feed"] | {
        "series_ohm": [1.0, 0],
        "adjustable_ohm": 6.2,
        "adjustable_from_ohm": 0.0,
        "adjustable_to_ohm": 20.0,
        "adjustable_step_ohm": 0.5,
    }
    section = bench.section("SET", equipment=equipment("dc", feed=feed))
    body = named(section, requirements=NEEDED)
    found = bench.ask("setting", body)
    asked = {"adjust": "feed_ohm", "range": [1, 21]}
    alone = bench.ask(
        "setting",
        {
            "circuit": nominal_circuit(),
            "requirements": NEEDED | {"wet_ohm_km": 3.0},
            "adjustment": asked,
        },
    )
    low, high = found["nominal"]["window"]
    assert [low + 1, high + 1] == pytest.approx(alone["window"], rel=1e-6)
    assert found["nominal"]["best"] + 1 == pytest.approx(alone["best"], rel=1e-3)
    below, above = (step["value"] for step in found["nominal"]["steps"])
    assert below <= found["nominal"]["best"] <= above
    assert (below * 2, above - below) == (pytest.approx(round(below * 2)), pytest.approx(0.5))
    worst = found["worst_case"]["window"]
    assert low < worst[0] < worst[1] < high
    stated = bench.ask("setting", body | {"adjustment": {"adjust": "feed_ohm", "range": [0, 20]}})
    assert stated["worst_case"] == found["worst_case"]
    _check_edges(bench, section, worst)


def _check_edges(bench: Bench, section: str, worst: list[float]) -> None:
    """At the worst window's edges the two worst cases just hold, by operating points and shunt limits."""
    drop, pull = [], []
    for ohm in worst:
        feed = REGISTERED["feed"] | {"series_ohm": [1.0 + ohm, 0]}
        name = bench.section(f"{section}-{ohm:.3f}", equipment=equipment("dc", feed=feed))
        limits = bench.ask("shunt-limits", named(name))["worst_case"]
        drop.append(limits["drop_shunt_ohm"]["worst"]["ohm"])
        pull.append(bench.ask("operating-point", named(name))["worst_case"]["relay_v"][0] / 1.62)
    assert drop[0] == pytest.approx(0.5, rel=1e-6)
    assert pull[1] == pytest.approx(1.0, rel=1e-6)


def test_registered_taps_are_steps_of_the_emf(bench: Bench) -> None:
    feed = REGISTERED["feed"] | {"taps_v": [12.0, 6.0, 8.0, 10.0]}
    section = bench.section("TAPS", equipment=equipment("dc", feed=feed))
    found = bench.ask("setting", named(section, requirements=NEEDED))
    assert found["adjust"] == "emf_v"
    assert [step["value"] for step in found["nominal"]["steps"]] == [6.0, 8.0, 10.0, 12.0]
    assert found["worst_case"]["window"] is not None


def test_a_feed_that_cannot_be_adjusted_is_told(bench: Bench, dc: str) -> None:
    problem = bench.post("setting", named(dc, requirements=NEEDED)).json()
    reasons = [fault["reason"].split()[-1] for fault in problem["errors"]]
    assert reasons == ["equipment.feed.adjustable_from_ohm", "equipment.feed.adjustable_to_ohm"]


def test_longest_in_the_worst_case_is_shorter(bench: Bench, dc: str) -> None:
    body = named(dc, requirements=NEEDED, upto_m=5000)
    found = bench.ask("longest", body)
    assert found["worst_case"]["length_m"] < found["nominal"]["length_m"]
    adjusted = bench.ask("longest", body | {"adjustment": {"adjust": "emf_v", "range": [5, 15]}})
    assert adjusted["worst_case"] is None
    assert adjusted["nominal"]["length_m"] > found["nominal"]["length_m"]


def test_ballast_of_a_registered_section(bench: Bench, dc: str) -> None:
    point = bench.ask("operating-point", named(dc))["nominal"]
    readings = {
        name: {"value": point[of][0], "u": 1e-6}
        for name, of in (("feed_v", "feed_end_rail_v"), ("relay_v", "relay_end_rail_v"))
    }
    body = named(dc, readings=readings, loop_relative_u=0.05, feed_relative_u=0.01, relay_relative_u=0.01)
    assert bench.ask("ballast", body)["ballast_ohm_km"] == pytest.approx(MIDDLE_OHM_KM, rel=1e-5)


def test_a_saturated_bond_lowers_the_relay(bench: Bench) -> None:
    section = bench.section("SATURATED", "ac_double_rail", length_m=600.0)
    body = named(section, drop_1_v=0.06, drop_2_v=0.04, length_m=5, rail_ohm_per_km=0.05)
    found = bench.ask("rail-balance", body | {"saturated_bond_ohm": [0.03, 0.05]})
    assert found["ampere_turns"] == pytest.approx(16 / 2 * 80)
    volts = {name: abs(complex(*one["relay_v"])) for name, one in found["saturated"].items()}
    assert max(volts["feed_bond"], volts["relay_bond"]) < volts["sound"]


def test_without_bonds_none_saturates(bench: Bench, dc: str) -> None:
    body = named(dc, drop_1_v=0.06, drop_2_v=0.04, length_m=5, rail_ohm_per_km=0.05)
    assert bench.ask("rail-balance", body)["ampere_turns"] is None
    refused = bench.refused("rail-balance", body | {"saturated_bond_ohm": [0.03, 0]})
    assert refused == [("not_physical", "/saturated_bond_ohm")]


def test_worst_cases_that_exclude_each_other_leave_no_window(bench: Bench, dc: str) -> None:
    needed = NEEDED | {"minimum_shunt_ohm": 1.0, "least_pick_up": 1.4}
    asked = {"adjust": "feed_ohm", "range": [0, 30]}
    body = named(dc, requirements=needed, adjustment=asked)
    assert bench.ask("setting", body)["worst_case"] == {"window": None, "binds": None}
    body["requirements"] = NEEDED | {"minimum_shunt_ohm": 50}
    assert bench.ask("setting", body)["worst_case"] == {"window": None, "binds": None}


def test_a_stated_ballast_goes_before_the_register(bench: Bench, dc: str) -> None:
    drop = {}
    for dry in (20, None):
        found = bench.ask("shunt-limits", named(dc, spread={"ballast_ohm_km": [2, dry]}))
        drop[dry] = found["worst_case"]["drop_shunt_ohm"]["worst"]["ohm"]
    assert drop[20] > drop[None] == pytest.approx(0.836, abs=1e-3)


def test_interference_with_a_registered_section(bench: Bench, dc: str) -> None:
    body = named(dc, normal_a=5, rail_ohm_per_km=[0.0289, 0], axle_ohm=0.0251, upto_m=3000)
    found = bench.ask("interference", body)
    assert found["nominal"]["limit_v"] == pytest.approx(1.1)
    assert found["nominal"]["normal"]["under_limit"] is True
    assert found["worst_case"]["largest_current_a"] < found["nominal"]["largest_current_a"]


LAYOUT: dict[str, Any] = {
    "frequency_hz": 0,
    "loop_ohm_per_km": [0.0578, 0],
    "ballast_ohm_km": [5, 20],
    "legs": [{"name": "a", "start": ["f1", "f2"], "end": ["r1", "r2"], "length_m": 1000}],
    "feed": {"across": ["f1", "f2"], "emf_v": 10, "series_ohm": [7.2, 0]},
    "relay": {"across": ["r1", "r2"], "impedance_ohm": [20, 0], "pick_up_v": 1.62, "drop_away_v": 1.1},
}


def test_a_registered_layout_is_proved_at_its_highest_supply(bench: Bench) -> None:
    layout = layouts.of_text(json.dumps(LAYOUT))
    section = bench.section("POINTS", layout=layout, configuration=Configuration(points_ends=1))
    found = bench.ask("bonding-proof", named(section, shunt_ohm=0.5))
    assert (found["depot"], found["section"]) == ("ashby", "POINTS")
    higher = LAYOUT | {"feed": LAYOUT["feed"] | {"emf_v": 11}}
    alone = bench.ask("bonding-proof", {"layout": higher, "shunt_ohm": 0.5})
    assert found["opened"] == alone["opened"]
    assumptions = bench.ask("shunt-limits", named(section))["assumptions"]
    assert any("bonding proof" in assumption for assumption in assumptions)


def test_a_section_without_layout_has_none_to_prove(bench: Bench, dc: str) -> None:
    assert bench.refused("bonding-proof", named(dc, shunt_ohm=0.5)) == [("not_registered", "/section")]


EXTRA: dict[str, dict[str, Any]] = {
    "operating-point": {},
    "shunt-limits": {},
    "season": {"minimum_shunt_ohm": 0.5},
    "setting": {"requirements": NEEDED, "adjustment": {"adjust": "feed_ohm", "range": [1, 30]}},
    "longest": {"requirements": NEEDED, "upto_m": 2000},
    "ballast": {
        "readings": {"feed_v": {"value": 4, "u": 0.1}, "relay_v": {"value": 3.9, "u": 0.1}},
        "loop_relative_u": 0.1,
        "feed_relative_u": 0.1,
        "relay_relative_u": 0.1,
    },
    "rail-balance": {"drop_1_v": 0.06, "drop_2_v": 0.04, "length_m": 5, "rail_ohm_per_km": 0.05},
    "interference": {"normal_a": 5, "rail_ohm_per_km": [0.0289, 0], "axle_ohm": 0.0251, "upto_m": 3000},
    "bonding-proof": {"shunt_ohm": 0.5},
}


@pytest.mark.parametrize("calculation", EXTRA)
def test_another_depots_section_is_not_found(bench: Bench, dc: str, calculation: str) -> None:
    body = named(dc) | EXTRA[calculation]
    other = bench.api.client("read", depot="birchfield").post(f"/v1/calculations/{calculation}", json=body)
    assert (other.status_code, other.json()["type"]) == (404, "/problems/not-found")
    for changes in ({"depot": "birchfield"}, {"depot": "nowhere"}, {"section": "NONE"}):
        assert bench.post(calculation, body | changes).status_code == 404
    own = bench.api.client("read", depot="ashby").post(f"/v1/calculations/{calculation}", json=body)
    assert own.status_code in (200, 422)


def test_nothing_is_written(bench: Bench, dc: str) -> None:
    with bench.api.service.read() as connection:
        before = connection.exec_driver_sql("SELECT count(*) FROM journal").scalar()
    bench.ask("shunt-limits", named(dc))
    with bench.api.service.read() as connection:
        assert connection.exec_driver_sql("SELECT count(*) FROM journal").scalar() == before


def test_the_scope_is_read(bench: Bench) -> None:
    assert bench.api.client("readings").post("/v1/calculations/shunt-limits", json={}).status_code == 403
