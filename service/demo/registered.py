"""What the register says of an invented section on a day: its content, equipment and layout.

The section itself is made in `tracks`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import date
from typing import Any

import numpy as np

from service.application import equipment as parts
from service.application import layouts
from service.application.section_content import Boundary, Configuration, Content
from service.demo.lines import BOOK
from service.demo.tracks import DC, Track
from service.demo.wiring import LOCAL_V, VANE, ZONE_M, circuits, steady
from service.electrical.circuit import operating_point
from service.rules.words import Bonding, CircuitKind, SectionState, Traction

FIXED_OHM = 1.0
"""Of the feed's resistance, what is cable; the rest is adjustable."""

STEP_OHM = 0.1


def content(track: Track, day: date) -> Content:
    """The section's record as it holds from a day on."""
    yard = bool(track.legs)
    return Content(
        state=track.state,
        circuit_kind=track.kind,
        traction=track.of.traction,
        required_test_points=track.test_points,
        valid_from_on=day,
        title=f"{track.of.name} {track.name[len(track.of.prefix) :]}",
        line_name=track.of.name,
        from_km=track.from_km,
        to_km=round(track.from_km + track.wiring.length_m / 1000, 3),
        length_m=track.wiring.length_m,
        return_rails=track.of.return_rails,
        place=track.place,
        sleepers=track.sleepers,
        commissioned_on=track.commissioned_on if track.state is not SectionState.PLANNED else None,
        book=BOOK,
        configuration=Configuration(
            points_ends=len(track.legs),
            insulated_joints=(2 + 2 * len(track.legs)) if not _jointless(track) else 0,
            bonding=Bonding.MIXED if yard else Bonding.SERIES,
            longest_parallel_m=24.0 if yard else None,
            bonds_duplicated=True if yard else None,
            interrupter_required=False,
            train_frequency="frequent" if track.of.traction is not Traction.NONE else "hourly",
        ),
        adjacent=tuple(
            Boundary(boundary, neighbour, separation, track.polarity)
            for boundary, neighbour, separation in track.boundaries
        ),
        equipment=_equipment(track, day),
        layout=_layout(track) if yard and track.kind in DC else None,
        asset_reference=f"HV-{track.name}",
    )


def _jointless(track: Track) -> bool:
    return track.kind is CircuitKind.AUDIO_FREQUENCY


def _equipment(track: Track, day: date) -> parts.Common:
    wiring, kind = track.wiring, track.kind
    loop = (wiring.loop_ohm_per_km.real, wiring.loop_ohm_per_km.imag)
    common: dict[str, Any] = {
        "circuit_kind": kind.value,
        "feed": _feed(track, day),
        "line": parts.Line(rail_type="60 kg", loop_ohm_per_km=loop),
        "bonds": parts.Bonds(type="welded", resistance_ohm=0.0005),
        "receivers": track.receivers,
        "choke": track.choke,
        "catenary_current_a": track.catenary_a,
        "ballast_wet_ohm_km": wiring.wet_ohm_km,
        "ballast_dry_ohm_km": wiring.dry_ohm_km,
        "set_up_on": track.commissioned_on,
        "set_up": _set_up(track),
    }
    relay = _relay(track, day)
    if kind is CircuitKind.DC:
        return parts.DcEquipment(relay=parts.Relay(**relay), **common)
    if kind is CircuitKind.DC_AC_IMMUNE:
        return parts.DcAcImmuneEquipment(relay=parts.ImmuneRelay(immunity_v=50.0, **relay), **common)
    if kind in VANE:
        vane = parts.VaneRelay(
            local_v=LOCAL_V,
            local_angle_deg=wiring.local_angle_deg,
            rated_local_v=LOCAL_V,
            ideal_angle_deg=90.0,
            **relay,
        )
        common |= {"frequency_hz": wiring.frequency_hz, "relay": vane}
        return _double_rail(track, common) if _bonded(track) else parts.AcSingleRailEquipment(**common)
    if kind is CircuitKind.AUDIO_FREQUENCY:
        common |= {"feed_tuned_zone_m": ZONE_M, "relay_tuned_zone_m": ZONE_M}
        return parts.AudioFrequencyEquipment(
            frequency_hz=wiring.frequency_hz, relay=parts.ImmuneRelay(**relay), **common
        )
    if kind is CircuitKind.IMPULSE:
        loop_ohm = 20.0 if track.receivers == 1 else 10.0
        return parts.ImpulseEquipment(
            transmitter_loop_ohm=loop_ohm, impulse_v=wiring.emf_v, relay=parts.Relay(**relay), **common
        )
    return parts.CodedEquipment(code="120 a minute", relay=parts.Relay(**relay), **common)


def _bonded(track: Track) -> bool:
    return track.kind is CircuitKind.AC_DOUBLE_RAIL


def _double_rail(track: Track, common: dict[str, Any]) -> parts.AcDoubleRailEquipment:
    ohm = (track.wiring.bond_ohm.real, track.wiring.bond_ohm.imag)
    bonds = [
        parts.ImpedanceBond(
            type="resonated", serial=f"Z{track.name}-{end}", impedance_ohm=ohm, resonated=True, turns=16
        )
        for end in ("F", "R")
    ]
    return parts.AcDoubleRailEquipment(
        feed_transformer_ratio=track.wiring.feed_ratio,
        relay_transformer_ratio=1 / track.wiring.relay_ratio,
        feed_bond=bonds[0],
        relay_bond=bonds[1],
        **common,
    )


