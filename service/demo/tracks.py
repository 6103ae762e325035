"""The invented sections as they are laid: place on the line, size, wiring, relays, neighbours.

Planted faults change them afterwards (`faults`); what the register says of one is in `registered`.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from datetime import date, timedelta

import numpy as np

from service.demo.lines import LINES, LineOf
from service.demo.wiring import VANE, Wiring, set_up
from service.rules.words import CircuitKind, Place, SectionState, Separation, Sleepers

DC = (CircuitKind.DC, CircuitKind.DC_AC_IMMUNE)
HEAVY_CATENARY_A = 300
AUDIO_HZ = (1700.0, 2300.0, 2000.0, 2600.0)
VANE_HZ = 50.0
MULTIPLE = {
    CircuitKind.DC: 3.2,
    CircuitKind.DC_AC_IMMUNE: 3.2,
    CircuitKind.AC_SINGLE_RAIL: 2.5,
    CircuitKind.AC_DOUBLE_RAIL: 2.3,
    CircuitKind.AUDIO_FREQUENCY: 4.0,
    CircuitKind.IMPULSE: 3.0,
    CircuitKind.CODED: 3.0,
}
"""Dry relay voltage over pick-up, by which the sections were set up."""

LOOP_OHM_PER_KM = {
    **dict.fromkeys(CircuitKind, 0.0578 + 0j),  # two welded rails of 0.0289 ohm/km
    **dict.fromkeys(VANE, 0.338 + 0.725j),  # 0.8 ohm/km at 65 degrees, 50 Hz
}


@dataclass(slots=True)
class Relay:
    """One relay in its place; `factor` is its own working values over those of its type."""

    serial: str
    fitted_on: date
    factor: float


@dataclass(slots=True)
class Setting:
    """The feed's resistance from a day on, over what it was set up at; whether anybody wrote it down."""

    on: date
    factor: float
    recorded: bool = True


@dataclass(slots=True)
class Track:
    """One section. `wiring.emf_v` is set by `set_up_all`, after faults had their chance to change it."""

    name: str
    of: LineOf
    kind: CircuitKind
    from_km: float
    wiring: Wiring
    relay_type: str
    polarity: str
    place: Place
    sleepers: Sleepers
    legs: tuple[str, ...]
    relays: list[Relay]
    feed_overhauled_on: date
    commissioned_on: date
    constants: dict[str, float]
    """What the model does not give: joints, insulation, stray and earth voltages, imbalance; base units."""
    receivers: int = 1
    choke: bool = False
    catenary_a: float | None = None
    state: SectionState = SectionState.IN_USE
    boundaries: list[tuple[str, str, Separation]] = field(default_factory=list)
    """(boundary, neighbour, separation)."""
    settings: list[Setting] = field(default_factory=list)
    drained_until: date | None = None
    drained_factor: float = 1.0
    """From that day on the ballast has this share of its resistance: a drain is blocked."""

    @property
    def test_points(self) -> tuple[str, ...]:
        """Where the section must be tested."""
        return ("feed_end", "relay_end", *(f"leg:{leg}" for leg in self.legs))

    def relay_on(self, day: date) -> Relay:
        """The relay in place on a day."""
        return next((one for one in reversed(self.relays) if one.fitted_on <= day), self.relays[0])

    def setting_on(self, day: date, *, recorded: bool = False) -> float:
        """The factor on the feed's resistance on a day; with `recorded`, what the register knows of it."""
        known = [one.factor for one in self.settings if one.on <= day and (one.recorded or not recorded)]
        return known[-1] if known else 1.0

    def ballast_ohm_km(self, wetness: float, *, frozen: bool, day: date) -> float:
        """Ballast between its driest and wettest, by logarithms; frozen a half more than dry."""
        driest, wettest = math.log(self.wiring.dry_ohm_km), math.log(self.wiring.wet_ohm_km)
        ohm_km = math.exp(driest + wetness * (wettest - driest))
        if frozen:
            ohm_km = 1.5 * self.wiring.dry_ohm_km
        blocked = self.drained_until is not None and day >= self.drained_until
        return ohm_km * self.drained_factor if blocked else ohm_km


