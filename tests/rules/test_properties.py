"""What must hold of any section, however its visits came in, on every day around every change."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, date, datetime, time, timedelta
from typing import Any

from hypothesis import given, settings
from hypothesis import strategies as st

from service.rules.facts import EquipmentItem, Instrument, Reading, SectionFacts, TaskClaim, Visit
from service.rules.limits import Bound, Shortened, YearlyWindow
from service.rules.readings import counting
from service.rules.status import Status, judge
from service.rules.words import (
    Ballast,
    Comparison,
    EditionState,
    Rail,
    RelativeTo,
    SectionState,
    Source,
    Stage,
    TaskDone,
    VerdictWord,
    Work,
)
from support.rule_cases import WRONG, calibration, concession, edition, limit, record, task

START = date(2026, 1, 1)
POINTS = ("relay_end", "feed_end")
VALUES = (0.3, 0.4, 0.5, 0.6, 0.7)

BOOK = edition(
    limit(),
    limit(limit="dry", minimum=Bound(0.4, WRONG), ballast_dry=True, test_points=("relay_end",)),
    limit(
        limit="residual",
        quantity="residual_voltage",
        minimum=None,
        maximum=Bound(0.9, WRONG, 0.05),
        relative_to=RelativeTo.RELAY_DROP_AWAY,
        shunt_ohm=0.5,
        test_points=("relay_end",),
    ),
    task(needs=("drop_shunt",), interval="P1M", grace="P3D"),
    task(task="relay_test", interval="P2M", item="relay"),
    task(task="dry_round", interval=None, window=YearlyWindow((2, 1), (2, 20))),
    task(task="after", interval=None, after_work=frozenset({Work.ADJUSTED}), grace="P5D"),
    task(task="insulation", interval="P3M", shortened=Shortened("insulation_resistance", 5e5, "P1M")),
)
TASKS = tuple(one.task for one in BOOK.tasks)

days = st.integers(0, 90).map(lambda offset: START + timedelta(days=offset))
some = st.sampled_from


@st.composite
def visits(draw: Callable[..., Any]) -> list[Visit]:
    made = []
    for index in range(draw(st.integers(0, 7))):
        on = draw(days)
        made.append(
            Visit(
                visit=f"v{index}",
                visited_at=datetime.combine(on, time(draw(st.integers(0, 23))), UTC),
                visited_on=on,
                ballast=draw(some([None, *Ballast])),
                rail=draw(some([None, None, *Rail])),
                tasks=tuple(TaskClaim(name, draw(some(TaskDone))) for name in draw(st.sets(some(TASKS)))),
                work=frozenset(
                    draw(st.sets(some([Work.ADJUSTED, Work.RELAY_CHANGED, Work.TAMPED]), max_size=1))
                ),
                replaces=draw(some([None, None, *(f"v{before}" for before in range(index))])),
                voided=draw(some([False, False, False, True])),
            )
        )
    return made


@st.composite
def readings(draw: Callable[..., Any], made: list[Visit]) -> list[Reading]:
    """At most one of each visit, quantity, test point and stage."""
    keys = st.tuples(
        some([visit.visit for visit in made] or ["none"]),
        some(
            [
                "drop_shunt",
                "drop_shunt",
                "residual_voltage",
                "insulation_resistance",
                "relay_drop_away_voltage",
            ]
        ),
        some(POINTS),
        some(Stage),
    )
    return [
        Reading(
            *key,
            comparison=draw(some([Comparison.EQ, *Comparison])),
            value=draw(some(VALUES)),
            instrument=draw(some(["SB", "SB", "SB", None, "XX"])),
            shunt_ohm=draw(some([None, 0.1, 0.5])),
            source=draw(some([None, *Source])),
            doubtful=draw(some([None, None, None, "ends_swapped"])),
        )
        for key in sorted(draw(st.sets(keys, max_size=24)))
    ]


@st.composite
def instruments(draw: Callable[..., Any]) -> dict[str, Instrument]:
    made = sorted(draw(st.lists(st.integers(-30, 150), max_size=3)))
    calibrations = [
        calibration(
            START + timedelta(days=day),
            START + timedelta(days=day + 60),
            draw(some(["pass", "pass", "out_of_tolerance"])),
            Ohm=0.1,
        )
        for day in made
    ]
    return {"SB": Instrument("SB", tuple(calibrations))}


@st.composite
def concessions(draw: Callable[..., Any]) -> tuple[Any, ...]:
    made = []
    for index in range(draw(st.integers(0, 2))):
        begins = draw(days)
        of_task = draw(st.booleans())
        made.append(
            concession(
                concession=f"c{index}",
                limit=None if of_task else draw(some(["m", "dry", "residual"])),
                task=draw(some(TASKS)) if of_task else None,
                allowed_min=draw(some([None, 0.3, 0.4])),
                from_on=begins,
                until_on=begins + timedelta(days=draw(st.integers(0, 60))),
                ended_on=draw(some([None, begins + timedelta(days=5)])),
            )
        )
    return tuple(made)


@st.composite
def sections(draw: Callable[..., Any]) -> SectionFacts:
    made = draw(visits())
    relay = EquipmentItem(draw(some([None, "R-1"])), draw(some([None, START])), draw(some([None, START])))
    return SectionFacts(
        record=record(
            commissioned_on=draw(some([None, START])),
            returned_on=draw(some([None, None, START + timedelta(days=40)])),
            relay_drop_away_v=draw(some([None, 0.7])),
            state=draw(some([SectionState.IN_USE] * 5 + [SectionState.OUT_OF_USE])),
            items=draw(some([{}, {"relay": relay}])),
        ),
        visits=tuple(sorted(made, key=lambda visit: (visit.visited_at, visit.visit))),
        readings=tuple(draw(readings(made))),
        instruments=draw(instruments()),
        concessions=draw(concessions()),
        next_version_on=None,
    )


editions = st.lists(
    st.builds(
        lambda begins, lasts, name: replace(
            BOOK,
            edition=name,
            state=EditionState.ISSUED if lasts is None else EditionState.WITHDRAWN,
            effective_on=begins,
            withdrawn_on=None if lasts is None else begins + timedelta(days=lasts),
        ),
        days,
        st.one_of(st.none(), st.integers(0, 40)),
        some("123"),
    ),
    max_size=3,
    unique_by=lambda one: one.edition,
).map(lambda more: (BOOK, *more))

as_of_days = st.integers(90, 130).map(lambda offset: START + timedelta(days=offset))


def of(facts: SectionFacts, books: Any, as_of: date) -> Status:
    return judge(facts, "house", books, as_of)


@settings(max_examples=100, deadline=None)
@given(sections(), editions, as_of_days)
def test_a_status_holds_until_the_day_it_says(facts: SectionFacts, books: Any, as_of: date) -> None:
    """On every day up to `holds_until`, and for three months where it holds for ever."""
    now = of(facts, books, as_of)
    last = min(now.holds_until or date.max, as_of + timedelta(days=90))
    assert last >= as_of
    for ahead in range(1, (last - as_of).days + 1):
        day = as_of + timedelta(days=ahead)
        assert of(facts, books, day) == replace(now, as_of=day)


@settings(max_examples=100, deadline=None)
@given(sections(), as_of_days, st.randoms(use_true_random=False))
def test_the_order_and_repetition_of_what_came_in_is_no_matter(
    facts: SectionFacts, as_of: date, random: Any
) -> None:
    shuffled = [list(facts.visits) + list(facts.visits[:2]), list(facts.readings), list(facts.concessions)]
    for one in shuffled:
        random.shuffle(one)
    again = replace(
        facts, visits=tuple(shuffled[0]), readings=tuple(shuffled[1]), concessions=tuple(shuffled[2])
    )
    assert of(again, (BOOK,), as_of) == of(facts, (BOOK,), as_of)


@settings(max_examples=100, deadline=None)
@given(sections(), as_of_days)
def test_what_does_not_count_leaves_no_trace(facts: SectionFacts, as_of: date) -> None:
    counts = tuple(replace(visit, replaces=None) for visit in counting(facts.visits))
    kept = {visit.visit for visit in counts}
    alone = replace(
        facts, visits=counts, readings=tuple(reading for reading in facts.readings if reading.visit in kept)
    )
    assert of(alone, (BOOK,), as_of) == of(facts, (BOOK,), as_of)


@settings(max_examples=100, deadline=None)
@given(sections(), as_of_days)
def test_without_instruments_nothing_gets_better(facts: SectionFacts, as_of: date) -> None:
    """A reading can condemn more easily than it can clear."""
    trusted, bare = of(facts, (BOOK,), as_of), of(replace(facts, instruments={}), (BOOK,), as_of)
    for before, after in zip(trusted.verdicts, bare.verdicts, strict=False):
        assert (before.limit, before.test_point) == (after.limit, after.test_point)
        if after.verdict in (VerdictWord.NEAR, VerdictWord.WITHIN):
            raise AssertionError(f"{after} shown by no instrument")
        if before.verdict is VerdictWord.OUTSIDE:
            assert after.verdict is VerdictWord.OUTSIDE


def open_at_the_end(facts: SectionFacts, point: str, least: float) -> bool:
    """Limit *M*'s open failures, walked forward as the design words it: an oracle apart from the rules."""
    open_wetness: set[int] = set()
    for visit in counting(facts.visits):
        if facts.record.returned_on is not None and visit.visited_on < facts.record.returned_on:
            continue
        for stage in (Stage.AS_FOUND, Stage.AS_LEFT):
            if stage is Stage.AS_LEFT and visit.work & {Work.ADJUSTED, Work.RELAY_CHANGED}:
                open_wetness.clear()
            for reading in facts.readings:
                key = (reading.visit, reading.quantity, reading.test_point, reading.stage)
                if key != (visit.visit, "drop_shunt", point, stage):
                    continue
                exact, half_above = reading.comparison is Comparison.EQ, reading.comparison is Comparison.GE
                if (exact and reading.value < least) or (
                    reading.comparison is Comparison.LT and reading.value <= least
                ):
                    open_wetness.add(0 if visit.ballast is None else visit.ballast.wetness)
                elif (exact or half_above) and reading.value >= least and trusted(facts, reading, visit):
                    wetness = 4 if visit.ballast is None else visit.ballast.wetness
                    open_wetness = {failed for failed in open_wetness if failed < wetness}
    return bool(open_wetness)


