"""Build the invented depot through the application, two years in some seconds, by a clock of its own.

What is built comes from `tracks`, `rounds`, `measuring` and `faults`; here it is told in order of time.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from datetime import UTC, date, datetime, time, timedelta
from functools import partial
from typing import Any, Concatenate, ParamSpec, TypeVar
from zoneinfo import ZoneInfo

import numpy as np

from service.application import access, audits, concessions, depots, editions, findings, instruments, visits
from service.application import sections as register
from service.application.context import Service
from service.application.status import CLOCK
from service.application.visit_content import Draft
from service.demo import crew, faults
from service.demo.crew import Person
from service.demo.lines import BOOK, DEPOT, DEPOT_TITLE, TIME_ZONE
from service.demo.measuring import drafts, uuid7
from service.demo.registered import content
from service.demo.rounds import Diary, rounds
from service.demo.tracks import Track, lay, set_up_all
from service.demo.weather import weather

SEED = 7
"""Of the demo that is served and tested."""

DAYS = 730
WEEKLY_FROM = 42
"""For so many days before today visits come in by the week, and each week is audited."""

EARLIER_BY = timedelta(days=56)
"""Before that they come in by batches of so many days, as nobody sees the difference two years on."""

AUDIT_HOUR = 7
MOST = 500
"""Visits in one batch, as the service takes them from a handheld."""

P = ParamSpec("P")
T = TypeVar("T")

_acting = partial(replace, CLOCK)
"""An actor by key and holder."""


@dataclass(frozen=True, slots=True)
class Built:
    """What came of it: keys by scope, and how much of everything there is."""

    keys: dict[str, str]
    counts: dict[str, int]


@dataclass(slots=True)
class _Story:
    """The depot while it is told; `now` is where its clock stands."""

    service: Service
    now: datetime
    rng: np.random.Generator
    tracks: dict[str, Track]
    versions: Counter[str] = field(default_factory=Counter)
    """Of sections and of instruments."""
    calibrations: Counter[str] = field(default_factory=Counter)
    counts: Counter[str] = field(default_factory=Counter)

    def write(
        self,
        who: Person,
        action: Callable[Concatenate[Any, P], T],
        *arguments: P.args,
        **words: P.kwargs,
    ) -> T:
        """Run an application function in a unit of work of its own."""
        with self.service.unit_of_work(_acting(key=who.label, holder=who.holder)) as tx:
            return action(tx, *arguments, **words)

    @property
    def day(self) -> date:
        """The depot's day."""
        return self.now.astimezone(ZoneInfo(TIME_ZONE)).date()


def build(
    service: Service, seed: int, entropy: Callable[[int], bytes], progress: Callable[[str], None]
) -> Built:
    """Fill an empty, migrated database with the depot, up to the service's now.

    The same seed and day give the same depot but for the keys, which come from `entropy`, given
    their length.
    """
    rng = np.random.default_rng(seed)
    now = service.clock()
    today = now.astimezone(ZoneInfo(TIME_ZONE)).date()
    began_on = today - timedelta(days=DAYS)
    tracks = {track.name: track for track in lay(today, began_on, rng)}
    faults.plant_in_register(tracks, today)
    set_up_all(tracks.values())
    diary = Diary(today, DAYS, weather(today, DAYS, rng), rng, faults.last_full())
    calls = rounds(list(tracks.values()), diary)
    faults.plant_in_calls(calls, today)
    progress(f"measuring at {len(tracks)} track circuits, {len(calls)} times")
    told = [
        (call.day, round(call.clock_ahead.total_seconds()), draft)
        for call, draft in zip(calls, drafts(calls, rng), strict=True)
    ]

    story = _Story(service, now, rng, tracks)
    story.service = Service(service.database, lambda: story.now, lambda: _new_id(story))
    _open(story, began_on, progress)
    posted = 0
    for end in _ends(now, today, began_on):
        before, story.now = story.now, end
        _bring_register_up(story, before.date(), today, began_on)
        due = [one for one in told[posted:] if one[0] < story.day]
        _post(story, due)
        posted += len(due)
        _speak(story, today)
        progress(f"{story.day}: {posted} visits")
    assert posted == len(told), "every call lies before today"
    _last_audit(story)
    keys = _keys(story, entropy)
    return Built(keys, dict(story.counts))


