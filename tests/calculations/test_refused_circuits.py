"""What is refused, with a pointer into what was sent; nothing is answered that is no number."""

from __future__ import annotations

import json
from typing import Any

import pytest

from support.calculations import UK, Bench, plain_circuit

NEEDED = {"least_pick_up": 1.0, "minimum_shunt_ohm": 0.5, "residual_share": 1.0, "wet_ohm_km": 3.0}
RANGE = {"adjust": "feed_ohm", "range": [1, 30]}
LAYOUT: dict[str, Any] = {
    "frequency_hz": 0,
    "loop_ohm_per_km": [0.1, 0],
    "ballast_ohm_km": 4,
    "rail_to_earth_ohm_km": None,
    "legs": [
        {"name": "a", "start": ["a1", "a2"], "end": ["b1", "b2"], "length_m": 60},
        {"name": "b", "start": ["c1", "c2"], "end": ["d1", "d2"], "length_m": 60},
    ],
    "bonds": [
        {"name": "k1", "between": ["b1", "c1"], "resistance_ohm": 0.0015},
        {"name": "k2", "between": ["b2", "c2"], "resistance_ohm": 0.0015},
    ],
    "joints": [],
    "feed": {"across": ["a1", "a2"], "emf_v": 3, "series_ohm": [1.5, 0]},
    "relay": {"across": ["d1", "d2"], "impedance_ohm": [9, 0], "pick_up_v": 1.4, "drop_away_v": 0.95},
}

BAD_CIRCUITS: list[tuple[dict[str, Any], str]] = [
    ({"line": {"length_m": 0}}, "/circuit/line/length_m"),
    ({"line": {"length_m": -5}}, "/circuit/line/length_m"),
    ({"line": {"ballast_ohm_km": -1}}, "/circuit/line/ballast_ohm_km"),
    ({"line": {"loop_ohm_per_km": [-0.1, 0]}}, "/circuit/line/loop_ohm_per_km/0"),
    ({"line": {"loop_ohm_per_km": [0.1, 0.5]}}, "/circuit/line/loop_ohm_per_km"),
    ({"line": {"loop_ohm_per_km": [0.1]}}, "/circuit/line/loop_ohm_per_km/1"),
    ({"feed": {"emf_v": 0}}, "/circuit/feed/emf_v"),
    ({"feed": {"emf_v": "10"}}, "/circuit/feed/emf_v"),
    ({"feed": {"emf_v": True}}, "/circuit/feed/emf_v"),
    ({"feed": {"series_ohm": [7.2, 1]}}, "/circuit/feed/series_ohm"),
    ({"relay": {"impedance_ohm": [0, 0]}}, "/circuit/relay/impedance_ohm"),
    ({"relay": {"drop_away_v": 1.7}}, "/circuit/relay/drop_away_v"),
    ({"relay": {"pick_up_v": None}}, "/circuit/relay/pick_up_v"),
    ({"frequency_hz": -50}, "/circuit/frequency_hz"),
    ({"colour": "red"}, "/circuit/colour"),
]


@pytest.mark.parametrize(("changes", "pointer"), BAD_CIRCUITS)
def test_what_no_circuit_has_is_pointed_at(bench: Bench, changes: dict[str, Any], pointer: str) -> None:
    for calculation in ("operating-point", "shunt-limits"):
        faults = bench.refused(calculation, {"circuit": plain_circuit(**changes)})
        assert [at for _, at in faults] == [pointer]


@pytest.mark.parametrize("text", ["NaN", "Infinity", "-Infinity", "1e999"])
def test_numbers_that_are_none_are_refused(bench: Bench, text: str) -> None:
    body = json.dumps({"circuit": plain_circuit(feed={"emf_v": "HERE"})}).replace('"HERE"', text)
    headers = {"Content-Type": "application/json"}
    response = bench.client.post("/v1/calculations/shunt-limits", content=body, headers=headers)
    assert response.status_code in (400, 422)
    assert text not in response.text


CIRCUIT = {"circuit": UK}
NAMED = {"depot": "ashby", "section": "S"}
READINGS = {"feed_v": {"value": 4, "u": 0.1}, "relay_v": {"value": 3.9, "u": 0.1}}
AC = plain_circuit(frequency_hz=50)
DOUBT = dict.fromkeys(("ballast", "emf", "feed_ohm", "loop_ohm", "drop_away"), 0.3)
DROPS = {"drop_1_v": 0.06, "drop_2_v": 0.04, "length_m": 5, "rail_ohm_per_km": 0.05}
CURRENT = {"normal_a": 5, "rail_ohm_per_km": [0.03, 0], "axle_ohm": 0.03, "upto_m": 3000}

