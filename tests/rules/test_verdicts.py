"""Verdicts on readings, beyond the worked rows: what unproves, what condemns, what a visit found."""

from __future__ import annotations

from datetime import date
from typing import Any

import pytest

from service.rules.facts import EquipmentItem
from service.rules.limits import Applicability, Bound, Limit
from service.rules.quantities import QUANTITIES
from service.rules.verdicts import found_outside
from service.rules.words import RelativeTo, Sleepers, Source, Stage
from support.rule_cases import INSTRUMENTS, POINTS, RIGHT, WRONG, Case, codes, concession, limit, reading

DAY, LATER, LAST = date(2026, 5, 10), date(2026, 5, 20), date(2026, 5, 25)


def test_as_left_replaces_as_found_whichever_came_first() -> None:
    case = Case()
    name = case.visit(DAY, 0.7)
    case.readings.append(reading(name, 0.9, stage=Stage.AS_FOUND))
    assert (case.verdict().measured, case.verdict().stage) == (0.7, Stage.AS_LEFT)
    case.readings.reverse()
    assert case.verdict().measured == 0.7


def test_a_verdict_says_what_it_rests_on() -> None:
    case = Case()
    case.visit(DAY, 0.7)
    verdict = case.verdict()
    assert (verdict.visit, verdict.instrument, verdict.clause, verdict.book, verdict.edition) == (
        "v0",
        "SB",
        "1.1",
        "house",
        "1",
    )
    assert (verdict.unit, verdict.min, verdict.near_min, verdict.max) == ("Ohm", 0.5, 0.6, None)
    assert verdict.visited_at == case.visits[0].visited_at


def test_untrusted_and_undecided_are_both_said() -> None:
    case = Case()
    case.visit(DAY, 0.3, comparison="ge", instrument=None)
    assert codes(case.verdict()) == ["undecided", "no_instrument"]


def test_a_failure_says_that_its_instrument_lapsed() -> None:
    case = Case()
    case.visit(DAY, 0.3, instrument=None)
    assert (case.verdict().verdict, codes(case.verdict())) == ("outside", ["no_instrument"])


@pytest.mark.parametrize(("ballast", "code"), [(None, "ballast_unknown"), ("flooded", "measured_wet")])
def test_a_dry_limit_wants_to_know(ballast: str | None, code: str) -> None:
    case = Case(limit(ballast_dry=True))
    case.visit(DAY, 0.7, ballast)
    assert codes(case.verdict()) == [code]


def test_a_dry_limit_is_met_in_frost() -> None:
    case = Case(limit(ballast_dry=True))
    case.visit(DAY, 0.7, "frozen")
    assert case.verdict().verdict == "within"


@pytest.mark.parametrize(
    ("found", "then", "word"),
    [
        ("dry", None, "outside"),
        (None, "damp", "outside"),
        (None, "dry", "within"),
        ("flooded", None, "outside"),
        ("flooded", "wet", "within"),
    ],
)
def test_unknown_ballast_clears_nothing_and_fails_as_in_the_driest(
    found: str | None, then: str | None, word: str
) -> None:
    case = Case()
    case.visit(DAY, 0.4, found)
    case.visit(LATER, 0.7, then)
    assert case.verdict().verdict == word


@pytest.mark.parametrize("spoilt", [{"instrument": None}, {"comparison": "ge", "on": 0.3}])
def test_what_proves_nothing_clears_nothing(spoilt: dict[str, Any]) -> None:
    case = Case()
    case.visit(DAY, 0.4)
    case.visit(LATER, spoilt.pop("on", 0.7), **spoilt)
    assert case.verdict().verdict == "outside"
    assert codes(case.verdict())[0] == "not_repeated_dry"


def test_an_untrusted_failure_stands_until_repeated() -> None:
    case = Case()
    case.visit(DAY, 0.4, instrument=None)
    case.visit(LATER, 0.7, "wet")
    assert codes(case.verdict()) == ["not_repeated_dry"]


def test_an_earlier_clearing_pass_holds() -> None:
    case = Case()
    case.visit(DAY, 0.4, "damp")
    case.visit(LATER, 0.7, "dry")
    case.visit(LAST, 0.7, "flooded")
    assert case.verdict().verdict == "within"


