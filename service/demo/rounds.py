"""Who calls at which section on which day, in what weather, and what is done there.

Full shunt tests each quarter with a look at the voltages in between. What is read is in `measuring`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, time, timedelta
from itertools import pairwise
from zoneinfo import ZoneInfo

import numpy as np

from service.demo.crew import TECHNICIANS, Technician
from service.demo.lines import TIME_ZONE
from service.demo.tracks import DC, Setting, Track
from service.demo.weather import Day
from service.demo.wiring import VANE
from service.rules.words import Ballast, BallastState, CircuitKind, Rail, SectionState

DRY_WINDOW = ((6, 1), (9, 30))
LONG_M = 600
DRY_DAYS = (Ballast.DRY, Ballast.FROZEN)
LATEST_FULL = 78
"""A full test lies at most so many days back, so that none is overdue unless planted."""

NEVER_NEARER = 3
ADJUSTED = 10
"""How many healthy sections were adjusted a little at some time, as happens."""

STEPPED = 4.0
"""Feed resistance of which five per cent are two steps of its regulator [ohm]."""


@dataclass(slots=True)
class Call:
    """One attendance; `found` and `left` are factors on the feed's resistance, `left` None if untouched."""

    track: Track
    day: date
    at: datetime
    full: bool
    ballast: Ballast
    temperature_c: float
    ballast_ohm_km: float
    supply: float
    technician: Technician
    meter: str
    found: float
    left: float | None = None
    rail: Rail = Rail.CLEAN
    ballast_state: BallastState = BallastState.CLEAN
    work: tuple[str, ...] = ()
    tasks: tuple[str, ...] = ()
    extras: frozenset[str] = frozenset()
    """What is read besides the usual: `insulation`, `imbalance`, `bench`."""
    skipped: frozenset[str] = frozenset()
    """Test points that were left out."""
    swapped: bool = False
    """Drop and pick-up shunt were written into each other's place."""
    clock_ahead: timedelta = timedelta()
    remarks: str | None = None


@dataclass(slots=True)
class Diary:
    """What the rounds are drawn from."""

    today: date
    days: int
    weather: Mapping[date, Day]
    rng: np.random.Generator
    last_full: Mapping[str, int] = field(default_factory=dict)
    """section → days before today of its last full test, where a fault asks for one; nothing after it."""


def rounds(tracks: Sequence[Track], diary: Diary) -> list[Call]:
    """Every call of the two years, oldest first."""
    quiet = [
        track for track in tracks if track.name not in diary.last_full and track.wiring.feed_ohm == STEPPED
    ]
    touched = {quiet[int(i)].name for i in diary.rng.choice(len(quiet), ADJUSTED, replace=False)}
    calls: list[Call] = []
    for track in (one for one in tracks if one.state is SectionState.IN_USE):
        fulls = _fulls(track, diary)
        if track.name in touched:
            factor = float(diary.rng.choice([0.95, 1.05]))
            track.settings.append(Setting(diary.today - timedelta(days=fulls[3]), factor))
        _fit_relay(track, fulls, diary)
        technician = next(one for one in TECHNICIANS if track.of.prefix in one.lines)
        for back, ago in enumerate(fulls):
            calls.append(_full(track, ago, back, back == len(fulls) - 1, technician, diary))
        calls += [_call(track, ago, technician, diary, full=False) for ago in _checks(track, fulls, diary)]
    return sorted(calls, key=lambda call: (call.at, call.track.name))


def _fulls(track: Track, diary: Diary) -> list[int]:
    """Days ago of the full tests, the newest first."""
    planted = diary.last_full.get(track.name)
    ago = planted if planted is not None else int(diary.rng.integers(NEVER_NEARER, LATEST_FULL))
    found: list[int] = []
    while ago < diary.days - 2:
        found.append(ago if not found and planted is not None else _suitable(track, ago, diary))
        ago += int(diary.rng.integers(79, 88))
    return found


