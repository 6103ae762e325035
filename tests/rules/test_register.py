"""Configuration limits: what the register has, what it lacks, and what the book permits."""

from __future__ import annotations

from typing import Any

import pytest

from service.rules.facts import Adjacent
from service.rules.limits import Applicability, Bound, Limit
from service.rules.status import Status
from service.rules.words import Bonding, Compliance, Separation, Sleepers
from support.rule_cases import WRONG, Case, codes, combination, concession, limit


def configuration(quantity: str, least: float | None = None, most: float | None = None) -> Limit:
    return limit(
        limit=quantity,
        quantity=quantity,
        minimum=None if least is None else Bound(least, WRONG),
        maximum=None if most is None else Bound(most, WRONG),
        test_points=(),
    )


@pytest.mark.parametrize(
    ("one", "given", "word"),
    [
        (configuration("length", most=450.0), {"length_m": 450.0}, "within"),
        (configuration("length", most=450.0), {"length_m": 450.1}, "outside"),
        (configuration("length", most=450.0), {}, "length_m"),
        (configuration("length", least=26.0), {"length_m": 25.0}, "outside"),
        (configuration("points_ends", most=4.0), {"points_ends": 4}, "within"),
        (configuration("insulated_joints", most=15.0), {"insulated_joints": 16}, "outside"),
        (configuration("parallel_bonded_length", most=50.0), {"longest_parallel_m": 51.0}, "outside"),
        (configuration("parallel_bonded_length", most=50.0), {}, "longest_parallel_m"),
        (configuration("parallel_bonded_length", most=50.0), {"bonding": Bonding.SERIES}, "within"),
        (configuration("bonds_duplicated", least=1.0), {"bonds_duplicated": False}, "outside"),
        (configuration("bonds_duplicated", least=1.0), {"bonds_duplicated": True}, "within"),
        (configuration("bonds_duplicated", least=1.0), {"bonding": Bonding.MIXED}, "bonds_duplicated"),
        (configuration("bonds_duplicated", least=1.0), {"bonding": Bonding.SERIES}, "within"),
        (configuration("interrupter", least=1.0), {}, "interrupter_required"),
        (configuration("interrupter", least=1.0), {"interrupter_required": False}, "within"),
        (configuration("interrupter", least=1.0), {"interrupter_required": True}, "interrupter_fitted"),
        (
            configuration("interrupter", least=1.0),
            {"interrupter_required": True, "interrupter_fitted": False},
            "outside",
        ),
        (
            configuration("interrupter", least=1.0),
            {"interrupter_required": True, "interrupter_fitted": True},
            "within",
        ),
        (configuration("circuit_kind_permitted", least=1.0), {}, "circuit_kind_permitted"),
    ],
)
def test_what_the_register_says(one: Limit, given: dict[str, Any], word: str) -> None:
    """A word of the verdict, or the attribute that is lacking."""
    verdict = Case(one, **given).verdict(None)
    if word in ("within", "outside"):
        assert (verdict.verdict, verdict.visit, verdict.comparison, verdict.reasons) == (word, None, None, ())
        assert verdict.measured == verdict.judged
    else:
        assert (verdict.verdict, codes(verdict)) == ("unproven", ["attribute_missing"])
        assert verdict.reasons[0].reason.endswith(word)


def test_whether_it_applies_comes_before_its_value() -> None:
    one = limit(quantity="length", test_points=(), applies=Applicability(sleepers=frozenset({Sleepers.WOOD})))
    assert Case(one, length_m=0.1).verdict(None).reasons[0].reason.endswith("sleepers")


def boundary(ours: str | None, theirs: str | None, neighbour: str | None = "TV115") -> Adjacent:
    return Adjacent("up", neighbour, Separation.JOINT, ours, theirs)


@pytest.mark.parametrize(
    ("adjacent", "word"),
    [
        (boundary("A", "B"), "within"),
        (boundary("A", "a "), "outside"),
        (boundary(None, "B"), "unproven"),
        (boundary("A", None), "unproven"),
        (Adjacent("up", "TV115", Separation.TUNED_ZONE, "1700 Hz", "1700 Hz"), "outside"),
    ],
)
def test_neighbours_are_opposed(adjacent: Adjacent, word: str) -> None:
    case = Case(configuration("adjacent_opposed", least=1.0), adjacent=(adjacent, boundary("A", None, None)))
    (verdict,) = case.judge().verdicts
    assert (verdict.test_point, verdict.verdict) == ("boundary:up", word)


PERMITTED = (
    combination("dc", "none"),
    combination("dc", "dc_third_rail", [2], clause="3.2", confirmed=False),
    combination("dc", "dc_overhead", [1]),
    combination("dc", "dc_overhead"),
)


def permitted(**given: Any) -> Status:
    return Case(configuration("length", most=1000.0), *PERMITTED, length_m=100.0, **given).judge()


@pytest.mark.parametrize(
    ("given", "word", "clause"),
    [
        ({}, "within", "3.1"),
        ({"traction": "dc_third_rail", "return_rails": 2}, "within", "3.2"),
        ({"traction": "dc_third_rail", "return_rails": 1}, "outside", "3.2"),
        ({"traction": "dc_third_rail"}, "unproven", "3.2"),
        ({"traction": "dc_overhead", "return_rails": None}, "within", "3.1"),
        ({"traction": "ac_overhead"}, "outside", "3.1; 3.2"),
    ],
)
def test_what_the_book_permits(given: dict[str, Any], word: str, clause: str) -> None:
    verdict = permitted(**given).verdicts[-1]
    assert (verdict.limit, verdict.verdict, verdict.clause) == ("circuit_kind_permitted", word, clause)
    assert verdict.confirmed is ("3.2" not in clause)


def test_no_combinations_permit_all() -> None:
    verdicts = Case(configuration("length", most=1000.0), length_m=100.0).judge().verdicts
    assert [verdict.limit for verdict in verdicts] == ["length"]


def test_a_combination_alone_shows_nothing() -> None:
    status = Case(combination("dc", "none")).judge()
    assert (status.compliance, [one.code for one in status.cautions]) == (
        Compliance.NOT_SHOWN,
        ["no_limit_applies"],
    )


def test_a_concession_on_configuration() -> None:
    case = Case(
        configuration("length", most=450.0), combination("dc", "none"), length_m=460.0, traction="dc_overhead"
    )
    case.concessions = (
        concession(limit="length", allowed_max=460.0),
        concession(concession="c2", limit="circuit_kind_permitted"),
    )
    assert [(one.verdict, one.concession) for one in case.judge().verdicts] == [
        ("outside", "c1"),
        ("outside", "c2"),
    ]
