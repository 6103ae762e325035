"""What a record, its equipment and its layout may say by themselves, without a database."""

from __future__ import annotations

import json
from datetime import date
from typing import Any

import pytest
from pydantic import TypeAdapter, ValidationError

from service.application import equipment, layouts, section_content
from service.application.equipment import Equipment
from service.application.layouts import Layout
from service.rules.words import CircuitKind
from support.register import plain

LAYOUT: dict[str, Any] = {
    "frequency_hz": 0,
    "loop_ohm_per_km": [0.1, 0],
    "ballast_ohm_km": 4,
    "legs": [
        {"name": "a", "start": ["a1", "a2"], "end": ["b1", "b2"], "length_m": 60},
        {"name": "c", "start": ["b1", "b2"], "end": ["c1", "c2"], "length_m": 40},
    ],
    "bonds": [{"name": "x", "between": ["b1", "c1"], "resistance_ohm": 0.0015}],
    "joints": [{"name": "j", "between": ["a1", "c1"]}],
    "feed": {"across": ["a1", "a2"], "emf_v": 3, "series_ohm": [1.5, 0]},
    "relay": {"across": ["c1", "c2"], "impedance_ohm": [9, 0], "pick_up_v": 1.4, "drop_away_v": 0.95},
}


def faults(**changes: Any) -> set[tuple[str, str | None]]:
    return {(fault.code, fault.pointer) for fault in section_content.faults("TV114", plain(**changes))}


def layout(**changes: Any) -> Layout:
    return Layout.model_validate_json(json.dumps(LAYOUT | changes))


def stated(kind: str, **members: Any) -> Any:
    return TypeAdapter(Equipment).validate_json(json.dumps({"circuit_kind": kind} | members))


def test_a_layout_that_hangs_together_has_no_fault() -> None:
    assert faults(layout=layout(), circuit_kind=CircuitKind.DC) == set()
    assert layouts.of_text(layouts.to_text(layout())) == layout()


@pytest.mark.parametrize(
    ("changes", "expected"),
    [
        ({"legs": LAYOUT["legs"] + LAYOUT["legs"][:1]}, ("duplicate", "/layout/legs/2/name")),
        (
            {"bonds": [{"name": "x", "between": ["b1", "z1"], "resistance_ohm": 0}]},
            ("unknown_node", "/layout/bonds/0/between"),
        ),
        (
            {"joints": [{"name": "j", "between": ["b1", "b1"]}]},
            ("same_node", "/layout/joints/0/between"),
        ),
        ({"feed": LAYOUT["feed"] | {"across": ["a1", "z"]}}, ("unknown_node", "/layout/feed/across")),
        ({"relay": LAYOUT["relay"] | {"across": ["z", "a1"]}}, ("unknown_node", "/layout/relay/across")),
        ({"relay": LAYOUT["relay"] | {"drop_away_v": 1.5}}, ("out_of_order", "/layout/relay/drop_away_v")),
        ({"ballast_ohm_km": [5, 3]}, ("out_of_order", "/layout/ballast_ohm_km")),
        ({"rail_to_earth_ohm_km": [5, 3]}, ("out_of_order", "/layout/rail_to_earth_ohm_km")),
    ],
)
def test_what_a_layout_cannot_say(changes: dict[str, Any], expected: tuple[str, str]) -> None:
    assert faults(layout=layout(**changes)) == {expected}


@pytest.mark.parametrize(
    ("members", "expected"),
    [
        (
            {"ballast_wet_ohm_km": 9, "ballast_dry_ohm_km": 3},
            ("out_of_order", "/equipment/ballast_wet_ohm_km"),
        ),
        ({"feed": {"emf_low_v": 7, "emf_high_v": 6}}, ("out_of_order", "/equipment/feed/emf_low_v")),
        (
            {"feed": {"adjustable_from_ohm": 2, "adjustable_to_ohm": 1}},
            ("out_of_order", "/equipment/feed/adjustable_from_ohm"),
        ),
        (
            {"relay": {"bench_drop_away_v": 2, "bench_pick_up_v": 1}},
            ("out_of_order", "/equipment/relay/bench_drop_away_v"),
        ),
        (
            {"relay": {"rated_drop_away_a": 2, "rated_pick_up_a": 1}},
            ("out_of_order", "/equipment/relay/rated_drop_away_a"),
        ),
        (
            {"set_up": [{"quantity": "voltage", "test_point": "middle", "value": 1}]},
            ("unknown_quantity", "/equipment/set_up/0/quantity"),
        ),
        (
            {"set_up": [{"quantity": "length", "test_point": "middle", "value": 1}]},
            ("unknown_quantity", "/equipment/set_up/0/quantity"),
        ),
        (
            {"set_up": [{"quantity": "relay_voltage", "test_point": "middle", "value": -1}]},
            ("impossible", "/equipment/set_up/0/value"),
        ),
        (
            {"set_up": [{"quantity": "relay_voltage", "test_point": "middle", "value": 1}] * 2},
            ("duplicate", "/equipment/set_up/1"),
        ),
    ],
)
def test_what_equipment_cannot_say(members: dict[str, Any], expected: tuple[str, str]) -> None:
    assert faults(equipment=stated("dc", **members)) == {expected}


def test_equipment_is_of_the_sections_circuit_kind() -> None:
    assert faults(equipment=stated("coded", code="75")) == {("other_circuit_kind", "/equipment/circuit_kind")}


@pytest.mark.parametrize("kind", list(CircuitKind))
def test_equipment_of_every_kind_is_kept_as_text_without_what_is_not_stated(kind: CircuitKind) -> None:
    given = stated(kind, relay={"type": "T", "fitted_on": "2024-05-01"}, feed={}, schema=None)
    text = equipment.to_text(given)
    assert json.loads(text) == {
        "schema": 1,
        "circuit_kind": kind,
        "relay": {"type": "T", "fitted_on": "2024-05-01"},
    }
    assert equipment.of_text(text) == given
    assert given.relay.fitted_on == date(2024, 5, 1)
    shown = given.model_dump(mode="json")
    assert shown["schema"] == 1
    assert shown["feed"] is None


@pytest.mark.parametrize(
    "members",
    [
        {"schema": 2},
        {"feed": {"emf_v": float("nan")}},
        {"feed": {"emf_v": "6"}},
        {"feed": {"emf_v": True}},
        {"feed": {"series_ohm": [-1, 0]}},
        {"feed": {"taps_v": []}},
        {"relay": {"type": "a\nb"}},
        {"set_up": []},
        {"frequency_hz": 50},
        {"ballast_wet_ohm_km": 0},
    ],
)
def test_what_no_equipment_has(members: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        stated("dc", **members)
