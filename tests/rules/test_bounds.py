"""Where an interval lies against bounds: a table of every case, and what must hold of any."""

from __future__ import annotations

from decimal import Decimal
from math import inf

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.rules import bounds
from service.rules.bounds import OPEN, resolve, weigh, wrong_side
from service.rules.limits import Bound, Bounds
from service.rules.words import VerdictWord
from support.rule_cases import RIGHT, WRONG, limit

LEAST = Bounds(0.5, 0.6, None, None, WRONG, None)
MOST = Bounds(None, None, 0.4, 0.5, None, RIGHT)
BOTH = Bounds(1.0, 1.2, 2.7, 3.0, RIGHT, WRONG)


@pytest.mark.parametrize(
    ("low", "high", "against", "expected"),
    [
        (0.6, 0.7, LEAST, ("within", WRONG, 0.6, 0.1)),
        (0.5, 0.6, LEAST, ("near", WRONG, 0.5, 0.0)),
        (0.4, 0.5, LEAST, ("outside", WRONG, 0.4, -0.1)),
        (0.5, inf, LEAST, ("near", WRONG, 0.5, 0.0)),
        (0.4, inf, LEAST, ("unproven", WRONG, None, None)),
        (-inf, 0.5, LEAST, ("outside", WRONG, 0.5, 0.0)),
        (-inf, 0.51, LEAST, ("unproven", WRONG, None, None)),
        (0.3, 0.4, MOST, ("within", RIGHT, 0.4, 0.1)),
        (0.4, 0.5, MOST, ("near", RIGHT, 0.5, 0.0)),
        (0.5, 0.6, MOST, ("outside", RIGHT, 0.6, -0.1)),
        (-inf, 0.4, MOST, ("within", RIGHT, 0.4, 0.1)),
        (-inf, 0.51, MOST, ("unproven", RIGHT, None, None)),
        (0.5, inf, MOST, ("unproven", RIGHT, None, None)),
        (0.51, inf, MOST, ("outside", RIGHT, 0.51, -0.01)),
        (0.9, 0.9, BOTH, ("outside", RIGHT, 0.9, -0.1)),
        (3.1, 3.1, BOTH, ("outside", WRONG, 3.1, -0.1)),
        (1.1, 1.1, BOTH, ("near", RIGHT, 1.1, 0.1)),
        (2.9, 2.9, BOTH, ("near", WRONG, 2.9, 0.1)),
        (1.5, 1.5, BOTH, ("within", RIGHT, 1.5, 0.5)),
        (2.5, 2.5, BOTH, ("within", WRONG, 2.5, 0.5)),
        (2.0, 2.0, BOTH, ("within", RIGHT, 2.0, 1.0)),
        (1.5, inf, BOTH, ("unproven", WRONG, None, None)),
        (-inf, 1.5, BOTH, ("unproven", RIGHT, None, None)),
        (0.9, 3.2, BOTH, ("outside", WRONG, 3.2, -0.2)),
        (1.0, 1.0, OPEN, ("within", None, None, None)),
    ],
)
def test_each_bound_at_its_unfavourable_end(
    low: float, high: float, against: Bounds, expected: object
) -> None:
    assert weigh(low, high, against) == expected


def test_undecided_against_both_names_the_minimum() -> None:
    assert weigh(0.0, inf, Bounds(1.0, None, None, 2.0, RIGHT, WRONG)) == ("unproven", RIGHT, None, None)


def test_without_a_near_margin_all_inside_is_within() -> None:
    assert weigh(0.5, 0.5, Bounds(0.5, None, None, None, WRONG, None))[0] is VerdictWord.WITHIN
    assert weigh(0.5, 0.5, Bounds(None, None, None, 0.5, None, WRONG))[0] is VerdictWord.WITHIN


def test_relative_bounds_are_multiplied_and_near_margins_are_not() -> None:
    both = limit(minimum=Bound(1.25, RIGHT, 0.1), maximum=Bound(3.0, WRONG))
    assert resolve(both, 1.4) == Bounds(1.75, 1.85, None, 4.2, RIGHT, WRONG)
    assert resolve(both, None) == Bounds(1.25, 1.35, None, 3.0, RIGHT, WRONG)
    assert resolve(limit(minimum=None, maximum=Bound(3.0, WRONG, 0.1)), None)[2:4] == (2.9, 3.0)


def test_a_limit_forgets_bases_rather_than_keep_them_all(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(bounds, "KEPT", 3)
    one = limit()
    assert [resolve(one, float(base)).min for base in range(1, 9)] == [0.5 * base for base in range(1, 9)]
    assert len(one.resolved) <= 3


def test_only_wrong_side_bounds_are_left() -> None:
    assert wrong_side(BOTH)[:4] == (None, 1.2, 2.7, 3.0)
    assert wrong_side(MOST).max is None
    assert wrong_side(LEAST) is LEAST


cents = st.integers(0, 1000).map(lambda hundredths: hundredths / 100)


@given(cents, cents, cents)
def test_margins_and_near_are_decimal(value: float, bound: float, near: float) -> None:
    """Against the standard library's decimals, unrounded: binary arithmetic would move the near margin."""
    against = resolve(limit(minimum=Bound(bound, WRONG, near)), None)
    word, _, judged, margin = weigh(value, value, against)
    exact = Decimal(str(value)) - Decimal(str(bound))
    assert (judged, margin) == (value, float(exact))
    expected = "outside" if exact < 0 else "near" if exact < Decimal(str(near)) else "within"
    assert word == expected


@given(cents, cents, cents, cents)
def test_an_exact_value_is_never_undecided_and_a_wider_interval_never_better(
    low: float, width: float, least: float, span: float
) -> None:
    against = Bounds(least, None, None, least + span, RIGHT, WRONG)
    narrow, wide = weigh(low, low, against), weigh(low, low + width, against)
    assert narrow[0] is not VerdictWord.UNPROVEN
    assert wide[0].gravity <= narrow[0].gravity
