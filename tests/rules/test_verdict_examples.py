"""Every row of the worked verdicts, by its number. The rows are the project's own, agreed beforehand."""

from __future__ import annotations

from datetime import UTC, date, datetime
from zoneinfo import ZoneInfo

import pytest

from service.rules.facts import EquipmentItem, Instrument, Visit
from service.rules.findings import findings_of, found_outside_seeds
from service.rules.limits import Applicability, Bound
from service.rules.quantities import to_base
from service.rules.verdicts import found_outside
from service.rules.words import Compliance, FindingKind, Hazard, RelativeTo, Sleepers, Stage, TaskState
from support.rule_cases import (
    AS_OF,
    INSTRUMENTS,
    POINTS,
    RIGHT,
    WRONG,
    Case,
    calibration,
    codes,
    combination,
    concession,
    limit,
    reading,
    task,
)

DAY = date(2026, 5, 10)


def one(value: float, *limits: object, ballast: str = "dry", **given: object) -> Case:
    case = Case(*limits)
    case.visit(DAY, value, ballast, **given)
    return case


def test_01_inside_by_more_than_the_near_margin() -> None:
    verdict = one(0.7).verdict()
    assert (verdict.verdict, verdict.judged, verdict.margin) == ("within", 0.7, 0.2)


def test_02_on_the_bound_is_near() -> None:
    verdict = one(0.5).verdict()
    assert (verdict.verdict, verdict.judged, verdict.margin) == ("near", 0.5, 0.0)


def test_03_exactly_the_near_margin_away_is_within() -> None:
    verdict = one(0.6).verdict()
    assert (verdict.verdict, verdict.margin) == ("within", 0.1)


def test_04_below_the_minimum_is_outside_on_its_side() -> None:
    verdict = one(0.4).verdict()
    assert (verdict.verdict, verdict.hazard, verdict.margin) == ("outside", WRONG, -0.1)


def test_05_the_same_in_milliohm_to_the_last_bit() -> None:
    assert one(to_base(700, "mOhm")).judge() == one(0.7).judge()


FLAT = limit(minimum=Bound(0.06, WRONG))


def test_06_at_least_the_bound_is_within() -> None:
    assert one(0.06, FLAT, comparison="ge").verdict().verdict == "within"


def test_07_less_than_the_bound_is_outside() -> None:
    assert one(0.06, FLAT, comparison="lt").verdict().verdict == "outside"


def test_08_a_half_line_across_the_bound_is_undecided() -> None:
    verdict = one(0.3, comparison="ge").verdict()
    assert (verdict.verdict, codes(verdict)) == ("unproven", ["undecided"])


def test_09_a_required_test_point_not_covered() -> None:
    case = one(0.7, points=["relay_end"])
    assert case.verdict("feed_end").verdict == "not_measured"
    assert case.judge().compliance is Compliance.NOT_SHOWN


def lapsing(due: date) -> dict[str, Instrument]:
    return {"SB": Instrument("SB", (calibration(date(2025, 1, 1), due, Ohm=0.1),))}


def test_10_a_pass_with_a_lapsed_calibration_proves_nothing() -> None:
    case = one(0.7)
    case.instruments = lapsing(date(2026, 5, 9))
    assert (case.verdict().verdict, codes(case.verdict())) == ("unproven", ["calibration_lapsed"])


def test_11_a_failure_with_a_lapsed_calibration_still_condemns() -> None:
    case = one(0.4)
    case.instruments = lapsing(date(2026, 5, 9))
    assert case.verdict().verdict == "outside"


def test_12_a_calibration_due_on_the_day_counts() -> None:
    case = one(0.7)
    case.instruments = lapsing(DAY)
    assert case.verdict().verdict == "within"


def test_13_no_older_reading_stands_in() -> None:
    case = one(0.8)
    case.visit(date(2026, 5, 20), 0.7, instrument="XX")
    verdict = case.verdict()
    assert (verdict.verdict, verdict.measured, codes(verdict)) == ("unproven", 0.7, ["unknown_instrument"])


