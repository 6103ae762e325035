"""What a section's record says: its editable members, its checks that need no database, its JSON form.

Storing is in `sections`, the CSV form in `sections_csv`, what rules judge of it in `section_records`.
"""

from __future__ import annotations

import json
import re
from collections.abc import Iterator
from dataclasses import dataclass, fields, is_dataclass
from datetime import date
from enum import StrEnum
from typing import Any

from pydantic import BaseModel
from sqlalchemy.engine import Row

from service.application import equipment as equipments
from service.application import layouts
from service.application.layouts import Layout
from service.errors import Fault
from service.rules.quantities import QUANTITIES
from service.rules.words import (
    Bonding,
    CircuitKind,
    Place,
    SectionState,
    Separation,
    Sleepers,
    Traction,
)

TEST_POINT = re.compile(equipments.TEST_POINT_PATTERN)


@dataclass(frozen=True, slots=True)
class Configuration:
    """What configuration limits are judged by; None where the register is silent."""

    points_ends: int | None = None
    insulated_joints: int | None = None
    bonding: Bonding | None = None
    longest_parallel_m: float | None = None
    bonds_duplicated: bool | None = None
    interrupter_required: bool | None = None
    interrupter_fitted: bool | None = None
    train_frequency: str | None = None


@dataclass(frozen=True, slots=True)
class Boundary:
    """One end towards a neighbour. Both records call the boundary by the same name.

    `polarity` is the section's own polarity, phase or frequency there.
    """

    boundary: str
    neighbour: str | None
    separation: Separation
    polarity: str | None


@dataclass(frozen=True, slots=True)
class Content:
    """The editable members of a section. `valid_from_on` None: the depot's today."""

    state: SectionState
    circuit_kind: CircuitKind
    traction: Traction
    required_test_points: tuple[str, ...]
    valid_from_on: date | None = None
    title: str | None = None
    line_name: str | None = None
    from_km: float | None = None
    to_km: float | None = None
    length_m: float | None = None
    return_rails: int | None = None
    place: Place | None = None
    sleepers: Sleepers | None = None
    commissioned_on: date | None = None
    book: str | None = None
    configuration: Configuration = Configuration()
    adjacent: tuple[Boundary, ...] = ()
    equipment: equipments.Common | None = None
    layout: Layout | None = None
    succeeds: str | None = None
    asset_reference: str | None = None


CONFIGURATION = tuple(field.name for field in fields(Configuration))
_JSON_TEXT = ("required_test_points", "adjacent", "equipment", "layout")
_PLAIN = tuple(field.name for field in fields(Content) if field.name not in (*_JSON_TEXT, "configuration"))


def json_value(value: Any) -> Any:
    """A value of a record as plain JSON: enumerations by their word, days as RFC 3339 dates."""
    if isinstance(value, BaseModel):
        return value.model_dump(mode="json")
    if is_dataclass(value):
        return {field.name: json_value(getattr(value, field.name)) for field in fields(value)}
    if isinstance(value, tuple):
        return [json_value(item) for item in value]
    if isinstance(value, date):
        return value.isoformat()
    return str(value) if isinstance(value, str) else value


def columns(content: Content) -> dict[str, Any]:
    """The values of the content's columns in `section_version`."""
    values = {name: getattr(content, name) for name in _PLAIN}
    values |= {name: getattr(content.configuration, name) for name in CONFIGURATION}
    values = {name: str(value) if isinstance(value, StrEnum) else value for name, value in values.items()}
    return values | {
        "required_test_points": json.dumps(list(content.required_test_points)),
        "adjacent": json.dumps(json_value(content.adjacent)),
        "equipment": None if content.equipment is None else equipments.to_text(content.equipment),
        "layout": None if content.layout is None else layouts.to_text(content.layout),
    }


def of_row(row: Row[Any]) -> Content:
    """The content of a row of `section_version`."""
    values = {name: getattr(row, name) for name in _PLAIN}
    words = {"state": SectionState, "circuit_kind": CircuitKind, "traction": Traction}
    words |= {"place": Place, "sleepers": Sleepers}
    for name, word in words.items():
        values[name] = None if values[name] is None else word(values[name])
    configuration = {name: getattr(row, name) for name in CONFIGURATION}
    bonding = configuration["bonding"]
    configuration["bonding"] = None if bonding is None else Bonding(bonding)
    return Content(
        **values,
        required_test_points=tuple(json.loads(row.required_test_points)),
        configuration=Configuration(**configuration),
        adjacent=tuple(
            Boundary(one["boundary"], one["neighbour"], Separation(one["separation"]), one["polarity"])
            for one in json.loads(row.adjacent)
        ),
        equipment=None if row.equipment is None else equipments.of_text(row.equipment),
        layout=None if row.layout is None else layouts.of_text(row.layout),
    )


