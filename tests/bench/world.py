"""An invented depot to measure on: a book of twenty limits, sections, instruments, keys, visits.

What a measurement is about goes through the application; the mass of rows it needs to stand on is
written in bulk, by the same statements the application uses.
"""

from __future__ import annotations

import json
import secrets
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta
from typing import Any

import sqlalchemy as sa
from uuid6 import uuid7

from service.application import access, depots, editions, instruments
from service.application.book_content import Draft as BookDraft
from service.application.context import Service
from service.application.visit_content import Draft, ReadingDraft, TaskDraft
from service.records import bulk, migrations
from service.records.engine import Database
from service.records.tables import Section, SectionVersion
from service.records.unit_of_work import Actor
from service.rules.words import CalibrationResult

NOW = datetime(2026, 11, 30, 12, 0, tzinfo=UTC)
BOOK = "bench"
DRAFTER, ISSUER = Actor("drafter", "A. Drafter"), Actor("issuer", "B. Issuer")

READINGS = (
    ("drop_shunt", "feed_end", 0.8, "Ohm", "SB-1"),
    ("drop_shunt", "relay_end", 0.9, "Ohm", "SB-1"),
    ("residual_voltage", "feed_end", 0.31, "V", "VM-1"),
    ("residual_voltage", "relay_end", 0.30, "V", "VM-1"),
    ("relay_voltage", "relay_end", 2.1, "V", "VM-1"),
    ("relay_current", "relay_end", 0.11, "A", "VM-1"),
    ("rail_voltage", "feed_end", 2.6, "V", "VM-1"),
    ("rail_voltage", "relay_end", 2.2, "V", "VM-1"),
    ("feed_voltage", "feed_end", 10.0, "V", "VM-1"),
    ("supply_voltage", "feed_end", 11.0, "V", "VM-1"),
    ("rail_current", "feed_end", 0.9, "A", "VM-1"),
    ("rail_current", "relay_end", 0.12, "A", "VM-1"),
)
"""Twelve readings of one visit, all in order."""

REGISTERED = (
    ("length", "m", 5000.0),
    ("points_ends", "1", 4.0),
    ("insulated_joints", "1", 15.0),
    ("parallel_bonded_length", "m", 50.0),
    ("interrupter", "1", 1.0),
    ("bonds_duplicated", "1", 1.0),
)
"""What is judged from the register, with its greatest value."""


def book_content() -> dict[str, Any]:
    """Nineteen limits and a permitted combination, twenty verdicts in all, and one task."""
    said = {"source": "invented", "confirmed": True, "standing": "practice", "applies": None, "title": None}
    limits = []
    for quantity, test_point, value, unit, _ in READINGS:
        low, high = value * 0.5, value * 2
        both = quantity not in ("drop_shunt", "residual_voltage")
        limits.append(
            {
                "limit": f"{quantity}_{test_point}",
                "quantity": quantity,
                "unit": unit,
                "test_points": [test_point],
                "minimum": {"value": low, "hazard": "wrong_side", "near_margin": low / 10}
                if both or quantity == "drop_shunt"
                else None,
                "maximum": {"value": high, "hazard": "wrong_side", "near_margin": high / 10}
                if both or quantity == "residual_voltage"
                else None,
                "relative_to": None,
                "ballast": None,
                "shunt_ohm": 0.5 if quantity == "residual_voltage" else None,
                "clause": f"B{len(limits)}",
                **said,
            }
        )
    for index, (quantity, unit, most) in enumerate(REGISTERED):
        limits.append(
            {
                "limit": quantity,
                "quantity": quantity,
                "unit": unit,
                "test_points": None,
                "minimum": {"value": 0.0, "hazard": "right_side", "near_margin": None},
                "maximum": {"value": most, "hazard": "right_side", "near_margin": None},
                "relative_to": None,
                "ballast": None,
                "shunt_ohm": None,
                "clause": f"B9{index}",
                **said,
            }
        )
    limits.append(
        {
            "limit": "excitation",
            "quantity": "relay_voltage",
            "unit": "V",
            "test_points": ["relay_end"],
            "minimum": {"value": 1.25, "hazard": "right_side", "near_margin": 0.1},
            "maximum": {"value": 3.0, "hazard": "wrong_side", "near_margin": 0.1},
            "relative_to": "relay_pick_up",
            "ballast": None,
            "shunt_ohm": None,
            "clause": "B70",
            **said,
        }
    )
    permitted = {"circuit_kind": "dc", "traction": "none", "return_rails": None, "clause": "B71"}
    permitted |= {name: said[name] for name in ("source", "confirmed", "standing")}
    task = {
        "task": "shunt_test",
        "interval": "P3M",
        "grace": "P14D",
        "window": None,
        "needs": ["drop_shunt"],
        "needs_anywhere": [],
        "shortened": None,
        "after_work": [],
        "item": None,
        "clause": "B8",
        **said,
    }
    return {
        "dry_ballast_ohm_km": None,
        "limits": limits,
        "tasks": [task],
        "combinations": [permitted],
        "notes": [],
    }