REFUSED: list[tuple[str, dict[str, Any], list[tuple[str, str | None]]]] = [
    ("shunt-limits", {}, [("value_error", "")]),
    ("shunt-limits", CIRCUIT | NAMED, [("value_error", "")]),
    ("shunt-limits", {"depot": "ashby"}, [("value_error", "")]),
    ("shunt-limits", CIRCUIT | {"shunt": None}, [("unknown_member", "/shunt")]),
    ("shunt-limits", CIRCUIT | {"spread": {"supply": [1.1, 0.9]}}, [("not_physical", "/spread/supply")]),
    (
        "shunt-limits",
        {"circuit": AC, "spread": {"coil_c": [0, 40]}},
        [("not_physical", "/spread/coil_c")],
    ),
    (
        "operating-point",
        CIRCUIT | {"shunt": {"position_m": 1001, "ohm": 0.5}},
        [("not_physical", "/shunt/position_m")],
    ),
    (
        "operating-point",
        CIRCUIT | {"shunt": {"position_m": 10, "ohm": -1}},
        [("greater_than_equal", "/shunt/ohm")],
    ),
    ("season", CIRCUIT, [("missing", "/wet_ohm_km"), ("missing", "/minimum_shunt_ohm")]),
    (
        "season",
        CIRCUIT | {"wet_ohm_km": 5, "dry_ohm_km": 3, "minimum_shunt_ohm": 0.5},
        [("not_physical", "/wet_ohm_km")],
    ),
    ("setting", CIRCUIT | {"requirements": NEEDED}, [("missing", "/adjustment")]),
    (
        "setting",
        CIRCUIT | {"requirements": NEEDED | {"most_pick_up": 0.9}, "adjustment": RANGE},
        [("not_physical", "/requirements/most_pick_up")],
    ),
    (
        "setting",
        CIRCUIT | {"requirements": NEEDED, "adjustment": RANGE | {"range": [30, 1]}},
        [("not_physical", "/adjustment")],
    ),
    (
        "setting",
        CIRCUIT | {"requirements": NEEDED, "adjustment": {"adjust": "feed_ratio", "range": [1, 30]}},
        [("not_physical", "/adjustment")],
    ),
    (
        "setting",
        CIRCUIT | {"requirements": NEEDED, "adjustment": {"adjust": "emf_v", "range": [0, 30]}},
        [("not_physical", "/adjustment")],
    ),
    (
        "setting",
        CIRCUIT | {"requirements": NEEDED, "adjustment": RANGE | {"steps": [1, 2]}},
        [("value_error", "/adjustment")],
    ),
    (
        "setting",
        CIRCUIT | {"requirements": NEEDED, "adjustment": {"adjust": "emf_v", "steps": [4, 4]}},
        [("not_physical", "/adjustment")],
    ),
    (
        "longest",
        CIRCUIT | {"requirements": NEEDED, "upto_m": 2000, "adjustment": RANGE | {"range": [30, 1]}},
        [("not_physical", "/adjustment")],
    ),
    (
        "longest",
        CIRCUIT | {"requirements": NEEDED | {"least_pick_up": 90}, "upto_m": 2000},
        [("no_length", None)],
    ),
    (
        "ballast",
        CIRCUIT | {"readings": READINGS},
        [
            ("missing", "/loop_relative_u"),
            ("missing", "/feed_relative_u"),
            ("missing", "/relay_relative_u"),
        ],
    ),
    (
        "ballast",
        CIRCUIT
        | {"readings": READINGS | {"feed_v": {"value": 11, "u": 0.1}}}
        | {"loop_relative_u": 0.1, "feed_relative_u": 0.1, "relay_relative_u": 0.1},
        [("not_physical", "/readings/feed_v")],
    ),
    (
        "ballast",
        CIRCUIT
        | {"readings": READINGS | {"feed_a": {"value": 0.2, "u": 0.1}, "relay_a": {"value": 0.19, "u": 0.1}}}
        | {"loop_relative_u": 0.1},
        [("ill_conditioned", None)],
    ),
    (
        "ballast",
        {"circuit": AC, "readings": READINGS, "loop_relative_u": 0.1},
        [("missing", "/doubt"), ("not_used", "/loop_relative_u")],
    ),
    (
        "ballast",
        CIRCUIT
        | {"readings": READINGS, "loop_relative_u": 0.1, "feed_relative_u": 0.1, "relay_relative_u": 0.1}
        | {"doubt": DOUBT},
        [("not_used", "/doubt")],
    ),
    (
        "ballast",
        {
            "circuit": plain_circuit(frequency_hz=50, line={"ballast_ohm_km": None}),
            "readings": READINGS | {"relay_a": {"value": 0.1, "u": 0.1}},
            "doubt": DOUBT,
        },
        [("not_used", "/readings/relay_a"), ("missing", "/circuit/line/ballast_ohm_km")],
    ),
    ("rail-balance", DROPS | {"depot": "ashby"}, [("value_error", "")]),
    ("rail-balance", DROPS | {"saturated_bond_ohm": [0.1, 0]}, [("value_error", "")]),
    ("rail-balance", DROPS | {"drop_1_v": 0, "drop_2_v": 0}, [("degenerate", None)]),
    ("rail-balance", DROPS | {"drop_1_v": -0.1}, [("greater_than_equal", "/drop_1_v")]),
    ("interference", CIRCUIT | CURRENT | {"rail_ohm_per_km": [0, 0]}, [("degenerate", None)]),
    ("bonding-proof", {"shunt_ohm": 0.5}, [("value_error", "")]),
    ("bonding-proof", {"layout": LAYOUT, "shunt_ohm": 0}, [("greater_than_equal", "/shunt_ohm")]),
    (
        "bonding-proof",
        {"layout": LAYOUT, "shunt_ohm": 0.5, "first_fault": "k9"},
        [("unknown", "/first_fault")],
    ),
]