def test_14_an_instrument_found_out_of_tolerance_unproves_what_came_before() -> None:
    case = Case()
    case.visit(date(2026, 3, 1), 0.7)
    good = calibration(date(2026, 1, 1), date(2027, 1, 1), Ohm=0.1)
    bad = calibration(date(2026, 6, 1), date(2027, 6, 1), "out_of_tolerance", Ohm=0.1)
    case.instruments = {"SB": Instrument("SB", (good, bad))}
    verdict = case.verdict()
    assert (verdict.verdict, codes(verdict)) == ("unproven", ["instrument_out_of_tolerance"])
    assert case.verdict(as_of=date(2026, 5, 31)).verdict == "within"


def test_15_found_outside_is_not_cleared_by_what_was_left() -> None:
    case = Case()
    name = case.visit(DAY, 0.7, work=["adjusted"])
    case.readings.append(reading(name, 0.3, stage=Stage.AS_FOUND))
    assert case.verdict().verdict == "within"
    found = found_outside(case.record, case.edition, case.visits[0], case.readings, INSTRUMENTS)
    (seed,) = found_outside_seeds(found)
    assert (seed.kind, seed.hazard, seed.test_point) == (FindingKind.FOUND_OUTSIDE, WRONG, "relay_end")


def test_16_a_wetter_pass_does_not_clear() -> None:
    case = one(0.4)
    case.visit(date(2026, 5, 20), 0.6, "wet")
    verdict = case.verdict()
    assert (verdict.verdict, codes(verdict), verdict.visit) == ("outside", ["not_repeated_dry"], "v1")


def test_17_work_lies_between() -> None:
    case = one(0.4)
    case.visit(date(2026, 5, 20), 0.6, "wet", work=["adjusted"])
    assert [case.verdict(point).verdict for point in POINTS] == ["within", "within"]


@pytest.mark.parametrize(
    ("found", "then"),
    [
        pytest.param("wet", "dry", id="18-drier"),
        pytest.param("damp", "damp", id="19-as-dry"),
        pytest.param("frozen", "dry", id="20-both-driest"),
    ],
)
def test_18_to_20_a_pass_as_dry_clears(found: str, then: str) -> None:
    case = one(0.4, ballast=found)
    case.visit(date(2026, 5, 20), 0.6, then)
    assert case.verdict().verdict == "within"


def test_21_a_wet_pass_then_a_dry_one() -> None:
    case = one(0.4)
    case.visit(date(2026, 5, 20), 0.6, "wet")
    case.visit(date(2026, 5, 21), 0.6, "dry")
    assert case.verdict().verdict == "within"


def test_22_after_work_every_point_anew() -> None:
    case = one(0.7)
    case.visit(date(2026, 5, 20), 0.8, points=["relay_end"], work=["adjusted"])
    assert case.verdict("relay_end").verdict == "within"
    verdict = case.verdict("feed_end")
    assert (verdict.verdict, codes(verdict)) == ("unproven", ["work_since"])


DRY = limit(ballast_dry=True)


def test_23_a_dry_limit_is_not_shown_in_the_damp() -> None:
    verdict = one(0.7, DRY, ballast="damp").verdict()
    assert (verdict.verdict, codes(verdict)) == ("unproven", ["measured_wet"])


def test_24_a_dry_limit_fails_in_any_ballast() -> None:
    assert one(0.4, DRY, ballast="wet").verdict().verdict == "outside"


def test_25_a_late_arrival_does_not_decide() -> None:
    case = one(0.7)
    case.visit(date(2026, 5, 3), 0.4)
    assert (case.verdict().verdict, case.verdict().visit) == ("within", "v0")


@pytest.mark.parametrize("late", [True, False])
def test_26_a_late_failure_counts_whichever_arrived_first(late: bool) -> None:
    case = Case()
    visits = [(date(2026, 5, 3), 0.4, "dry"), (DAY, 0.7, "wet")]
    for on, value, ballast in reversed(visits) if late else visits:
        case.visit(on, value, ballast)
    assert (case.verdict().verdict, codes(case.verdict())) == ("outside", ["not_repeated_dry"])


def test_27_a_voided_failure_no_longer_decides() -> None:
    case = one(0.7)
    case.visit(date(2026, 5, 20), 0.4, stage=Stage.AS_FOUND, voided=True)
    assert case.verdict().verdict == "within"
    found = found_outside(case.record, case.edition, case.visits[1], case.readings[2:], INSTRUMENTS)
    assert len(found_outside_seeds(found)) == 2


EXCITATION = limit(
    limit="excitation",
    quantity="relay_voltage",
    minimum=Bound(1.25, RIGHT, 0.1),
    maximum=Bound(3.0, WRONG, 0.1),
    relative_to=RelativeTo.RELAY_PICK_UP,
    test_points=("relay_end",),
)


