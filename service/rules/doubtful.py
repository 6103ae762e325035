"""Which readings of one visit cannot be true as they stand, from the visit and the record valid then.

Only what contradicts itself or the equipment is doubtful, never what merely fails a limit. What rests on
other visits is a caution and is not here. Common practice, no source; the bounds follow from the circuit.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import product

from service.rules.facts import Reading
from service.rules.words import CircuitKind, Comparison

DC = (CircuitKind.DC, CircuitKind.DC_AC_IMMUNE)
"""Kinds in which no voltage can exceed the one before it; a transformer or a pulse may raise it elsewhere."""

FEED = ("supply_voltage", "feed_voltage")
TRACK_VOLTS = ("relay_voltage", "rail_voltage", "residual_voltage")

MILLIVOLTS = 10.0
"""Times what the feed can give: above it a value is taken for millivolts entered as volts."""


WORDS = {
    "relay_above_supply": "relay volts above the volts that feed it",
    "ends_swapped": "rail volts higher at the relay end than at the feed end",
    "millivolts_as_volts": "far more than the feed can give: millivolts entered as volts?",
    "drop_above_pick_up": "the value to release lies above the value to pick up",
}
"""Every reason for doubt: code → what it means, for a person."""


@dataclass(frozen=True, slots=True)
class EquipmentHints:
    """What the record valid at the visit says that a reading can contradict; None where it is silent."""

    circuit_kind: CircuitKind
    feed_emf_v: float | None = None


Places = Mapping[str, Sequence[int]]
"""quantity → indexes of its exact readings, of one stage."""


def doubts(hints: EquipmentHints, readings: Sequence[Reading]) -> dict[int, str]:
    """The readings of one visit that are doubtful: index → code in `WORDS`.

    `relay_above_supply`: relay volts above supply or feed volts (DC). `ends_swapped`: rail volts higher
    at the relay end than at the feed end (DC). `millivolts_as_volts`: far above what the feed can
    give (DC). `drop_above_pick_up`: a drop shunt above the pick-up shunt, or a drop-away above
    the pick-up. Both readings of a contradiction are doubtful, since either may be the wrong one.
    """
    found: dict[int, str] = {}
    for stage in dict.fromkeys(reading.stage for reading in readings):
        places: dict[str, list[int]] = {}
        for index, reading in enumerate(readings):
            if reading.stage is stage and reading.comparison is Comparison.EQ:
                places.setdefault(reading.quantity, []).append(index)
        if hints.circuit_kind in DC:
            _millivolts(hints.feed_emf_v, readings, places, found)
            _above_supply(readings, places, found)
            _ends_swapped(readings, places, found)
        _drop_above_pick_up(readings, places, found)
    return found


def _mark(found: dict[int, str], code: str, *indexes: int) -> None:
    for index in indexes:
        found.setdefault(index, code)


def _millivolts(
    emf: float | None, readings: Sequence[Reading], places: Places, found: dict[int, str]
) -> None:
    if emf is None:
        return
    for quantity in TRACK_VOLTS:
        for index in places.get(quantity, ()):
            if readings[index].value >= MILLIVOLTS * emf:
                _mark(found, "millivolts_as_volts", index)


def _above_supply(readings: Sequence[Reading], places: Places, found: dict[int, str]) -> None:
    for quantity in FEED:
        for relay, feed in product(places.get("relay_voltage", ()), places.get(quantity, ())):
            if relay not in found and readings[relay].value > readings[feed].value:
                _mark(found, "relay_above_supply", relay, feed)


def _ends_swapped(readings: Sequence[Reading], places: Places, found: dict[int, str]) -> None:
    rails = places.get("rail_voltage", ())
    for relay, feed in product(rails, rails):
        ends = (readings[relay].test_point, readings[feed].test_point)
        if ends == ("relay_end", "feed_end") and readings[relay].value > readings[feed].value:
            _mark(found, "ends_swapped", relay, feed)


def _drop_above_pick_up(readings: Sequence[Reading], places: Places, found: dict[int, str]) -> None:
    pairs = (
        ("drop_shunt", "pick_up_shunt"),
        ("relay_drop_away_voltage", "relay_pick_up_voltage"),
        ("relay_drop_away_current", "relay_pick_up_current"),
    )
    for drop_quantity, pick_quantity in pairs:
        for drop, pick in product(places.get(drop_quantity, ()), places.get(pick_quantity, ())):
            same = readings[drop].test_point == readings[pick].test_point
            if same and readings[drop].value > readings[pick].value:
                _mark(found, "drop_above_pick_up", drop, pick)