def lay(today: date, began_on: date, rng: np.random.Generator) -> list[Track]:
    """All sections of the depot, line by line, each next to the one before."""
    tracks: list[Track] = []
    for line in LINES:
        from_km = round(float(rng.uniform(2, 60)), 3)
        before: Track | None = None
        for index in range(line.count):
            track = _track(line, index, from_km, began_on, rng)
            if before is not None:
                _join(before, track)
            from_km = round(from_km + track.wiring.length_m / 1000, 3)
            tracks.append(track)
            before = track
    _replace_vane_relays(tracks, today, rng)
    return tracks


def _track(line: LineOf, index: int, from_km: float, began_on: date, rng: np.random.Generator) -> Track:
    yard = line.yard_every > 0 and index % line.yard_every == line.yard_every - 1
    length_m = float(rng.integers(line.shortest_m, line.longest_m))
    catenary_a = None
    if line.kind is CircuitKind.DC_AC_IMMUNE and line.return_rails:
        catenary_a = 420.0 if index < line.count // 2 else 240.0
        length_m = min(length_m, 450.0 if catenary_a >= HEAVY_CATENARY_A else 950.0)
    if yard:
        length_m = min(length_m, float(rng.integers(130, 390)))
    choke = catenary_a is not None and length_m > 780
    receivers = 1 + (line.kind is CircuitKind.IMPULSE and index % 3 == 2)
    wiring, relay_type = _wired(line.kind, length_m, yard, choke, receivers, index, rng)
    polarity = ("A", "B")[index % 2]
    if line.kind is CircuitKind.AUDIO_FREQUENCY:
        polarity = f"{wiring.frequency_hz:.0f} Hz"
    elif line.kind in VANE:
        polarity = ("0", "180")[index % 2]
    age = timedelta(days=int(rng.integers(100, 660)))
    number = 101 + index
    return Track(
        name=f"{line.prefix}{number}",
        of=line,
        kind=line.kind,
        from_km=from_km,
        wiring=wiring,
        relay_type=relay_type,
        polarity=polarity,
        place=Place.YARD if yard else Place.BLOCK,
        sleepers=Sleepers.WOOD if yard else (Sleepers.CONCRETE, Sleepers.STEEL)[int(rng.random() < 0.1)],
        legs=(("loop",), ("siding",), ("siding", "spur"))[index % 3] if yard else (),
        relays=[Relay(f"R{line.prefix}-{number}A", began_on - age, round(float(rng.uniform(0.98, 1.02)), 3))],
        feed_overhauled_on=began_on - age - timedelta(days=60),
        commissioned_on=began_on - timedelta(days=int(rng.integers(1500, 9000))),
        constants=_constants(rng),
        receivers=receivers,
        choke=choke,
        catenary_a=catenary_a,
    )


