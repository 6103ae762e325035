"""The digest of a visit: what it covers, and that it never changes."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path
from typing import Any

import pytest
import rfc8785
from hypothesis import given
from hypothesis import strategies as st
from visits.field import NOW, draft_of, drops, reading, visit

from service.application.visit_content import DIGEST_TAG, digest, wire

GOLDEN = json.loads((Path(__file__).parents[1] / "data/visit-digests.json").read_text())["cases"]


@pytest.mark.parametrize("case", GOLDEN, ids=lambda case: case["name"])
def test_a_digest_never_changes(case: dict[str, Any]) -> None:
    assert digest(draft_of(case["sent"])) == case["digest"]


@pytest.mark.parametrize("case", GOLDEN, ids=lambda case: case["name"])
def test_the_golden_file_is_rfc_8785_and_sha_256(case: dict[str, Any]) -> None:
    """RFC 8785 by the library `rfc8785`, SHA-256 by the standard library."""
    assert rfc8785.dumps(json.loads(case["text"])).decode() == case["text"]
    assert hashlib.sha256(f"{DIGEST_TAG}\n{case['text']}".encode()).hexdigest() == case["digest"]


PLAIN = visit(1, NOW, *drops(0.7), reading("relay_voltage", 2130, unit="mV"))

DIFFERENT: list[dict[str, Any]] = [
    {"section": "TV115"},
    {"visited_at": "2026-06-15T09:00:00.000001Z"},
    {"device": "HH-07"},
    {"remarks": ""},
    {"conditions": {"ballast": "wet"}},
    {"tasks": [{"task": "shunt_test", "done": "done"}]},
    {"work_done": ["adjusted"]},
    {"replaces": "0197c0de-0000-7000-8000-000000000009"},
    {"readings": PLAIN["readings"][:2]},
    {"readings": [*PLAIN["readings"][:2], reading("relay_voltage", 2.13)]},
    {"readings": [*PLAIN["readings"][:2], reading("relay_voltage", 2130, unit="mV", comparison="ge")]},
]


@pytest.mark.parametrize("changes", DIFFERENT)
def test_whatever_is_stated_is_covered(changes: dict[str, Any]) -> None:
    assert digest(draft_of(PLAIN | changes)) != digest(draft_of(PLAIN))


SAME: list[dict[str, Any]] = [
    {"visited_at": "2026-06-15T09:00:00Z"},
    {"visited_at": "2026-06-15T11:00:00+02:00"},
    {"visited_at": "2026-06-14T23:00:00.000-10:00"},
    {"device": None, "tasks": [], "work_done": [], "remarks": None},
    {"conditions": {"ballast": "dry", "rail": None}},
    {"readings": [{**one, "comparison": "eq", "shunt_ohm": None} for one in PLAIN["readings"]]},
    {"readings": [{**one, "value": float(one["value"])} for one in PLAIN["readings"]]},
]


@pytest.mark.parametrize("changes", SAME)
def test_one_visit_said_in_two_ways_has_one_digest(changes: dict[str, Any]) -> None:
    assert digest(draft_of(PLAIN | changes)) == digest(draft_of(PLAIN))


MANY = visit(
    1,
    NOW,
    *drops(0.4, stage="as_found"),
    *drops(0.7, "feed_end", "relay_end", "leg:a"),
    reading("relay_voltage", 2.1),
    tasks=[{"task": name, "done": "done"} for name in ("shunt_test", "bond_check", "clean")],
    work_done=["adjusted", "tamped", "cleaned"],
)


@given(st.permutations(MANY["readings"]), st.permutations(MANY["tasks"]), st.permutations(MANY["work_done"]))
def test_no_order_matters(readings: list[Any], tasks: list[Any], work: list[Any]) -> None:
    shuffled = MANY | {"readings": readings, "tasks": tasks, "work_done": work}
    assert digest(draft_of(shuffled)) == digest(draft_of(MANY))


def test_what_the_server_echoes_has_the_digest_of_what_was_sent() -> None:
    again = {name: value for name, value in wire(draft_of(MANY)).items() if value is not None}
    assert digest(draft_of(again)) == digest(draft_of(MANY))