EQUIPMENT = '{"schema":1,"circuit_kind":"dc","relay":{"rated_pick_up_v":1.0,"rated_drop_away_v":0.68}}'


@dataclass(frozen=True)
class World:
    """A service over a filled database; `keys` by depot."""

    service: Service
    keys: dict[str, str]
    depots: tuple[str, ...]
    sections: tuple[str, ...]


def build(url: str, depot_count: int, section_count: int) -> World:
    """Migrate `url` and fill it: every depot with the same sections, no visits yet."""
    migrations.upgrade(url)
    database = Database(url, 40)
    clock = [NOW - timedelta(days=800)]
    service = Service(database, lambda: clock[0], lambda: str(uuid7()))
    content = book_content()
    with service.unit_of_work(DRAFTER) as tx:
        draft = BookDraft.model_validate_json(
            json.dumps({"book": BOOK, "edition": "1", "title": "Bench", **content})
        )
        editions.draft(tx, draft)
    with service.unit_of_work(ISSUER) as tx:
        editions.issue(tx, BOOK, "1", (NOW - timedelta(days=700)).date(), expected=1)
    names = tuple(f"S{number:06d}" for number in range(section_count))
    keys, made = {}, []
    for number in range(depot_count):
        depot = f"depot-{number:02d}"
        made.append(depot)
        with service.unit_of_work(DRAFTER) as tx:
            depots.create(tx, depot, depots.Terms("Bench depot", "UTC", "monday", 5))
            keys[depot] = access.create(
                tx,
                access.Wanted(
                    f"key-{number:02d}", "C. Poster", frozenset({"read", "readings", "audit"}), depot
                ),
                secrets.token_bytes(32),
            )
            for name, kind in (("SB-1", "shunt_box"), ("VM-1", "meter")):
                calibration = instruments.Calibration(
                    calibrated_on=date(2024, 9, 1),
                    due_on=date(2028, 10, 1),
                    result=CalibrationResult.PASS,
                    resolution=0.1 if kind == "shunt_box" else None,
                    resolution_unit="Ohm" if kind == "shunt_box" else None,
                )
                kept = instruments.Content(kind, None, None, (calibration,))
                instruments.put(tx, depot, name, None, kept)
            _sections(tx.connection, depot, names)
    clock[0] = NOW
    return World(service, keys, tuple(made), names)


def _sections(connection: sa.Connection, depot: str, names: tuple[str, ...]) -> None:
    began = datetime(2024, 9, 1, tzinfo=UTC)
    heads = [
        {"depot": depot, "section": name, "folded": name.lower(), "version": 1, "created_at": began}
        for name in names
    ]
    bulk.insert(connection, Section.__table__, heads)
    same = {
        "version": 1,
        "valid_from_on": date(2024, 9, 1),
        "recorded_at": began,
        "recorded_by": "bench",
        "state": "in_use",
        "circuit_kind": "dc",
        "traction": "none",
        "return_rails": 0,
        "length_m": 800.0,
        "commissioned_on": date(2024, 9, 1),
        "book": BOOK,
        "required_test_points": '["feed_end","relay_end"]',
        "adjacent": "[]",
        "equipment": EQUIPMENT,
        "points_ends": 0,
        "insulated_joints": 2,
        "longest_parallel_m": 0.0,
        "bonds_duplicated": True,
        "interrupter_required": False,
    }
    bulk.insert(
        connection, SectionVersion.__table__, [{"depot": depot, "section": name, **same} for name in names]
    )


def visit(section: str, at: datetime) -> Draft:
    """A visit with twelve readings."""
    return Draft(
        visit=str(uuid7()),
        section=section,
        visited_at=at,
        device="HH-1",
        tester="T1",
        ballast="dry",
        rail="clean",
        condition_left="fit",
        tasks=(TaskDraft("shunt_test", "done"),),
        readings=tuple(
            ReadingDraft(
                quantity,
                test_point,
                "as_left",
                "eq",
                value,
                unit,
                instrument,
                0.5 if quantity == "residual_voltage" else None,
                "shunt" if quantity == "residual_voltage" else None,
            )
            for quantity, test_point, value, unit, instrument in READINGS
        ),
    )
