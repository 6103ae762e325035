"""Which visits count, what can be relied on, and what interval a reading is."""

from __future__ import annotations

from datetime import UTC, date, datetime
from math import inf

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.rules.facts import Instrument, Visit
from service.rules.readings import Interval, counting, interval, replaces_cycle, steps_on, trust
from support.rule_cases import INSTRUMENTS, calibration, reading

JAN, MAR, JUN, SEP = (date(2026, month, 1) for month in (1, 3, 6, 9))


def visit(name: str, replaces: str | None = None, *, voided: bool = False, day: int = 1) -> Visit:
    on = date(2026, 5, day)
    return Visit(name, datetime(2026, 5, day, 9, tzinfo=UTC), on, replaces=replaces, voided=voided)


@pytest.mark.parametrize(
    ("visits", "counts"),
    [
        pytest.param([visit("a"), visit("b")], "ab", id="both"),
        pytest.param([visit("a", voided=True), visit("b")], "b", id="voided"),
        pytest.param([visit("a"), visit("b", "a")], "b", id="replaced"),
        pytest.param([visit("a"), visit("b", "a", voided=True)], "a", id="revived"),
        pytest.param([visit("a"), visit("b", "a"), visit("c", "b")], "c", id="corrected-twice"),
        pytest.param([visit("a"), visit("b", "a"), visit("c", "b", voided=True)], "b", id="last-voided"),
        pytest.param([visit("b", "gone")], "b", id="replaces-what-was-not-received"),
        pytest.param([visit("b", day=2), visit("a", day=3)], "ba", id="by-instant"),
        pytest.param([visit("b"), visit("a")], "ab", id="then-by-id"),
        pytest.param([visit("a"), visit("a")], "a", id="each-once"),
    ],
)
def test_which_visits_count(visits: list[Visit], counts: str) -> None:
    assert "".join(one.visit for one in counting(visits)) == counts


@given(
    st.lists(st.tuples(st.sampled_from("abcd"), st.sampled_from(["a", "b", "c", "d", None]), st.booleans()))
)
def test_any_order_and_repetition_counts_the_same(drawn: list[tuple[str, str | None, bool]]) -> None:
    by_id = {name: visit(name, replaces, voided=voided) for name, replaces, voided in drawn}
    once = list(by_id.values())
    assert counting(once) == counting(once[::-1]) == counting(once + once[:2])


def test_a_circle_of_replacements_is_named() -> None:
    assert set(replaces_cycle([visit("a", "c"), visit("b", "a"), visit("c", "b"), visit("d", "a")])) == set(
        "abc"
    )
    assert replaces_cycle([visit("a", "a")]) == ("a",)
    assert replaces_cycle([visit("a"), visit("b", "a"), visit("c", "b"), visit("d", "x")]) == ()
    assert replaces_cycle([visit("a", "c", voided=True), visit("c", "a")]) == ("a", "c")


def lent(*calibrations: object) -> dict[str, Instrument]:
    return {"SB": Instrument("SB", calibrations)}  # type: ignore[arg-type]


GOOD_JAN = calibration(JAN, date(2026, 12, 31))
BAD_JUN = calibration(JUN, date(2027, 6, 1), "out_of_tolerance")
GOOD_SEP = calibration(SEP, date(2027, 9, 1), "adjusted")