def faults(section: str, content: Content) -> Iterator[Fault]:
    """What is wrong with a section's content by itself, with pointers."""
    if section in (".", ".."):
        yield Fault("reserved", "no address can name it", "/section")
    if content.from_km is not None and content.to_km is not None and content.from_km > content.to_km:
        yield Fault("out_of_order", "the section ends before it begins", "/to_km")
    if content.traction is Traction.NONE and content.return_rails:
        yield Fault("contradiction", "without traction no rail carries return current", "/return_rails")
    if content.succeeds is not None and content.succeeds.casefold() == section.casefold():
        yield Fault("own_name", "a section does not succeed itself", "/succeeds")
    yield from _test_point_faults(content.required_test_points)
    yield from _boundary_faults(section, content.adjacent)
    if content.equipment is not None:
        yield from _equipment_faults(content.circuit_kind, content.equipment)
    if content.layout is not None:
        yield from layouts.faults(content.layout)


def _test_point_faults(points: tuple[str, ...]) -> Iterator[Fault]:
    if not points:
        yield Fault("none_given", "name at least one test point", "/required_test_points")
    for index, point in enumerate(points):
        if TEST_POINT.match(point) is None:
            reason = "feed_end, relay_end, middle or leg:<name>"
            yield Fault("unknown_test_point", reason, f"/required_test_points/{index}")
        elif point in points[:index]:
            yield Fault("duplicate", "this test point is named twice", f"/required_test_points/{index}")


def _boundary_faults(section: str, adjacent: tuple[Boundary, ...]) -> Iterator[Fault]:
    seen: set[str] = set()
    for index, one in enumerate(adjacent):
        if one.boundary in seen:
            yield Fault("duplicate", "this boundary is named twice", f"/adjacent/{index}/boundary")
        seen.add(one.boundary)
        if one.neighbour is not None and one.neighbour.casefold() == section.casefold():
            yield Fault("own_name", "a section is not its own neighbour", f"/adjacent/{index}/neighbour")


_ASCENDING = (
    ("", "ballast_wet_ohm_km", "ballast_dry_ohm_km", "ballast conducts better wet than dry"),
    ("feed", "emf_low_v", "emf_high_v", "the low value is over the high one"),
    ("feed", "adjustable_from_ohm", "adjustable_to_ohm", "the range ends before it begins"),
    ("relay", "rated_drop_away_v", "rated_pick_up_v", "a relay does not drop away over its pick-up"),
    ("relay", "rated_drop_away_a", "rated_pick_up_a", "a relay does not drop away over its pick-up"),
    ("relay", "bench_drop_away_v", "bench_pick_up_v", "a relay does not drop away over its pick-up"),
    ("relay", "bench_drop_away_a", "bench_pick_up_a", "a relay does not drop away over its pick-up"),
)
"""Part of the equipment, the member that is not over the next one, and why."""


def _equipment_faults(circuit_kind: CircuitKind, equipment: Any) -> Iterator[Fault]:
    if equipment.circuit_kind != circuit_kind.value:
        reason = "the equipment is of another circuit kind than the section"
        yield Fault("other_circuit_kind", reason, "/equipment/circuit_kind")
    for name, low, high, reason in _ASCENDING:
        part = getattr(equipment, name) if name else equipment
        least, most = getattr(part, low, None), getattr(part, high, None)
        if least is not None and most is not None and least > most:
            yield Fault("out_of_order", reason, "/".join(["/equipment", *([name] if name else []), low]))
    seen: set[tuple[str, str]] = set()
    for index, value in enumerate(equipment.set_up or ()):
        at = f"/equipment/set_up/{index}"
        quantity = QUANTITIES.get(value.quantity)
        if quantity is None or quantity.from_register:
            yield Fault("unknown_quantity", "no quantity that can be read has this name", f"{at}/quantity")
        elif not quantity.lowest <= value.value <= quantity.highest:
            yield Fault("impossible", "this quantity cannot have this value", f"{at}/value")
        if (value.quantity, value.test_point) in seen:
            yield Fault("duplicate", "this quantity is stated twice for this test point", at)
        seen.add((value.quantity, value.test_point))
