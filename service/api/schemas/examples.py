"""Answers of calculations shown in the OpenAPI document: what the first example of each request gets.

Long lists are cut short and figures rounded. A test posts every example and compares.
"""

from __future__ import annotations

from typing import Any

from service.api.schemas.circuits import CAUTION, SURFACE_CAUTION

_STATED = {
    "depot": None,
    "section": None,
    "model": "A feed, a uniform line and a relay, solved exactly in the steady state.",
    "assumptions": ["Rails and ballast are uniform along the section, and rails are not connected to earth."],
    "caution": SURFACE_CAUTION,
}

_WITHOUT_TRAIN = (
    "operating-point",
    "rail-balance",
    "interference",
)

_ANSWERS: dict[str, Any] = {
    "operating-point": {
        "relay_v": [4.886, 0.0],
        "relay_current_a": [0.2443, 0.0],
        "relay_end_rail_v": [4.886, 0.0],
        "feed_end_rail_v": [4.914, 0.0],
        "feed_current_a": [0.7064, 0.0],
        "relay_state": "picks_up",
        "elements": [
            {"name": "feed series", "voltage_v": [10.0, 0.0], "current_a": [0.7064, 0.0], "power_w": 3.593},
            {"name": "line", "voltage_v": [4.914, 0.0], "current_a": [0.7064, 0.0], "power_w": 2.277},
        ],
        "rails": [{"position_m": 0.0, "rail_v": [4.914, 0.0]}, {"position_m": 100.0, "rail_v": [4.91, 0.0]}],
    },
    "shunt-limits": {
        "relay_clear_v": [4.886, 0.0],
        "drop_shunt_ohm": {
            "feed_end": 1.028,
            "middle": 1.029,
            "relay_end": 1.033,
            "worst": {"position_m": 26.1, "ohm": 1.028},
        },
        "drop_shunt_reason": None,
        "pick_up_shunt_ohm": {
            "feed_end": 1.755,
            "middle": 1.757,
            "relay_end": 1.764,
            "worst": {"position_m": 26.1, "ohm": 1.755},
        },
        "pick_up_shunt_reason": None,
        "lifting_shunt": None,
    },
    "season": {
        "picks_up": [[3.0, None]],
        "holds": [[3.0, None]],
        "shunts": [[3.0, 14.69]],
        "curve": [
            {"ballast_ohm_km": 3.0, "relay_v": [2.643, 0.0], "drop_shunt_ohm": 1.37},
            {"ballast_ohm_km": 3.013, "relay_v": [2.65, 0.0], "drop_shunt_ohm": 1.368},
        ],
        "wet_ohm_km": 3.0,
        "dry_ohm_km": None,
        "minimum_shunt_ohm": 1.0,
    },
    "setting": {
        "window": [4.715, 11.95],
        "binds": ["shunt", "pick_up"],
        "best": 8.582,
        "margins": {"pick_up": 0.3003, "shunt": 0.3003, "excitation": 1.0},
        "opens": None,
        "steps": [],
        "adjust": "feed_ohm",
    },
    "longest": {"length_m": 1736.0, "binds": "pick_up"},
    "ballast": {
        "ballast_ohm_km": 3.0,
        "relative_u": 0.007613,
        "handbook_ohm_km": 3.028,
        "exact": {"loop_ohm_per_km": 0.34, "ballast_ohm_km": 3.0, "reason": None},
        "working_drop_away_v": 0.2299,
    },
    "rail-balance": {
        "model": "Ohm's law over equal lengths of two rails; a bond's ampere-turns are (N/2)(I1 - I2).",
        "assumptions": ["Both drops were read at one moment, over lengths without joints or connections."],
        "rail_1_a": 300.0,
        "rail_2_a": 271.4,
        "difference_a": 28.57,
        "of_total": 0.05,
        "of_mean": 0.1,
        "ampere_turns": 142.9,
        "saturation_margin": 0.7619,
        "saturated": None,
    },
    "interference": {
        "limit_v": 50.0,
        "normal": {
            "relay_v": {"none": [48.57, 0.0], "feed_end": [48.6, 0.0], "relay_end": [0.228, 0.0]},
            "under_limit": True,
            "longest_m": 463.0,
        },
        "fault": None,
        "largest_current_a": 308.7,
    },
    "bonding-proof": {
        "model": "Legs as exact four-terminal lines, two rails with leakage between them "
        "and to earth, in a nodal network with bonds, feed and relay, solved in "
        "the steady state.",
        "assumptions": [
            "Rails and ballast are uniform along each leg, and sound insulated joints do not conduct."
        ],
        "relay_v": [4.79, 0.0],
        "opened": {
            "a/rail1": {
                "relay_v": [0.0, 0.0],
                "worst_relay_v": [1.343, 0.0],
                "worst_position_m": 569.0,
                "revealed": False,
                "undetected_stretches": [],
            },
            "a/rail2": {
                "relay_v": [0.0, 0.0],
                "worst_relay_v": [1.343, 0.0],
                "worst_position_m": 569.0,
                "revealed": False,
                "undetected_stretches": [],
            },
        },
        "shorted": {},
    },
}


def shown(calculation: str) -> dict[str, Any]:
    """For `json_schema_extra`: the answer to the request's example."""
    caution = {"caution": CAUTION} if calculation in _WITHOUT_TRAIN else {}
    return {"examples": [_STATED | _ANSWERS[calculation] | caution]}