@pytest.mark.parametrize(
    ("instruments", "on", "code"),
    [
        pytest.param({}, MAR, "unknown_instrument", id="unknown"),
        pytest.param(lent(), MAR, "not_calibrated", id="no-calibration"),
        pytest.param(lent(GOOD_SEP), MAR, "not_calibrated", id="only-later"),
        pytest.param(lent(GOOD_JAN), MAR, None, id="good"),
        pytest.param(lent(GOOD_JAN), date(2026, 12, 31), None, id="due-that-day"),
        pytest.param(lent(GOOD_JAN), date(2027, 1, 1), "calibration_lapsed", id="due-the-day-before"),
        pytest.param(lent(GOOD_JAN, BAD_JUN), MAR, "instrument_out_of_tolerance", id="since-the-good-one"),
        pytest.param(lent(BAD_JUN), MAR, "instrument_out_of_tolerance", id="no-good-one-before"),
        pytest.param(lent(GOOD_JAN, BAD_JUN), JUN, "instrument_out_of_tolerance", id="that-day"),
        pytest.param(lent(GOOD_JAN, BAD_JUN), SEP, "instrument_out_of_tolerance", id="until-a-good-one"),
        pytest.param(lent(GOOD_JAN, BAD_JUN, GOOD_SEP), SEP, None, id="good-again"),
        pytest.param(
            lent(GOOD_JAN, BAD_JUN, calibration(JUN, date(2027, 6, 1))),
            JUN,
            "instrument_out_of_tolerance",
            id="found-bad-and-mended-that-day",
        ),
        pytest.param(
            lent(GOOD_JAN, calibration(MAR, date(2027, 3, 1)), BAD_JUN),
            date(2026, 2, 1),
            None,
            id="before-last-good",
        ),
    ],
)
def test_what_can_be_relied_on(instruments: dict[str, Instrument], on: date, code: str | None) -> None:
    found = trust(reading("v", 0.7), on, instruments, date(2027, 12, 31))
    assert (found and found.code) == code


def test_a_calibration_is_not_known_before_it_was_made() -> None:
    instruments = lent(GOOD_JAN, BAD_JUN)
    assert trust(reading("v", 0.7), MAR, instruments, date(2026, 5, 31)) is None
    assert trust(reading("v", 0.7), MAR, instruments, JUN) is not None


def test_no_instrument_and_doubt_come_first() -> None:
    absent = trust(reading("v", 0.7, instrument=None), MAR, INSTRUMENTS, JUN)
    doubtful = trust(reading("v", 0.7, instrument=None, doubtful="ends_swapped"), MAR, INSTRUMENTS, JUN)
    assert absent is not None
    assert absent.code == "no_instrument"
    assert doubtful is not None
    assert (doubtful.code, "ends_swapped" in doubtful.reason) == ("doubtful", True)


@pytest.mark.parametrize(
    ("given_as", "step", "expected"),
    [
        pytest.param({}, 0.1, Interval(0.5, 0.6, False, True), id="drop-shunt"),
        pytest.param({"quantity": "pick_up_shunt"}, 0.1, Interval(0.4, 0.5, True, False), id="pick-up-shunt"),
        pytest.param({}, None, Interval(0.5, 0.5, False, False), id="no-steps"),
        pytest.param({"quantity": "relay_voltage"}, 0.1, Interval(0.5, 0.5, False, False), id="no-box"),
        pytest.param({"comparison": "ge"}, 0.1, Interval(0.5, inf, False, True), id="ge"),
        pytest.param({"comparison": "lt"}, 0.1, Interval(-inf, 0.5, True, True), id="lt"),
    ],
)
def test_a_reading_is_an_interval(given_as: dict[str, str], step: float | None, expected: Interval) -> None:
    assert interval(reading("v", 0.5, **given_as), step) == expected


def test_steps_are_those_of_the_day() -> None:
    fine = calibration(JUN, date(2027, 1, 1), "out_of_tolerance", Ohm=0.05)
    box = Instrument("SB", (calibration(MAR, date(2027, 1, 1), Ohm=0.1), fine))
    assert steps_on(box, JAN, SEP) == steps_on(box, MAR, SEP) == {"Ohm": 0.1}
    assert steps_on(box, JUN, SEP) == {"Ohm": 0.05}
    assert steps_on(box, JUN, MAR) == {"Ohm": 0.1}
    assert steps_on(None, JUN, SEP) == steps_on(Instrument("X", ()), JUN, SEP) == {}