def test_the_drier_of_two_failures_stays_open() -> None:
    case = Case()
    case.visit(date(2026, 5, 1), 0.4, "dry")
    case.visit(DAY, 0.4, "wet")
    case.visit(LATER, 0.7, "damp")
    verdict = case.verdict()
    assert (verdict.verdict, "2026-05-01" in verdict.reasons[0].reason) == ("outside", True)


def test_a_failure_before_work_that_changed_the_circuit_is_past() -> None:
    case = Case()
    case.visit(DAY, 0.4)
    case.visit(LATER, work=["bond_changed"])
    case.visit(LAST, 0.7, "wet")
    assert case.verdict().verdict == "within"


@pytest.mark.parametrize("work", ["tamped", "ballast_cleaned", "rail_cleaned", "drained", "cleaned"])
def test_other_work_clears_nothing_and_unproves_nothing(work: str) -> None:
    case = Case()
    case.visit(DAY, 0.4)
    case.visit(LATER, 0.7, "wet", work=[work])
    assert case.verdict().verdict == "outside"
    case.visit(LAST, 0.7, work=[work])
    assert case.verdict().verdict == "within"


def test_a_return_to_use_clears_what_was_before_it() -> None:
    case = Case(returned_on=LATER)
    case.visit(DAY, 0.4)
    case.visit(LATER, 0.7, "wet")
    assert case.verdict().verdict == "within"


def test_work_after_the_return_is_what_is_named() -> None:
    case = Case(returned_on=date(2026, 5, 1))
    case.visit(DAY, 0.7)
    case.visit(LATER, work=["adjusted"])
    assert codes(case.verdict()) == ["work_since"]


def test_as_found_lies_before_the_work_of_its_visit() -> None:
    case = Case()
    case.visit(DAY, 0.4, stage="as_found", work=["adjusted"])
    assert (case.verdict().verdict, codes(case.verdict())) == ("unproven", ["work_since"])


def test_work_in_a_voided_visit_was_not_done() -> None:
    case = Case()
    case.visit(DAY, 0.7)
    case.visit(LATER, work=["adjusted"], voided=True)
    assert case.verdict().verdict == "within"


def test_work_on_the_track_leaves_bench_values_standing() -> None:
    case = Case(limit(quantity="insulation_resistance", minimum=Bound(2e5, WRONG), test_points=("feed_end",)))
    case.visit(DAY, 1e6, quantity="insulation_resistance", points=["feed_end"])
    case.visit(LATER, work=["adjusted"])
    assert case.verdict("feed_end").verdict == "within"


def test_every_quantity_of_an_item_is_one_that_a_bench_measures() -> None:
    """Common practice, no source: a relay's own values and a cable's insulation do not turn on the track."""
    of_items = {name for name, quantity in QUANTITIES.items() if quantity.of_item}
    assert of_items == {
        "insulation_resistance",
        *(f"relay_{what}_{of}" for what in ("pick_up", "drop_away") for of in ("voltage", "current")),
    }


def test_no_box_leaves_the_true_value_below_where_wetness_matters() -> None:
    """What lets a glance at the readings spare a closer look at an earlier failure."""
    assert all(one.steps_up >= 0 for one in QUANTITIES.values() if one.wetness_matters)


RESIDUAL = limit(
    quantity="residual_voltage",
    minimum=None,
    maximum=Bound(0.8, WRONG, 0.1),
    shunt_ohm=0.5,
    test_points=("relay_end",),
)


@pytest.mark.parametrize(
    ("value", "given", "word", "reasons"),
    [
        (0.5, {"shunt_ohm": 0.5}, "within", []),
        (0.5, {"shunt_ohm": 0.6}, "within", []),
        (0.5, {"shunt_ohm": 0.4}, "unproven", ["other_shunt"]),
        (0.5, {}, "unproven", ["other_shunt"]),
        (0.5, {"source": Source.TRAIN}, "unproven", ["measured_under_train"]),
        (0.9, {"shunt_ohm": 0.6}, "outside", []),
        (0.9, {"shunt_ohm": 0.4}, "outside", []),
        (0.9, {"source": Source.TRAIN}, "outside", []),
    ],
)
def test_a_residual_is_for_its_shunt(
    value: float, given: dict[str, Any], word: str, reasons: list[str]
) -> None:
    case = Case(RESIDUAL)
    case.visit(DAY, value, quantity="residual_voltage", points=["relay_end"], **given)
    assert (case.verdict().verdict, codes(case.verdict())) == (word, reasons)


