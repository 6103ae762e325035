"""The demo's world before it is recorded: seed and day decide it, healthy sections hold in all weathers."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np
import pytest

from service.application.editions import bundled
from service.demo import faults
from service.demo.build import DAYS, SEED
from service.demo.lines import BOOK
from service.demo.measuring import drafts
from service.demo.rounds import Call, Diary, rounds
from service.demo.tracks import Track, lay, set_up_all
from service.demo.weather import weather
from service.demo.wiring import State, circuits
from service.electrical.arrays import Reals
from service.electrical.shunt import residual_voltage, shunt_limits
from service.rules.words import Ballast, CircuitKind

DAY = date(2026, 12, 1)
DAYS_TRIED = (DAY, date(2026, 7, 5), date(2027, 3, 9), date(2028, 2, 29))
DC = (CircuitKind.DC, CircuitKind.DC_AC_IMMUNE)
LIMITS = {limit.limit: limit for book in bundled() if book.book == BOOK for limit in book.limits}


@dataclass(frozen=True)
class World:
    tracks: dict[str, Track]
    calls: list[Call]
    rng: np.random.Generator


def world(day: date, seed: int = SEED) -> World:
    """What the build makes before it records anything."""
    rng = np.random.default_rng(seed)
    tracks = {track.name: track for track in lay(day, day - timedelta(days=DAYS), rng)}
    faults.plant_in_register(tracks, day)
    set_up_all(tracks.values())
    diary = Diary(day, DAYS, weather(day, DAYS, rng), rng, faults.last_full())
    calls = rounds(list(tracks.values()), diary)
    faults.plant_in_calls(calls, day)
    return World(tracks, calls, rng)


def test_seed_and_day_decide_every_visit() -> None:
    first, again, other = (world(DAY, seed) for seed in (SEED, SEED, SEED + 1))
    assert drafts(first.calls, first.rng) == drafts(again.calls, again.rng)
    assert drafts(other.calls, other.rng)[:50] != drafts(world(DAY).calls, world(DAY).rng)[:50]


def limit(name: str, side: str) -> float:
    """A bound of the house book."""
    bound = getattr(LIMITS[name], side)
    return float(bound.value)


@dataclass(frozen=True)
class Held:
    """One section in one ballast: worst drop shunt [ohm], relay over pick-up, residual over drop-away."""

    drop_ohm: float
    excitation: float
    residual: float
    released: bool


def held(track: Track, day: date, ballast_ohm_km: float) -> Held:
    """Work out a section as it is set on a day."""

    def one(value: float) -> Reals:
        return np.asarray([value])

    relay = track.relay_on(day).factor
    state = State(one(ballast_ohm_km), one(track.setting_on(day)), one(1.0), one(relay))
    circuit = circuits(track.kind, [track.wiring], state)
    limits = shunt_limits(circuit)
    shunt_ohm = 0.2 if track.kind is CircuitKind.CODED else 0.5
    residual = max(float(abs(residual_voltage(circuit, end, shunt_ohm)).item()) for end in circuit.reach_m)
    return Held(
        drop_ohm=float(limits.drop_shunt_ohm.worst.ohm.item()),
        excitation=float(abs(limits.relay_clear_v).item()) / float(circuit.relay.pick_up_v.item()),
        residual=residual / float(circuit.relay.drop_away_v.item()),
        released=bool(limits.released.item()),
    )


DROP_SHUNT = {
    CircuitKind.DC: "drop_shunt",
    CircuitKind.DC_AC_IMMUNE: "drop_shunt",
    CircuitKind.AC_SINGLE_RAIL: "drop_shunt",
    CircuitKind.AC_DOUBLE_RAIL: "drop_shunt_double_rail",
    CircuitKind.AUDIO_FREQUENCY: "drop_shunt_audio",
    CircuitKind.CODED: "drop_shunt_coded",
}
EXCITATION = {
    CircuitKind.DC: "excitation",
    CircuitKind.DC_AC_IMMUNE: "excitation",
    CircuitKind.AC_SINGLE_RAIL: "excitation_vane",
    CircuitKind.AC_DOUBLE_RAIL: "excitation_vane",
    CircuitKind.AUDIO_FREQUENCY: "excitation_receiver",
}


def holds(track: Track, found: Held) -> bool:
    """Whether a section in that ballast meets the house book where the models have an answer."""
    good = not found.released
    if track.kind in DROP_SHUNT:
        good = good and found.drop_ohm >= limit(DROP_SHUNT[track.kind], "minimum")
    if track.kind in EXCITATION:
        name = EXCITATION[track.kind]
        good = good and limit(name, "minimum") <= found.excitation <= limit(name, "maximum")
    if track.kind in DC:
        good = good and found.residual <= limit("residual", "maximum")
    return good


FAIL_IN_SOME_WEATHER = {
    *faults.sections("turned_up_in_the_wet"),
    *faults.sections("set_up_in_the_dry"),
    *faults.sections("low_ballast"),
}


@pytest.mark.parametrize("day", DAYS_TRIED, ids=str)
def test_all_but_the_weather_faults_hold_in_all_weathers(day: date) -> None:
    failing = {
        track.name
        for track in world(day).tracks.values()
        for ballast in (track.wiring.wet_ohm_km * track.drained_factor, track.wiring.dry_ohm_km, np.inf)
        if not holds(track, held(track, day, ballast))
    }
    assert failing == FAIL_IN_SOME_WEATHER


@pytest.mark.parametrize("day", DAYS_TRIED, ids=str)
def test_turned_up_in_the_wet_fails_dry_on_the_wrong_side(day: date) -> None:
    found = world(day)
    (name,) = faults.sections("turned_up_in_the_wet")
    track = found.tracks[name]
    assert held(track, day, track.wiring.dry_ohm_km).drop_ohm < limit("drop_shunt", "minimum")
    last = [call for call in found.calls if call.track is track][-1]
    assert last.ballast is Ballast.WET
    assert holds(track, held(track, day, last.ballast_ohm_km))


@pytest.mark.parametrize("day", DAYS_TRIED, ids=str)
def test_set_up_in_the_dry_drops_in_the_wet(day: date) -> None:
    found = world(day)
    (name,) = faults.sections("set_up_in_the_dry")
    track = found.tracks[name]
    assert held(track, day, track.wiring.wet_ohm_km).released
    last = [call for call in found.calls if call.track is track][-1]
    assert last.ballast is Ballast.DRY
    assert holds(track, held(track, day, last.ballast_ohm_km))


@pytest.mark.parametrize("day", DAYS_TRIED, ids=str)
def test_neighbours_name_each_other_and_are_opposed_but_for_the_planted_pair(day: date) -> None:
    tracks = world(day).tracks
    same = set()
    for track in tracks.values():
        for boundary, neighbour, separation in track.boundaries:
            assert (boundary, track.name, separation) in tracks[neighbour].boundaries
            if tracks[neighbour].polarity == track.polarity:
                same.add(track.name)
    assert same == set(faults.sections("same_polarity"))


def test_rounds_are_drawn_for_the_weather_they_need() -> None:
    found = world(DAY)
    double = [call for call in found.calls if call.full and call.track.kind is CircuitKind.AC_DOUBLE_RAIL]
    dry = [call for call in double if call.ballast in (Ballast.DRY, Ballast.FROZEN)]
    assert len(dry) / len(double) > 0.95
    assert {call.ballast for call in found.calls} == set(Ballast)