def _new_id(story: _Story) -> str:
    return uuid7(int(story.now.timestamp() * 1000), story.rng)


def _at(day: date, hour: int) -> datetime:
    return datetime.combine(day, time(hour), ZoneInfo(TIME_ZONE)).astimezone(UTC)


def _ends(now: datetime, today: date, began_on: date) -> Iterator[datetime]:
    """When visits come in: seldom at first, then each week on the morning of today's weekday, at last now."""
    weekly_from = today - timedelta(days=WEEKLY_FROM)
    day = began_on + EARLIER_BY
    while day < weekly_from:
        yield _at(day, AUDIT_HOUR)
        day += EARLIER_BY
    for day in (weekly_from + timedelta(weeks=week) for week in range(WEEKLY_FROM // 7)):
        yield _at(day, AUDIT_HOUR)
    yield now


def _open(story: _Story, began_on: date, progress: Callable[[str], None]) -> None:
    """Open the depot, draft the bundled books, issue the house book, record instruments and sections."""
    today = story.day
    story.now = _at(began_on - timedelta(days=4), 9)
    terms = depots.Terms(DEPOT_TITLE, TIME_ZONE, depots.WEEKDAYS[today.weekday()], AUDIT_HOUR)
    story.write(crew.MANAGER, depots.create, DEPOT, terms)
    story.write(crew.AUTHOR, editions.load_bundled)
    story.write(crew.ISSUER, editions.issue, BOOK, "1", began_on, expected=1)
    story.now = _at(began_on, 7)
    _record_instruments(story, today, began_on)
    progress(f"recording {len(story.tracks)} track circuits")

    def create_all(tx: Any) -> None:
        for track in story.tracks.values():
            register.create(tx, DEPOT, track.name, content(track, began_on))
            story.versions[track.name] = 1

    story.write(crew.ENGINEER, create_all)
    story.counts["sections"] = len(story.tracks)


def _record_instruments(story: _Story, today: date, began_on: date) -> None:
    """Put every instrument that has a calibration by now which is not recorded yet."""
    for name, whole in crew.instruments(today, began_on).items():
        known = tuple(one for one in whole.calibrations if one.calibrated_on <= story.day)
        if known and len(known) != story.calibrations[name]:
            version = story.versions[name] or None
            said = replace(whole, calibrations=known)
            kept, _ = story.write(crew.ENGINEER, instruments.put, DEPOT, name, version, said)
            story.versions[name] = kept.version
            story.calibrations[name] = len(known)


def _bring_register_up(story: _Story, before: date, today: date, began_on: date) -> None:
    """Record what calibrations, new relays and new settings there were since `before`."""
    _record_instruments(story, today, began_on)
    changed = sorted(
        {(relay.fitted_on, track.name) for track in story.tracks.values() for relay in track.relays[1:]}
        | {
            (setting.on, track.name)
            for track in story.tracks.values()
            for setting in track.settings
            if setting.recorded
        }
    )

    def edit_all(tx: Any) -> None:
        for day, name in changed:
            if before <= day < story.day:
                version = story.versions[name]
                register.edit(tx, DEPOT, name, version, content(story.tracks[name], day))
                story.versions[name] += 1
                story.counts["sections changed"] += 1

    story.write(crew.ENGINEER, edit_all)


def _post(story: _Story, due: Sequence[tuple[date, int, Draft]]) -> None:
    """Post visits in batches, those of a clock that is out by themselves."""
    for offset_s in sorted({ahead for _, ahead, _ in due}):
        batch = [draft for _, ahead, draft in due if ahead == offset_s]
        for start in range(0, len(batch), MOST):
            part = batch[start : start + MOST]
            outcomes = story.write(crew.FIELD, visits.post, DEPOT, part, offset_s)
            for outcome in outcomes:
                if outcome.problem is not None:
                    raise outcome.problem
            story.counts["visits"] += len(part)
            story.counts["readings"] += sum(len(draft.readings) for draft in part)


def _speak(story: _Story, today: date) -> None:
    """Grant the concession in its time; audit each week, and answer some of what was found."""
    ago = (today - story.day).days
    (long,) = faults.sections("concession_lapsing")
    if ago <= 70 and not story.counts["concessions"]:
        asked = concessions.Content(
            section=long,
            limit="length_heavy_catenary",
            task=None,
            test_point=None,
            allowed_min=None,
            allowed_max=faults.LENGTH_UNDER_CONCESSION_M + 20,
            conditions="Catenary current recorded weekly; no second feeder closed on this track.",
            protection="Section checked clear by the signaller before each move over it.",
            asked_by=crew.ENGINEER.holder,
            approved_by=None,
            from_on=story.day,
            until_on=today + timedelta(days=14),
        )
        story.write(crew.MANAGER, concessions.grant, DEPOT, _new_id(story), asked)
        story.counts["concessions"] += 1
    if 0 < ago <= WEEKLY_FROM:
        _audit(story)
        _answer(story, today)


def _audit(story: _Story) -> None:
    audits.run(story.service, _acting(key=crew.AUDITOR.label, holder=crew.AUDITOR.holder), DEPOT)
    story.counts["audits"] += 1


def _last_audit(story: _Story) -> None:
    """The audit of today, whose list the demo shows."""
    _audit(story)
    with story.service.read() as connection:
        row = audits.get(connection, DEPOT, None)
    story.counts["sections listed"] = audits.wire(row)["counts"]["sections_listed"]


def _answer(story: _Story, today: date) -> None:
    """Answer for the failure that was reported, and say what is planned for the blocked drain."""
    reported, blocked = faults.REPORTED[0], faults.sections("low_ballast")[0]
    with story.service.read() as connection:
        rows = findings.page(connection, DEPOT, state=None, section=None, kind=None, after=None, most=1000)
    for row in rows:
        if row.response is not None:
            continue
        said: dict[str, Any] = dict.fromkeys(findings.RESPONSE)
        if row.section == reported and row.kind == "found_outside":
            said |= {
                "owner": crew.ENGINEER.holder,
                "reported_at": story.now - timedelta(hours=2),
                "report_reference": f"HV/{story.day:%y%j}",
                "reported_to": "duty signaller, Coldbeck box",
                "protection": "Line blocked until the feed was put back",
                "cause": "Feed resistance altered without a record",
                "restored_by": "T101",
            }
        elif row.section == blocked:
            said |= {
                "owner": crew.ENGINEER.holder,
                "action": "Ditch to be dug out by the track gang",
                "planned_on": today + timedelta(days=21),
            }
        else:
            continue
        story.write(crew.ENGINEER, findings.respond, DEPOT, row.finding, said, row.version)
        story.counts["responses"] += 1


def _keys(story: _Story, entropy: Callable[[int], bytes]) -> dict[str, str]:
    """One key of each scope; those for books and for everything are for all depots."""
    holders = {
        "read": crew.READER,
        "readings": crew.FIELD,
        "register": crew.ENGINEER,
        "limits": crew.ISSUER,
        "audit": crew.AUDITOR,
        "admin": crew.MANAGER,
    }
    keys = {}
    for scope, who in holders.items():
        depot = None if scope in ("limits", "admin") else DEPOT
        wanted = access.Wanted(who.label, who.holder, (scope,), depot)
        keys[scope] = story.write(crew.MANAGER, access.create, wanted, entropy(32))
    return keys