def test_a_residual_failure_is_cleared_only_with_its_shunt() -> None:
    case = Case(RESIDUAL)
    for on, value, shunt in ((DAY, 0.9, 0.5), (LATER, 0.5, 0.1)):
        case.visit(on, value, "wet", quantity="residual_voltage", points=["relay_end"], shunt_ohm=shunt)
    assert codes(case.verdict()) == ["not_repeated_dry", "other_shunt"]
    case.visit(LAST, 0.5, "wet", quantity="residual_voltage", points=["relay_end"], shunt_ohm=0.5)
    assert case.verdict().verdict == "within"


@pytest.mark.parametrize("least", [None, Bound(0.1, WRONG)])
def test_a_failure_by_the_step_alone_stays_open(least: Bound | None) -> None:
    """0.95 Ω on 0.1 Ω steps reaches to 1.05 Ω, over a maximum of 1 Ω that the reading itself keeps."""
    case = Case(limit(minimum=least, maximum=Bound(1.0, WRONG)))
    case.visit(DAY, 0.95)
    case.visit(LATER, 0.5, "wet")
    assert (case.verdict().verdict, codes(case.verdict())) == ("outside", ["not_repeated_dry"])


def test_a_right_side_failure_needs_no_repeat() -> None:
    case = Case(limit(minimum=Bound(0.5, RIGHT)))
    case.visit(DAY, 0.4)
    case.visit(LATER, 0.7, "wet")
    assert case.verdict().verdict == "within"


def test_a_right_side_failure_does_not_hide_a_wrong_side_one() -> None:
    both = limit(minimum=Bound(0.5, WRONG), maximum=Bound(2.0, RIGHT))
    case = Case(both)
    case.visit(DAY, 0.4)
    case.visit(LATER, 3.0, "wet")
    verdict = case.verdict()
    assert (verdict.verdict, verdict.hazard, codes(verdict)) == ("outside", WRONG, ["not_repeated_dry"])


def test_missing_attribute_at_each_test_point() -> None:
    case = Case(limit(applies=Applicability(sleepers=frozenset({Sleepers.WOOD}))))
    case.visit(DAY, 0.2)
    assert [(one.test_point, one.verdict) for one in case.judge().verdicts] == [
        (point, "unproven") for point in POINTS
    ]


def test_no_required_test_points_show_nothing() -> None:
    case = Case(required_test_points=())
    verdict = case.verdict(None)
    assert (verdict.verdict, codes(verdict)) == ("unproven", ["attribute_missing"])
    assert verdict.reasons[0].reason.endswith("required_test_points")


def test_a_test_point_that_is_not_required_only_condemns() -> None:
    case = Case()
    name = case.visit(DAY, 0.7)
    case.readings.append(reading(name, 0.7, test_point="middle"))
    assert [one.test_point for one in case.judge().verdicts] == list(POINTS)
    case.readings[-1] = reading(name, 0.3, test_point="middle")
    assert case.verdict("middle").verdict == "outside"


@pytest.mark.parametrize(
    ("test_points", "expected"),
    [
        (("legs",), ["leg:12A", "leg:12B"]),
        (("relay_end", "legs"), ["relay_end", "leg:12A", "leg:12B"]),
        (("leg:12B", "legs"), ["leg:12B", "leg:12A"]),
        (("middle",), ["middle"]),
    ],
)
def test_legs_stand_for_every_required_leg(test_points: tuple[str, ...], expected: list[str]) -> None:
    case = Case(limit(test_points=test_points), required_test_points=(*POINTS, "leg:12A", "leg:12B"))
    assert [one.test_point for one in case.judge().verdicts] == expected