def _wired(
    kind: CircuitKind,
    length_m: float,
    yard: bool,
    choke: bool,
    receivers: int,
    index: int,
    rng: np.random.Generator,
) -> tuple[Wiring, str]:
    """Wiring by circuit kind, not yet set up, and the relay's type.

    The 20 ohm relay (81 and 55 mA) is that of a university model of UK DC circuits (Space Weather,
    2023); the 9 ohm AC-immune one has the 1.40 V of Indian Railways' manual (second hand), released
    at 68 %. Everything else is invented.
    """
    wet_ohm_km = max(float(rng.uniform(3.0, 6.0)), 2.9 * length_m / 1000)
    base = Wiring(
        length_m=length_m,
        loop_ohm_per_km=LOOP_OHM_PER_KM[kind],
        wet_ohm_km=round(wet_ohm_km, 2),
        dry_ohm_km=round(float(rng.uniform(25.0, 60.0)), 1),
        coil_ohm=20.0,
        pick_up_v=1.62,
        drop_away_v=1.10,
        feed_ohm=4.0,
    )
    if kind is CircuitKind.DC:
        if yard:
            small = replace(base, coil_ohm=9.0, pick_up_v=0.45, drop_away_v=0.306, feed_ohm=4.2)
            return small, "neutral_9_ohm"
        return base, "neutral_20_ohm"
    if kind is CircuitKind.DC_AC_IMMUNE:
        immune = replace(base, coil_ohm=9.0, pick_up_v=1.40, drop_away_v=0.952)
        return replace(immune, relay_series_ohm=3.0) if choke else replace(
            immune, feed_ohm=4.4
        ), "immune_9_ohm"
    if kind is CircuitKind.AC_SINGLE_RAIL:
        vane = replace(base, frequency_hz=VANE_HZ, coil_ohm=9 + 6j, pick_up_v=1.20, drop_away_v=0.82)
        return vane, "vane_single_rail"
    if kind is CircuitKind.AC_DOUBLE_RAIL:
        vane = replace(base, frequency_hz=VANE_HZ, coil_ohm=300 + 400j, pick_up_v=10.0, drop_away_v=6.8)
        return replace(
            vane, feed_ohm=75.0, feed_ratio=5.0, relay_ratio=10.0, bond_ohm=3.0 + 0.5j
        ), "vane_double_rail"
    if kind is CircuitKind.AUDIO_FREQUENCY:
        hertz = AUDIO_HZ[index % 4]
        loop = complex(1.2, round(2 * math.pi * hertz * 1.3e-3, 3))
        audio = replace(base, frequency_hz=hertz, loop_ohm_per_km=loop, coil_ohm=6.0, feed_ohm=2.0)
        return replace(audio, pick_up_v=0.060, drop_away_v=0.045), f"receiver_{hertz:.0f}"
    if kind is CircuitKind.IMPULSE:
        pulse = replace(base, wet_ohm_km=6.5, coil_ohm=60.0, pick_up_v=15.0, drop_away_v=10.0)
        return replace(pulse, feed_ohm=4.0 if receivers == 1 else 2.6), "impulse_receiver"
    return replace(base, coil_ohm=3.0, pick_up_v=0.30, drop_away_v=0.20, feed_ohm=2.0), "code_follower"


def _constants(rng: np.random.Generator) -> dict[str, float]:
    drawn = {
        "insulation_resistance": rng.uniform(2e6, 2e7),
        "joint_feed_end": rng.uniform(90, 900),
        "joint_relay_end": rng.uniform(90, 900),
        "traction_imbalance": rng.uniform(1.0, 7.0),
        "stray_voltage": rng.uniform(0.002, 0.007),
        "rail_to_earth_voltage": rng.uniform(4.0, 17.0),
    }
    return {name: float(value) for name, value in drawn.items()}


def _join(before: Track, track: Track) -> None:
    zone = track.kind is CircuitKind.AUDIO_FREQUENCY
    separation = Separation.TUNED_ZONE if zone else Separation.JOINT
    boundary = f"{before.name}-{track.name}"
    before.boundaries.append((boundary, track.name, separation))
    track.boundaries.append((boundary, before.name, separation))


def _replace_vane_relays(tracks: Iterable[Track], today: date, rng: np.random.Generator) -> None:
    """Vane relays are exchanged every two years, each some weeks before it is due."""
    for track in tracks:
        if track.kind in VANE:
            first = track.relays[0]
            fitted_on = first.fitted_on + timedelta(days=730 - int(rng.integers(15, 60)))
            fitted_on = min(fitted_on, today - timedelta(days=20))
            factor = round(float(rng.uniform(0.98, 1.02)), 3)
            track.relays.append(Relay(f"{first.serial[:-1]}B", fitted_on, factor))


def set_up_all(tracks: Iterable[Track]) -> None:
    """Set up the feeds of all sections, kind by kind."""
    by_kind: dict[CircuitKind, list[Track]] = {}
    for track in tracks:
        by_kind.setdefault(track.kind, []).append(track)
    for kind, of_kind in by_kind.items():
        wired = set_up(kind, [track.wiring for track in of_kind], MULTIPLE[kind])
        for track, wiring in zip(of_kind, wired, strict=True):
            track.wiring = wiring