@pytest.mark.parametrize(("calculation", "body", "expected"), REFUSED)
def test_refusals(
    bench: Bench, calculation: str, body: dict[str, Any], expected: list[tuple[str, str | None]]
) -> None:
    assert bench.refused(calculation, body) == expected


def bad_layout(**changes: Any) -> dict[str, Any]:
    return {"layout": LAYOUT | changes, "shunt_ohm": 0.5}


SHORT = {"name": "wrong", "between": ["b1", "b2"], "resistance_ohm": 0.001}


@pytest.mark.parametrize(
    ("changes", "pointer", "words"),
    [
        ({"bonds": LAYOUT["bonds"][:1]}, "/layout/relay/across/1", "relay is left floating"),
        ({"bonds": [*LAYOUT["bonds"], SHORT]}, "/layout/bonds/2", "'wrong' shorts the feed"),
        ({"legs": [LAYOUT["legs"][0], *LAYOUT["legs"]]}, "/layout/legs", "'a' is used twice"),
        (
            {"bonds": [LAYOUT["bonds"][0] | {"resistance_ohm": 0}, LAYOUT["bonds"][1]]},
            "/layout/bonds/0/resistance_ohm",
            "greater than zero",
        ),
        ({"ballast_ohm_km": [8, 4]}, "/layout/ballast_ohm_km", "low end"),
        (
            {
                "legs": [
                    *LAYOUT["legs"],
                    {"name": "c", "start": ["x1", "x2"], "end": ["y1", "y2"], "length_m": 9},
                ]
            },
            "/layout/legs/2",
            "'c' leads to nowhere",
        ),
    ],
)
def test_layouts_that_do_not_hang_together_are_told_in_words(
    bench: Bench, changes: dict[str, Any], pointer: str, words: str
) -> None:
    problem = bench.post("bonding-proof", bad_layout(**changes)).json()
    assert problem["status"] == 422
    ((found, reason),) = [(fault["pointer"], fault["reason"]) for fault in problem["errors"]]
    assert found == pointer
    assert words in reason


def test_a_layout_too_large_for_one_proof_is_refused(bench: Bench) -> None:
    legs = [
        {"name": f"l{at}", "start": ["a1", "a2"], "end": ["b1", "b2"], "length_m": 60} for at in range(101)
    ]
    response = bench.post("bonding-proof", bad_layout(legs=legs))
    assert (response.status_code, response.json()["type"]) == (413, "/problems/too-large")


def test_pointers_resolve_in_what_was_sent(bench: Bench) -> None:
    """RFC 6901: each part of a pointer names a member or an index, but for one that is missing."""
    for calculation, body, expected in REFUSED:
        for code, pointer in bench.refused(calculation, body):
            if pointer and code != "missing":
                at: Any = body
                for part in pointer[1:].split("/"):
                    at = at[int(part)] if isinstance(at, list) else at[part]
        assert expected