def excited(volts: float, pick_up: float | None = 1.40, **given: object) -> Case:
    case = Case(EXCITATION, relay_pick_up_v=pick_up)
    case.visit(DAY, volts, quantity="relay_voltage", points=["relay_end"], **given)
    return case


@pytest.mark.parametrize(
    ("volts", "word", "hazard"),
    [(1.74, "outside", RIGHT), (1.80, "near", RIGHT), (2.50, "within", RIGHT), (4.25, "outside", WRONG)],
)
def test_28_each_bound_has_its_own_hazard(volts: float, word: str, hazard: Hazard) -> None:
    verdict = excited(volts).verdict()
    assert (verdict.verdict, verdict.hazard) == (word, hazard)
    assert (verdict.min, verdict.near_min, verdict.near_max, verdict.max) == (1.75, 1.85, 4.1, 4.2)


def test_29_no_rated_value() -> None:
    verdict = excited(2.5, pick_up=None).verdict()
    assert (verdict.verdict, codes(verdict)) == ("unproven", ["no_rated_value"])


RESIDUAL = limit(
    limit="residual",
    quantity="residual_voltage",
    minimum=None,
    maximum=Bound(0.85, WRONG, 0.05),
    relative_to=RelativeTo.RELAY_DROP_AWAY,
    shunt_ohm=0.5,
)


@pytest.mark.parametrize(("volts", "word"), [(0.74, "within"), (0.80, "near"), (0.81, "outside")])
def test_30_residual_relative_to_drop_away(volts: float, word: str) -> None:
    case = Case(RESIDUAL, relay_drop_away_v=0.952)
    case.visit(DAY, volts, quantity="residual_voltage", shunt_ohm=0.5)
    verdict = case.verdict()
    assert (verdict.verdict, verdict.hazard) == (word, WRONG)


def test_31_under_concession_is_still_outside() -> None:
    case = one(0.4)
    case.concessions = (concession(allowed_min=0.4),)
    june, july = case.judge(date(2026, 6, 1)), case.judge(date(2026, 7, 1))
    assert [verdict.verdict for verdict in (*june.verdicts, *july.verdicts)] == ["outside"] * 4
    assert [verdict.concession for verdict in (*june.verdicts, *july.verdicts)] == ["c1", "c1", None, None]
    assert (june.compliance, july.compliance) == (Compliance.NO, Compliance.NO)
    assert june.holds_until == date(2026, 6, 30)


def test_32_a_doubtful_reading_proves_nothing() -> None:
    verdict = excited(3.1, doubtful="relay_above_supply").verdict()
    assert (verdict.verdict, verdict.doubtful) == ("unproven", "relay_above_supply")
    assert codes(verdict) == ["doubtful"]


def test_33_rusty_rail_is_a_finding_beside_a_pass() -> None:
    case = one(0.9, rail="rusty")
    status = case.judge()
    assert {verdict.verdict for verdict in status.verdicts} == {"within"}
    assert status.worst_hazard is WRONG
    (seed,) = findings_of(status, case.facts(), AS_OF)
    assert (seed.kind, seed.hazard) == (FindingKind.POOR_RAIL_CONTACT, WRONG)


def test_34_a_circuit_kind_that_the_book_does_not_permit() -> None:
    case = Case(
        limit(),
        combination("dc", "none"),
        combination("dc_ac_immune", "ac_overhead"),
        traction="dc_third_rail",
        return_rails=1,
    )
    verdict = case.verdict(None)
    assert (verdict.limit, verdict.verdict, verdict.hazard) == ("circuit_kind_permitted", "outside", WRONG)
    assert codes(verdict) == ["combination_not_permitted"]


def test_35_an_attribute_that_the_register_lacks() -> None:
    case = one(0.7, limit(applies=Applicability(sleepers=frozenset({Sleepers.CONCRETE}))))
    verdict = case.verdict()
    assert (verdict.verdict, codes(verdict)) == ("unproven", ["attribute_missing"])
    assert "sleepers" in verdict.reasons[0].reason


def done_on(day: date, **given: object) -> Case:
    case = Case(limit(), task(**given))
    case.visit(day, 0.7, tasks={"shunt_test": "done"})
    return case


