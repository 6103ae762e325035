"""The faults hidden among the sections: which, where, and what of each must show.

A fault of the register is planted before the feeds are set up and the rounds drawn, one that shows in a
visit afterwards, in the call itself. All else about a faulty section is as healthy as the others.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date, timedelta

from service.demo.crew import ADRIFT, ADRIFT_FROM
from service.demo.rounds import Call
from service.demo.tracks import Relay, Setting, Track
from service.rules.words import BallastState, CircuitKind, FindingKind, Rail, SectionState

Tracks = Mapping[str, Track]


@dataclass(frozen=True, slots=True)
class Planted:
    """One fault. `shows` None: nothing measured shows it; `where` is a quantity or a task of the finding.

    `last_full` is the days before today of the last full test, after which nobody calls.
    """

    fault: str
    sections: tuple[str, ...]
    shows: FindingKind | None
    where: str | None
    last_full: int | None
    says: str


PLANTED = (
    Planted(
        "turned_up_in_the_wet",
        ("CB118",),
        None,
        None,
        34,
        "Passed in the wet after the feed was turned up; fails when the ballast dries: wrong side.",
    ),
    Planted(
        "set_up_in_the_dry",
        ("CB124",),
        None,
        None,
        11,
        "Passed in the dry after the feed was turned down; the relay drops in the wet: right side.",
    ),
    Planted("low_ballast", ("CB131",), FindingKind.OUTSIDE, "ballast_resistance", 36, "A drain is blocked."),
    Planted(
        "relay_test_due", ("CB137", "MP109"), FindingKind.OVERDUE, "relay_bench_test", None, "Relays too old."
    ),
    Planted(
        "meter_out_of_tolerance",
        ("LQ104", "LQ105", "LQ106"),
        FindingKind.NOT_SHOWN,
        "relay_voltage",
        25,
        "Measured with a meter since found out of tolerance.",
    ),
    Planted(
        "leg_never_tested", ("CB121",), FindingKind.NOT_SHOWN, "drop_shunt", None, "A siding was left out."
    ),
    Planted(
        "found_outside_not_reported",
        ("CB145",),
        FindingKind.FOUND_OUTSIDE,
        "drop_shunt",
        9,
        "Found outside, adjusted, left well, and not reported.",
    ),
    Planted(
        "clock_an_hour_out", ("SW103",), None, None, 10, "Its visits carry the clock offset of the handheld."
    ),
    Planted(
        "wrong_circuit_kind",
        ("HM133",),
        FindingKind.CONFIGURATION,
        "circuit_kind_permitted",
        None,
        "A plain DC circuit where a running rail carries traction return.",
    ),
    Planted(
        "same_polarity",
        ("CB151", "CB152"),
        FindingKind.CONFIGURATION,
        "adjacent_opposed",
        None,
        "Neighbours not opposed across their joint.",
    ),
    Planted(
        "rusty_railhead",
        ("HM116",),
        FindingKind.POOR_RAIL_CONTACT,
        None,
        7,
        "A siding that no train polishes.",
    ),
    Planted(
        "concession_lapsing",
        ("HM119",),
        FindingKind.CONCESSION_LAPSING,
        "length",
        None,
        "Too long under this catenary, under a concession for two weeks more.",
    ),
    Planted(
        "measured_wet",
        ("TF108", "DM104"),
        FindingKind.NOT_SHOWN,
        "drop_shunt",
        33,
        "The limit holds in dry ballast; tested in the wet only.",
    ),
    Planted(
        "not_tested_in_time",
        ("KF102", "WM107"),
        FindingKind.OVERDUE,
        "shunt_test",
        124,
        "Nobody had possession of the line.",
    ),
    Planted(
        "values_swapped",
        ("OS102",),
        FindingKind.DOUBTFUL,
        "drop_shunt",
        13,
        "Drop and pick-up shunt were written into each other's place.",
    ),
)
"""Everything wrong in the depot today. Sections named here and nowhere else are on its weekly list."""

NOT_IN_USE = {"KF106": SectionState.OUT_OF_USE, "WM114": SectionState.PLANNED}
"""Not judged, and listed so; nobody calls there."""

REPORTED = ("CB112", 27)
"""Found outside so many days ago, and answered for since: nothing of it is left on today's list."""

LENGTH_UNDER_CONCESSION_M = 500.0


def last_full() -> dict[str, int]:
    """Section → days before today of its last full test, where a fault asks for one."""
    found = {name: one.last_full for one in PLANTED if one.last_full is not None for name in one.sections}
    return found | {REPORTED[0]: REPORTED[1]}


def sections(fault: str) -> tuple[str, ...]:
    """Where a fault lies."""
    return next(one.sections for one in PLANTED if one.fault == fault)