def trusted(facts: SectionFacts, reading: Reading, visit: Visit) -> bool:
    if reading.doubtful is not None or reading.instrument != "SB":
        return False
    calibrations = facts.instruments["SB"].calibrations
    before = [one for one in calibrations if one.calibrated_on <= visit.visited_on]
    after = [one for one in calibrations if one.calibrated_on > visit.visited_on]
    near = [*before[-1:], *(one for one in before if one.calibrated_on == visit.visited_on), *after[:1]]
    good = all(one.result != "out_of_tolerance" for one in near)
    return bool(before) and good and before[-1].due_on >= visit.visited_on


@settings(max_examples=200, deadline=None)
@given(sections(), as_of_days, some(POINTS))
def test_a_failure_stays_open_until_repeated_as_dry_or_worked_upon(
    facts: SectionFacts, as_of: date, point: str
) -> None:
    facts = replace(facts, record=replace(facts.record, state=SectionState.IN_USE), concessions=())
    (verdict,) = [
        one for one in of(facts, (BOOK,), as_of).verdicts if (one.limit, one.test_point) == ("m", point)
    ]
    if open_at_the_end(facts, point, 0.5):
        assert verdict.verdict is VerdictWord.OUTSIDE
    else:
        assert "not_repeated_dry" not in [reason.code for reason in verdict.reasons]
