"""What boxes and meters show at each call: the electrical models' answers, read by imperfect instruments.

A meter is off by one factor for a whole visit and shows three digits; a box has steps. Values the models
do not give are constants of the section. Units are those that a technician would write down.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import ceil, floor, isfinite
from typing import Any

import numpy as np

from service.application.visit_content import Draft, ReadingDraft, TaskDraft
from service.demo.rounds import Call
from service.demo.tracks import DC
from service.demo.wiring import VANE, State, circuits
from service.electrical.circuit import ends_of, operating_point
from service.electrical.shunt import residual_voltage, shunt_limits
from service.rules.words import CircuitKind, Stage

METER_OFF = 0.003
CONTACT = 0.008
"""Standard deviations, relative: of a meter from visit to visit, of a clamped shunt."""

COARSE = (*DC, CircuitKind.AC_SINGLE_RAIL)
"""Kinds tested with the box of 0.1 ohm steps, up to 10 ohm."""

STUB_KM = 0.024
"""Length of a leg beyond its points, which lies in series with a shunt at its far end."""


Metered = tuple[str, str, float, str]
"""Quantity, test point, value and unit, before the meter had its say."""


@dataclass(slots=True)
class _Row:
    """One stage of one call, and what is true then."""

    call: Call
    stage: Stage
    feed: float
    true: dict[str, float]


def drafts(calls: Sequence[Call], rng: np.random.Generator) -> list[Draft]:
    """The visits that the calls give, in the same order."""
    rows: dict[int, list[_Row]] = {}
    by_kind: dict[CircuitKind, list[_Row]] = {}
    for index, call in enumerate(calls):
        rows[index] = [_Row(call, Stage.AS_FOUND, call.found, {})]
        if call.left is not None:
            rows[index].append(_Row(call, Stage.AS_LEFT, call.left, {}))
        by_kind.setdefault(call.track.kind, []).extend(rows[index])
    for kind, of_kind in by_kind.items():
        _solve(kind, of_kind)
    return [_draft(call, rows[index], rng) for index, call in enumerate(calls)]


def _solve(kind: CircuitKind, rows: Sequence[_Row]) -> None:
    """Work out what is true in every row of one kind at once."""
    state = State(
        ballast_ohm_km=np.asarray([row.call.ballast_ohm_km for row in rows]),
        feed=np.asarray([row.feed for row in rows]),
        supply=np.asarray([row.call.supply for row in rows]),
        relay=np.asarray([row.call.track.relay_on(row.call.day).factor for row in rows]),
    )
    circuit = circuits(kind, [row.call.track.wiring for row in rows], state)
    point, limits = operating_point(circuit), shunt_limits(circuit)
    relay_v = point.relay_v
    first_m, last_m = circuit.reach_m
    shunt_ohm = _shunt_ohm(kind)
    columns: dict[str, Any] = {
        "relay_v": np.abs(relay_v),
        "relay_a": np.abs(point.relay_current_a),
        "feed_rail_v": np.abs(point.feed_end_rail_v),
        "relay_rail_v": np.abs(point.relay_end_rail_v),
        "feed_rail_a": np.abs(point.feed_current_a),
        "relay_rail_a": np.abs(point.relay_end_rail_v / ends_of(circuit).relay_ohm),
        "drop_feed_end": limits.drop_shunt_ohm.feed_end,
        "drop_leg": limits.drop_shunt_ohm.middle,
        "drop_relay_end": limits.drop_shunt_ohm.relay_end,
        "pick_up_relay_end": limits.pick_up_shunt_ohm.relay_end,
        "residual_feed_end": np.abs(residual_voltage(circuit, first_m, shunt_ohm)),
        "residual_relay_end": np.abs(residual_voltage(circuit, last_m, shunt_ohm)),
        "residual_a": np.abs(
            residual_voltage(circuit, last_m, shunt_ohm) / np.asarray(circuit.relay.impedance_ohm)
        ),
    }
    if kind in VANE:
        columns["angle_deg"] = np.degrees(np.angle(relay_v / circuit.relay.local_v))  # type: ignore[attr-defined]
    listed = {name: np.broadcast_to(values, len(rows)).tolist() for name, values in columns.items()}
    for index, row in enumerate(rows):
        row.true = {name: values[index] for name, values in listed.items()}


def _draft(call: Call, rows: Sequence[_Row], rng: np.random.Generator) -> Draft:
    gain = 1 + float(np.clip(rng.normal(0, METER_OFF), -2 * METER_OFF, 2 * METER_OFF))
    readings = [reading for row in rows for reading in _readings(row, gain, rng)]
    technician = call.technician
    return Draft(
        visit=uuid7(int(call.at.timestamp() * 1000), rng),
        section=call.track.name,
        visited_at=call.at + call.clock_ahead,
        device=technician.device,
        tester=technician.tester,
        ballast=call.ballast.value,
        ballast_state=call.ballast_state.value,
        rail=call.rail.value,
        air_temperature_c=call.temperature_c,
        tasks=tuple(TaskDraft(task, "done") for task in call.tasks),
        work_done=call.work,
        condition_left="fit",
        remarks=call.remarks,
        readings=tuple(readings),
    )


def uuid7(milliseconds: int, rng: np.random.Generator) -> str:
    """A UUIDv7 of an instant, its random part from the seed."""
    chance = int.from_bytes(rng.bytes(10), "big")
    number = (milliseconds << 80) | chance
    number = number & ~(0xF << 76) | (0x7 << 76)
    number = number & ~(0x3 << 62) | (0x2 << 62)
    text = f"{number:032x}"
    return "-".join((text[:8], text[8:12], text[12:16], text[16:20], text[20:]))


def _readings(row: _Row, gain: float, rng: np.random.Generator) -> Iterator[ReadingDraft]:
    """All that is read at one stage: the volts at every call, the rest at a full test."""
    stage, instrument = row.stage.value, row.call.meter
    metered = [*_volts(row), *(_full_test(row) if row.call.full else ())]
    for quantity, point, value, unit in metered:
        shown = shown_by_meter(value if unit == "Hz" else value * gain)  # counters hold their quartz
        shunted = {"shunt_ohm": _shunt_ohm(row.call.track.kind), "source": "shunt"}
        said: dict[str, Any] = shunted if quantity.startswith("residual") else {}
        yield ReadingDraft(quantity, point, stage, "eq", shown, unit, instrument, **said)
    if row.call.full:
        yield from _shunted(row, rng)


def _shunt_ohm(kind: CircuitKind) -> float:
    """The resistance across the rails while a residual is read, as the house book states it."""
    return 0.2 if kind is CircuitKind.CODED else 0.5


def _volts(row: _Row) -> Iterator[Metered]:
    """Supply, relay and rails."""
    kind, true = row.call.track.kind, row.true
    if kind in DC:
        yield "supply_voltage", "feed_end", row.call.track.wiring.emf_v * row.call.supply, "V"
    if kind is CircuitKind.AUDIO_FREQUENCY:
        yield "relay_voltage", "relay_end", true["relay_v"] * 1000, "mV"
    elif kind is CircuitKind.CODED:
        yield "relay_current", "relay_end", true["relay_a"] * 1000, "mA"
    elif kind is not CircuitKind.IMPULSE:
        yield "relay_voltage", "relay_end", true["relay_v"], "V"
    if kind is not CircuitKind.AUDIO_FREQUENCY:
        for end in ("feed", "relay"):
            yield "rail_voltage", f"{end}_end", true[f"{end}_rail_v"], "V"


def _full_test(row: _Row) -> Iterator[Metered]:
    """What a meter reads besides at a full test."""
    kind, true = row.call.track.kind, row.true
    if kind in DC:
        for end in ("feed", "relay"):
            yield "rail_current", f"{end}_end", true[f"{end}_rail_a"] * 1000, "mA"
            yield "residual_voltage", f"{end}_end", true[f"residual_{end}_end"], "V"
    if kind is CircuitKind.CODED:
        yield "residual_current", "relay_end", true["residual_a"] * 1000, "mA"
    yield from _others(row)


def shown_by_meter(value: float) -> float:
    """Three digits, or four where the first is small."""
    return float(f"{value:.4g}" if f"{value:e}"[0] in "12" else f"{value:.3g}")


def _shunted(row: _Row, rng: np.random.Generator) -> Iterator[ReadingDraft]:
    """Drop shunt at every test point, pick-up shunt at the relay end; nothing of a relay that is down."""
    call, kind = row.call, row.call.track.kind
    coarse = kind in COARSE
    box = call.technician.coarse_box if coarse else call.technician.fine_box
    step, most = (0.1, 10.0) if coarse else (0.01, 20.0)

    def boxed(quantity: str, point: str, ohm: float) -> ReadingDraft:
        up = quantity == "drop_shunt"
        steps = floor(ohm / step + 1e-9) if up else ceil(ohm / step - 1e-9)
        value, comparison = round(steps * step, 2), "eq"
        if value >= most:
            value, comparison = most, "ge"
        return ReadingDraft(quantity, point, row.stage.value, comparison, value, "Ohm", instrument=box)

    stub_ohm = abs(call.track.wiring.loop_ohm_per_km) * STUB_KM
    for point in call.track.test_points:
        leg = point.startswith("leg:")
        ohm = row.true["drop_leg"] - stub_ohm if leg else row.true[f"drop_{point}"]
        ohm *= 1 + float(rng.normal(0, CONTACT))
        if isfinite(ohm) and point not in call.skipped:
            pick_up = row.true["pick_up_relay_end"]
            if point != "relay_end" or kind not in DC or not isfinite(pick_up):
                yield boxed("drop_shunt", point, ohm)
                continue
            first, second = (
                ("pick_up_shunt", "drop_shunt") if call.swapped else ("drop_shunt", "pick_up_shunt")
            )
            yield boxed(first, point, ohm)
            yield boxed(second, point, max(pick_up, ohm + step))


def _others(row: _Row) -> Iterator[Metered]:
    """By kind: ballast, stray and earth voltages, angle, joints, frequency, and the call's extras."""
    call, track, true = row.call, row.call.track, row.true
    constants, kind = track.constants, track.kind
    if kind in DC and track.wiring.length_m >= 400:
        through_a = true["feed_rail_a"] - true["relay_rail_a"]
        total_ohm = (true["feed_rail_v"] + true["relay_rail_v"]) / (2 * through_a)
        yield "ballast_resistance", "relay_end", total_ohm * track.wiring.length_m / 1000, "Ohm.km"
    if track.catenary_a is not None:
        yield "stray_voltage", "relay_end", constants["stray_voltage"] * 1000, "mV"
        yield "rail_to_earth_voltage", "relay_end", constants["rail_to_earth_voltage"], "V"
    if kind in VANE:
        yield "phase_angle", "relay_end", true["angle_deg"], "deg"
        yield "local_voltage", "relay_end", 110.0 * call.supply, "V"
    if kind is CircuitKind.AC_SINGLE_RAIL:
        for end in ("feed_end", "relay_end"):
            yield "joint_resistance", end, constants[f"joint_{end}"], "Ohm"
    if kind is CircuitKind.AUDIO_FREQUENCY:
        yield "frequency", "feed_end", track.wiring.frequency_hz, "Hz"
    if "imbalance" in call.extras:
        yield "traction_imbalance", "feed_end", constants["traction_imbalance"], "%"
    if "insulation" in call.extras:
        yield "insulation_resistance", "relay_end", constants["insulation_resistance"] / 1e6, "MOhm"
    if "bench" in call.extras:
        factor = track.relay_on(call.day).factor
        yield "relay_pick_up_voltage", "relay_end", track.wiring.pick_up_v * factor, "V"
        yield "relay_drop_away_voltage", "relay_end", track.wiring.drop_away_v * factor, "V"
