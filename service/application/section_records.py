"""From a kept version of a section to the record that the rules judge.

On the path of every audit, so the JSON texts are read as they are, without the models that checked
them when they were written. Nothing is looked up here: neighbours and days come as arguments.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from datetime import date
from functools import lru_cache
from typing import Any

from sqlalchemy.engine import Row

from service.rules.facts import Adjacent, EquipmentItem, SectionRecord
from service.rules.words import (
    Bonding,
    CircuitKind,
    Place,
    SectionState,
    Separation,
    Sleepers,
    Traction,
)

ITEMS = ("feed", "relay")
"""The pieces of equipment that tasks may run with."""

_NOTHING: dict[str, Any] = {}


def record(
    row: Row[Any], returned_on: date | None, neighbour_polarities: Mapping[str, str | None]
) -> SectionRecord:
    """The record of one row of `section_version`.

    `neighbour_polarities` gives, by boundary, what the neighbour's own record says there.
    """
    equipment = json.loads(row.equipment) if row.equipment else _NOTHING
    relay = equipment.get("relay", _NOTHING)
    return SectionRecord(
        section=row.section,
        version=row.version,
        state=SectionState(row.state),
        commissioned_on=row.commissioned_on,
        circuit_kind=CircuitKind(row.circuit_kind),
        traction=Traction(row.traction),
        return_rails=row.return_rails,
        place=None if row.place is None else Place(row.place),
        sleepers=None if row.sleepers is None else Sleepers(row.sleepers),
        length_m=row.length_m,
        required_test_points=_names(row.required_test_points),
        points_ends=row.points_ends,
        insulated_joints=row.insulated_joints,
        bonding=None if row.bonding is None else Bonding(row.bonding),
        longest_parallel_m=row.longest_parallel_m,
        bonds_duplicated=row.bonds_duplicated,
        interrupter_required=row.interrupter_required,
        interrupter_fitted=row.interrupter_fitted,
        relay_type=relay.get("type"),
        relay_pick_up_v=_figure(relay, "pick_up_v"),
        relay_drop_away_v=_figure(relay, "drop_away_v"),
        relay_pick_up_a=_figure(relay, "pick_up_a"),
        relay_drop_away_a=_figure(relay, "drop_away_a"),
        receivers=equipment.get("receivers"),
        choke=equipment.get("choke"),
        catenary_current_a=equipment.get("catenary_current_a"),
        items={item: _item(equipment[item]) for item in ITEMS if item in equipment},
        set_up={(one["quantity"], one["test_point"]): one["value"] for one in equipment.get("set_up", ())},
        adjacent=_adjacent(row.adjacent, neighbour_polarities),
        returned_on=returned_on,
    )


def feed_emf_v(row: Row[Any]) -> float | None:
    """The feed's emf as registered [V], which tells a doubtful reading."""
    equipment = json.loads(row.equipment) if row.equipment else _NOTHING
    emf_v = equipment.get("feed", _NOTHING).get("emf_v")
    return None if emf_v is None else float(emf_v)


@lru_cache(maxsize=4096)
def _names(text: str) -> tuple[str, ...]:
    return tuple(json.loads(text))


def _figure(relay: Mapping[str, Any], name: str) -> float | None:
    """The relay's own bench figure, else that of its type."""
    bench: float | None = relay.get(f"bench_{name}")
    return bench if bench is not None else relay.get(f"rated_{name}")


def _day(text: str | None) -> date | None:
    return None if text is None else date.fromisoformat(text)


def _item(part: Mapping[str, Any]) -> EquipmentItem:
    days = [day for name in ("tested_on", "overhauled_on") if (day := _day(part.get(name))) is not None]
    return EquipmentItem(
        serial=part.get("serial"), fitted_on=_day(part.get("fitted_on")), tested_on=max(days, default=None)
    )


def _adjacent(text: str, neighbour_polarities: Mapping[str, str | None]) -> tuple[Adjacent, ...]:
    if text == "[]":
        return ()
    return tuple(
        Adjacent(
            boundary=one["boundary"],
            neighbour=one.get("neighbour"),
            separation=Separation(one["separation"]),
            polarity=one.get("polarity"),
            neighbour_polarity=neighbour_polarities.get(one["boundary"]),
        )
        for one in json.loads(text)
    )