EXCITATION = limit(
    quantity="relay_voltage",
    minimum=Bound(1.25, RIGHT),
    maximum=Bound(3.0, WRONG),
    relative_to=RelativeTo.RELAY_PICK_UP,
    test_points=("relay_end",),
)


def benched(**given: Any) -> Case:
    """1.9 V on the relay: 1.25 × 1.4 = 1.75 V by the register, 1.25 × 1.6 = 2.0 V by the bench reading."""
    case = Case(EXCITATION, relay_pick_up_v=1.4, **given)
    name = case.visit(DAY, 1.6, quantity="relay_pick_up_voltage", points=["relay_end"])
    case.readings.append(reading(name, 1.9, quantity="relay_voltage"))
    return case


def test_the_bench_reading_outweighs_the_register() -> None:
    assert (benched().verdict().verdict, benched().verdict().min) == ("outside", 2.0)


def fitted(on: date | None) -> dict[str, EquipmentItem]:
    return {"relay": EquipmentItem("R-1", on, None)}


@pytest.mark.parametrize(
    ("items", "least"), [(fitted(DAY), 2.0), (fitted(LATER), 1.75), (fitted(None), 2.0), ({}, 2.0)]
)
def test_a_bench_reading_of_the_relay_before_is_not_of_this_one(items: Any, least: float) -> None:
    assert benched(items=items).verdict().min == least


def test_nor_one_before_the_relay_was_changed() -> None:
    case = benched()
    case.visit(LATER, 1.9, quantity="relay_voltage", points=["relay_end"], work=["relay_changed"])
    assert case.verdict().min == 1.75


def test_only_an_exact_bench_reading_is_a_base() -> None:
    case = benched()
    case.visit(LATER, 1.7, quantity="relay_pick_up_voltage", points=["relay_end"], comparison="ge")
    assert case.verdict().min == 2.0


def test_the_newest_bench_reading_of_any_test_point() -> None:
    case = benched()
    case.visit(LATER, 1.5, quantity="relay_pick_up_voltage", points=["leg:12A"])
    assert case.verdict().min == 1.875


def test_a_base_that_cannot_be_relied_on_shows_nothing() -> None:
    case = benched()
    case.visit(LATER, 1.4, quantity="relay_pick_up_voltage", points=["relay_end"], instrument="XX")
    assert (case.verdict().verdict, codes(case.verdict())) == ("unproven", ["unknown_instrument"])


@pytest.mark.parametrize(
    ("quantity", "relative_to", "given"),
    [
        ("relay_voltage", RelativeTo.RELAY_DROP_AWAY, {"relay_drop_away_v": 2.0}),
        ("relay_current", RelativeTo.RELAY_PICK_UP, {"relay_pick_up_a": 2.0}),
        ("relay_current", RelativeTo.RELAY_DROP_AWAY, {"relay_drop_away_a": 2.0}),
        ("relay_voltage", RelativeTo.SET_UP, {"set_up": {("relay_voltage", "relay_end"): 2.0}}),
    ],
)
def test_each_base(quantity: str, relative_to: RelativeTo, given: dict[str, Any]) -> None:
    one = limit(
        quantity=quantity, relative_to=relative_to, minimum=Bound(0.9, RIGHT), test_points=("relay_end",)
    )
    case = Case(one, **given)
    case.visit(DAY, 1.9, quantity=quantity, points=["relay_end"])
    assert (case.verdict().verdict, case.verdict().min, case.verdict().margin) == ("within", 1.8, 0.1)


def test_no_set_up_value() -> None:
    case = Case(limit(relative_to=RelativeTo.SET_UP))
    case.visit(DAY, 0.7)
    assert (codes(case.verdict()), case.verdict().min) == (["no_set_up_value"], None)


def test_a_relative_limit_with_nothing_read_has_no_figures() -> None:
    verdict = Case(EXCITATION, relay_pick_up_v=1.4).verdict()
    assert (verdict.verdict, verdict.min) == ("not_measured", None)