def _suitable(track: Track, ago: int, diary: Diary) -> int:
    """The day itself; for bonded circuits, whose limit holds in dry ballast, the next dry one."""
    if track.kind is not CircuitKind.AC_DOUBLE_RAIL:
        return ago
    for off in sorted(range(-25, 26), key=abs):
        day = diary.today - timedelta(days=ago + off)
        near = NEVER_NEARER <= ago + off < diary.days - 2
        if near and diary.weather[day].ballast in DRY_DAYS:
            return ago + off
    return ago


def _checks(track: Track, fulls: Sequence[int], diary: Diary) -> Iterator[int]:
    """Days ago of the looks in between."""
    for newer, older in pairwise(fulls):
        if older - newer > 20:
            yield (newer + older) // 2
    if track.name not in diary.last_full and fulls[0] > 44:
        yield fulls[0] // 2


def _fit_relay(track: Track, fulls: Sequence[int], diary: Diary) -> None:
    """A second relay is fitted at the full test that comes next."""
    if len(track.relays) == 2:
        planned = (diary.today - track.relays[1].fitted_on).days
        ago = max((one for one in fulls if one <= planned), default=fulls[0])
        track.relays[1].fitted_on = diary.today - timedelta(days=ago)


def _full(track: Track, ago: int, back: int, first: bool, technician: Technician, diary: Diary) -> Call:
    call = _call(track, ago, technician, diary, full=True)
    tasks, extras, work = ["shunt_test"], set(), list(call.work)
    if track.kind in DC:
        tasks += ["relay_leads_swapped", "voltage_test"]
        if (
            track.wiring.length_m >= LONG_M
            and DRY_WINDOW[0] <= (call.day.month, call.day.day) <= DRY_WINDOW[1]
        ):
            tasks.append("dry_round")
    if back % 4 == 1 or first:
        tasks.append("bond_inspection")
    if track.kind is CircuitKind.AC_DOUBLE_RAIL and (back % 4 == 0 or first):
        tasks.append("imbalance_test")
        extras.add("imbalance")
    if track.kind in VANE and (back % 4 == 2 or first):
        tasks.append("insulation_test")
        extras.add("insulation")
    if track.relay_type == "neutral_9_ohm" and first:
        tasks.append("relay_bench_test")
        extras.add("bench")
    if call.day == track.relays[-1].fitted_on:
        work.append("relay_changed")
        tasks += ["vane_relay_bench_test", "full_set_up"]
        call.left = call.found if call.left is None else call.left
        extras.add("imbalance")
    call.tasks, call.extras, call.work = tuple(tasks), frozenset(extras), tuple(work)
    return call


def _call(track: Track, ago: int, technician: Technician, diary: Diary, *, full: bool) -> Call:
    day = diary.today - timedelta(days=ago)
    sky = diary.weather[day]
    starts = datetime.combine(day, time(8), ZoneInfo(TIME_ZONE)).astimezone(UTC)
    frozen = sky.ballast is Ballast.FROZEN
    ohm_km = track.ballast_ohm_km(sky.wetness, frozen=frozen, day=day) * float(diary.rng.normal(1, 0.04))
    before = [one.factor for one in track.settings if one.on < day or (one.on == day and not one.recorded)]
    adjusted = [one.factor for one in track.settings if one.on == day and one.recorded and full]
    return Call(
        track=track,
        day=day,
        at=starts + timedelta(minutes=int(diary.rng.integers(0, 450))),
        full=full,
        ballast=sky.ballast,
        temperature_c=sky.temperature_c,
        ballast_ohm_km=ohm_km,
        supply=float(np.clip(diary.rng.normal(1.0, 0.008), 0.98, 1.02)),
        technician=technician,
        meter=technician.meter,
        found=before[-1] if before else 1.0,
        left=adjusted[-1] if adjusted else None,
        work=("adjusted",) if adjusted else (),
    )