def plant_in_register(tracks: Tracks, today: date) -> None:
    """Change sections, so that their records or their ballast and settings have their fault."""

    def ago(fault: str) -> date:
        found = next(one.last_full for one in PLANTED if one.fault == fault)
        return today - timedelta(days=found or 0)

    for name, state in NOT_IN_USE.items():
        tracks[name].state = state

    (wet,) = sections("turned_up_in_the_wet")
    _rewire(tracks[wet], length_m=1480.0, wet_ohm_km=3.6, dry_ohm_km=45.0)
    tracks[wet].drained_until, tracks[wet].drained_factor = today - timedelta(days=44), 0.40
    tracks[wet].settings.append(Setting(ago("turned_up_in_the_wet"), 0.575))
    tracks[wet].relays[0].factor = 1.0

    (dry,) = sections("set_up_in_the_dry")
    _rewire(tracks[dry], length_m=1000.0, wet_ohm_km=2.1, dry_ohm_km=40.0)
    tracks[dry].settings.append(Setting(ago("set_up_in_the_dry"), 2.8))

    (low,) = sections("low_ballast")
    _rewire(tracks[low], length_m=840.0, wet_ohm_km=3.4, dry_ohm_km=30.0)
    tracks[low].drained_until, tracks[low].drained_factor = today - timedelta(days=50), 0.36

    for name in sections("relay_test_due"):
        old = tracks[name].relays[0]
        tracks[name].relays = [Relay(old.serial, today - timedelta(days=4 * 365 + 200), old.factor)]

    for name, before in ((sections("found_outside_not_reported")[0], 9), REPORTED):
        found_on = today - timedelta(days=before)
        _rewire(tracks[name], length_m=620.0, wet_ohm_km=4.0, dry_ohm_km=40.0)
        tracks[name].settings += [
            Setting(found_on - timedelta(days=4), 0.42, recorded=False),
            Setting(found_on, 1.0),
        ]

    (plain,) = sections("wrong_circuit_kind")
    tracks[plain].kind, tracks[plain].relay_type = CircuitKind.DC, "neutral_20_ohm"
    tracks[plain].choke, tracks[plain].catenary_a = False, None
    _rewire(
        tracks[plain],
        length_m=380.0,
        coil_ohm=20.0,
        pick_up_v=1.62,
        drop_away_v=1.10,
        feed_ohm=4.0,
        relay_series_ohm=0.0,
    )

    _same_polarity(tracks, sections("same_polarity")[1])

    (long,) = sections("concession_lapsing")
    _rewire(tracks[long], length_m=LENGTH_UNDER_CONCESSION_M)


def _rewire(track: Track, **changes: float) -> None:
    track.wiring = replace(track.wiring, **changes)


def _same_polarity(tracks: Tracks, first: str) -> None:
    """Turn the polarity of a section and of all beyond it, so that one joint alone is wrong."""
    for track in tracks.values():
        if track.of.prefix == tracks[first].of.prefix and track.name >= first:
            track.polarity = "B" if track.polarity == "A" else "A"


def plant_in_calls(calls: Sequence[Call], today: date) -> None:
    """Change calls, so that visits show their fault."""
    changes: dict[str, Callable[[Call], None]] = {
        "turned_up_in_the_wet": _in_wet_enough,
        "meter_out_of_tolerance": _with_adrift_meter,
        "leg_never_tested": _leave_out_leg,
        "clock_an_hour_out": _clock_ahead,
        "rusty_railhead": _rusty,
        "values_swapped": _swapped,
        "low_ballast": _fouled,
    }
    recent = {
        "turned_up_in_the_wet": 40,
        "meter_out_of_tolerance": ADRIFT_FROM - 1,
        "clock_an_hour_out": 40,
        "rusty_railhead": 12,
        "values_swapped": 14,
        "low_ballast": 50,
    }
    for fault, change in changes.items():
        since = today - timedelta(days=recent[fault]) if fault in recent else date.min
        for call in calls:
            if call.track.name in sections(fault) and call.day >= since:
                change(call)


def _in_wet_enough(call: Call) -> None:
    """In a little drier ballast the residual voltage would have told on it."""
    call.ballast_ohm_km, call.supply = 2.15, 1.0
    call.remarks = "Relay slow to pick up after rain; feed turned up."


def _with_adrift_meter(call: Call) -> None:
    call.meter = ADRIFT


def _leave_out_leg(call: Call) -> None:
    call.skipped = frozenset({f"leg:{call.track.legs[0]}"})


def _clock_ahead(call: Call) -> None:
    call.clock_ahead = timedelta(hours=1)


def _rusty(call: Call) -> None:
    call.rail = Rail.RUSTY
    call.remarks = "No train for weeks; rail head brown from joint to joint."


def _swapped(call: Call) -> None:
    call.swapped = call.full


def _fouled(call: Call) -> None:
    call.ballast_ohm_km = 1.7
    call.ballast_state = BallastState.FOULED
    call.remarks = "Ditch full, ballast stands in water."