def _feed(track: Track, day: date) -> parts.Feed:
    wiring = track.wiring
    if _jointless(track):
        adjusting: dict[str, Any] = {"series_ohm": (wiring.feed_ohm, 0.0)}
    else:
        ohm = wiring.feed_ohm * track.setting_on(day, recorded=True) - FIXED_OHM
        adjusting = {
            "series_ohm": (FIXED_OHM, 0.0),
            "adjustable_ohm": round(ohm, 3),
            "adjustable_from_ohm": 0.0,
            "adjustable_to_ohm": 100.0 if _bonded(track) else 12.0,
            "adjustable_step_ohm": STEP_OHM,
        }
    return parts.Feed(
        type="feed set",
        serial=f"F{track.name}",
        fitted_on=track.commissioned_on,
        overhauled_on=track.feed_overhauled_on,
        emf_v=wiring.emf_v,
        emf_low_v=round(wiring.emf_v * 0.97, 2),
        emf_high_v=round(wiring.emf_v * 1.03, 2),
        **adjusting,
    )


def _relay(track: Track, day: date) -> dict[str, Any]:
    wiring, fitted = track.wiring, track.relay_on(day)
    by_current = track.kind is CircuitKind.CODED
    per, unit = (abs(wiring.coil_ohm), "a") if by_current else (1.0, "v")
    figures = {
        "rated_pick_up": wiring.pick_up_v,
        "rated_drop_away": wiring.drop_away_v,
        "bench_pick_up": wiring.pick_up_v * fitted.factor,
        "bench_drop_away": wiring.drop_away_v * fitted.factor,
    }
    return {
        "type": track.relay_type,
        "serial": fitted.serial,
        "fitted_on": fitted.fitted_on,
        "tested_on": fitted.fitted_on,
        "impedance_ohm": (wiring.coil_ohm.real, wiring.coil_ohm.imag),
        "series_ohm": (wiring.relay_series_ohm, 0.0),
        **{f"{name}_{unit}": round(value / per, 4) for name, value in figures.items()},
    }


def _set_up(track: Track) -> tuple[parts.SetUp, ...] | None:
    wiring = track.wiring
    if track.kind in DC:
        return (parts.SetUp(quantity="supply_voltage", test_point="feed_end", value=wiring.emf_v),)
    if _jointless(track):
        return (parts.SetUp(quantity="frequency", test_point="feed_end", value=wiring.frequency_hz),)
    if track.kind is CircuitKind.IMPULSE:
        damp = steady(np.asarray([math.sqrt(wiring.wet_ohm_km * wiring.dry_ohm_km)]))
        point = operating_point(circuits(track.kind, [wiring], damp))
        ends: Sequence[tuple[str, float]] = (
            ("feed_end", abs(point.feed_end_rail_v.item())),
            ("relay_end", abs(point.relay_end_rail_v.item())),
        )
        return tuple(
            parts.SetUp(quantity="rail_voltage", test_point=end, value=round(volts, 1)) for end, volts in ends
        )
    return None


def _layout(track: Track) -> layouts.Layout:
    """A main line through points, and each further leg in parallel with it by two pairs of bonds."""
    wiring = track.wiring
    half_m = wiring.length_m / 2
    legs = [
        layouts.Leg(name="in", start=("a1", "a2"), end=("b1", "b2"), length_m=half_m),
        layouts.Leg(name="out", start=("c1", "c2"), end=("d1", "d2"), length_m=half_m),
    ]
    pairs = [("b1", "c1"), ("b2", "c2")]
    joints = []
    for number, leg in enumerate(track.legs, start=1):
        start, end = (f"s{number}1", f"s{number}2"), (f"e{number}1", f"e{number}2")
        legs.append(layouts.Leg(name=leg, start=start, end=end, length_m=24.0))
        pairs += [("b1", start[0]), ("b2", start[1])]
        joints.append(layouts.Joint(name=f"crossing-{leg}", between=("c1", start[1])))
    bonds = [
        layouts.Bond(name=f"{one}-{other}-{copy}", between=(one, other), resistance_ohm=0.0015)
        for one, other in pairs
        for copy in ("a", "b")
    ]
    return layouts.Layout(
        frequency_hz=0.0,
        loop_ohm_per_km=(wiring.loop_ohm_per_km.real, 0.0),
        ballast_ohm_km=(wiring.wet_ohm_km, wiring.dry_ohm_km),
        legs=tuple(legs),
        bonds=tuple(bonds),
        joints=tuple(joints),
        feed=layouts.LayoutFeed(across=("a1", "a2"), emf_v=wiring.emf_v, series_ohm=(wiring.feed_ohm, 0.0)),
        relay=layouts.LayoutRelay(
            across=("d1", "d2"),
            impedance_ohm=(wiring.coil_ohm.real, 0.0),
            pick_up_v=wiring.pick_up_v,
            drop_away_v=wiring.drop_away_v,
        ),
    )