@pytest.mark.parametrize(
    ("value", "given", "granted", "concession_named", "reasons"),
    [
        (0.4, {}, {"allowed_min": 0.4}, "c1", []),
        (0.3, {}, {"allowed_min": 0.4}, None, ["beyond_concession"]),
        (0.4, {}, {"allowed_min": 0.4, "test_point": "feed_end"}, None, []),
        (0.4, {}, {"allowed_min": 0.4, "limit": "other"}, None, []),
        (0.4, {}, {"allowed_min": 0.4, "limit": None, "task": "m"}, None, []),
        (0.4, {}, {"allowed_min": 0.4, "ended_on": date(2026, 6, 1)}, None, []),
        (0.4, {}, {"allowed_min": 0.4, "ended_on": date(2026, 6, 2)}, "c1", []),
        (0.4, {}, {"allowed_min": 0.4, "from_on": date(2026, 6, 2)}, None, []),
        (0.4, {"comparison": "lt"}, {"allowed_min": 0.3}, None, ["beyond_concession"]),
        (0.7, {}, {"allowed_min": 0.4}, None, []),
    ],
)
def test_concessions(
    value: float,
    given: dict[str, Any],
    granted: dict[str, Any],
    concession_named: str | None,
    reasons: list[str],
) -> None:
    case = Case()
    case.visit(DAY, value, **given)
    case.concessions = (concession(**granted),)
    assert (case.verdict().concession, codes(case.verdict())) == (concession_named, reasons)


def test_a_concession_is_for_the_value_that_failed_not_for_the_wet_one() -> None:
    case = Case()
    case.visit(DAY, 0.3)
    case.visit(LATER, 0.7, "wet")
    case.concessions = (concession(allowed_min=0.4),)
    assert codes(case.verdict()) == ["not_repeated_dry", "beyond_concession"]
    case.concessions = (concession(allowed_min=0.4), concession(concession="c2", allowed_min=0.3))
    assert case.verdict().concession == "c2"


def test_a_maximum_under_concession() -> None:
    case = Case(RESIDUAL)
    case.visit(DAY, 0.9, quantity="residual_voltage", points=["relay_end"], shunt_ohm=0.5)
    case.concessions = (concession(allowed_max=0.9),)
    assert case.verdict().concession == "c1"


def found(case: Case, *limits: Limit) -> list[tuple[str, str | None, Stage | None]]:
    verdicts = found_outside(case.record, case.edition, case.visits[-1], case.readings, INSTRUMENTS)
    return [(one.limit, one.test_point, one.stage) for one in verdicts]


def test_found_outside_is_every_stage_and_only_wrong_side() -> None:
    case = Case(limit(), limit(limit="n", minimum=Bound(0.9, RIGHT)))
    name = case.visit(DAY, 0.4, points=["relay_end"])
    case.readings.append(reading(name, 0.3, stage=Stage.AS_FOUND))
    assert found(case) == [("m", "relay_end", Stage.AS_FOUND), ("m", "relay_end", Stage.AS_LEFT)]


def test_found_outside_at_a_point_that_is_not_required_or_not_of_the_limit() -> None:
    case = Case(limit(), limit(limit="n", test_points=("relay_end",)))
    case.visit(DAY, 0.4, points=["middle"])
    assert found(case) == [("m", "middle", Stage.AS_LEFT)]


def test_found_outside_says_what_it_says_of_the_instrument_and_rests_on_the_visit_alone() -> None:
    case = Case()
    case.visit(DAY, 0.4, points=["relay_end"], instrument="XX", voided=True)
    (verdict,) = found_outside(case.record, case.edition, case.visits[0], case.readings, INSTRUMENTS)
    assert (codes(verdict), verdict.hazard, verdict.margin, verdict.near_min) == (
        ["unknown_instrument"],
        WRONG,
        -0.1,
        0.6,
    )


def test_found_outside_needs_to_know_that_the_limit_applies_and_its_base() -> None:
    case = Case(limit(applies=Applicability(sleepers=frozenset({Sleepers.WOOD}))), EXCITATION)
    name = case.visit(DAY, 0.4)
    case.readings.append(reading(name, 9.0, quantity="relay_voltage"))
    assert found(case) == []