@pytest.mark.parametrize(
    ("interval", "last", "due"),
    [
        pytest.param("P3M", date(2026, 1, 31), date(2026, 4, 30), id="36"),
        pytest.param("P2M", date(2026, 1, 31), date(2026, 3, 31), id="37"),
        pytest.param("P1Y", date(2024, 2, 29), date(2025, 2, 28), id="38"),
        pytest.param("P4Y", date(2024, 2, 29), date(2028, 2, 29), id="39"),
    ],
)
def test_36_to_39_due_overdue_the_day_after(interval: str, last: date, due: date) -> None:
    case = done_on(last, interval=interval)
    (on_the_day,) = case.judge(due).tasks
    (day_after,) = case.judge(date.fromordinal(due.toordinal() + 1)).tasks
    assert (on_the_day.due_on, on_the_day.state) == (due, TaskState.DUE)
    assert day_after.state is TaskState.OVERDUE


def test_40_grace() -> None:
    case = done_on(date(2026, 1, 15), grace="P14D")
    states = [case.judge(date(2026, 4, day)).tasks[0].state for day in (14, 15, 29, 30)]
    assert states == [TaskState.CURRENT, TaskState.DUE, TaskState.DUE, TaskState.OVERDUE]


def test_41_the_day_is_the_depots() -> None:
    visited_at = datetime(2026, 3, 28, 23, 30, tzinfo=UTC)
    case = done_on(date(2026, 3, 28))
    local = visited_at.astimezone(ZoneInfo("Etc/GMT-1")).date()
    case.visits = [Visit("v0", visited_at, local, tasks=case.visits[0].tasks)]
    assert case.judge().tasks[0].last_done_on == date(2026, 3, 29)


def test_42_one_of_two_points_is_incomplete() -> None:
    case = done_on(date(2026, 3, 15), needs=("drop_shunt",))
    case.visit(DAY, 0.7, points=["relay_end"], tasks={"shunt_test": "done"})
    (found,) = case.judge().tasks
    assert (found.state, found.last_done_on, found.due_on) == (
        TaskState.INCOMPLETE,
        date(2026, 3, 15),
        date(2026, 6, 15),
    )


def test_43_never_done() -> None:
    case = Case(limit(), task(), commissioned_on=date(2026, 1, 1))
    states = [
        case.judge(day).tasks[0].state for day in (date(2026, 3, 31), date(2026, 4, 1), date(2026, 4, 2))
    ]
    assert states == [TaskState.NEVER_DONE, TaskState.DUE, TaskState.OVERDUE]
    assert case.judge().tasks[0].due_on == date(2026, 4, 1)


def test_44_out_of_use_owes_nothing_and_starts_anew() -> None:
    case = Case(limit(), task(), state="out_of_use")
    case.visit(DAY, 0.7)
    status = case.judge()
    assert (status.compliance, status.verdicts, status.overdue) == (None, (), False)
    assert [found.state for found in status.tasks] == [TaskState.NOT_OWED]
    assert [caution.code for caution in status.cautions] == ["out_of_use"]
    back = Case(limit(), returned_on=date(2026, 5, 20))
    back.visit(DAY, 0.4)
    assert (back.verdict().verdict, codes(back.verdict())) == ("unproven", ["returned_to_use"])


def test_45_a_relay_brings_its_own_bench_test() -> None:
    relay = EquipmentItem("R-9", fitted_on=AS_OF, tested_on=date(2023, 6, 1))
    case = Case(limit(), task(task="relay_test", interval="P4Y", item="relay"), items={"relay": relay})
    case.visit(date(2026, 1, 1), tasks={"relay_test": "done"})
    (found,) = case.judge().tasks
    assert (found.state, found.due_on) == (TaskState.CURRENT, date(2027, 6, 1))


def test_46_a_low_result_shortens_the_interval() -> None:
    from service.rules.limits import Shortened

    case = Case(
        task(
            task="insulation",
            interval="P10Y",
            shortened=Shortened("insulation_resistance", 500e3, "P1Y"),
            needs_anywhere=("insulation_resistance",),
        )
    )
    case.visit(
        DAY,
        to_base(400, "kOhm"),
        quantity="insulation_resistance",
        points=["feed_end"],
        tasks={"insulation": "done"},
    )
    (found,) = case.judge().tasks
    assert (found.interval, found.due_on) == ("P1Y", date(2027, 5, 10))
