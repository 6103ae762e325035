"""Units and words: decimal conversion, and the orders that words carry."""

from __future__ import annotations

from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.rules.quantities import QUANTITIES, UNITS, base_unit, difference, exact, product, to_base, total
from service.rules.words import Ballast, VerdictWord

finite = st.floats(-1e6, 1e6)


def test_every_quantity_has_a_base_unit() -> None:
    for quantity in QUANTITIES.values():
        assert base_unit(quantity.unit) == quantity.unit
        assert quantity.lowest < quantity.highest


@pytest.mark.parametrize(
    ("value", "unit", "base"),
    [
        (700, "mOhm", 0.7),
        (0.1, "mV", 0.0001),
        (500, "kOhm", 500000.0),
        (0.2, "MOhm", 200000.0),
        (-3, "mV", -0.003),
        (50, "Hz", 50.0),
    ],
)
def test_conversion_is_decimal(value: float, unit: str, base: float) -> None:
    assert to_base(value, unit) == base


def test_an_unknown_unit_is_an_error() -> None:
    with pytest.raises(KeyError):
        to_base(1.0, "ohm")
    with pytest.raises(KeyError):
        base_unit("feet")


@given(finite, finite)
def test_sums_are_rounded_once(a: float, b: float) -> None:
    assert difference(a, b) == float(exact(a) - exact(b))
    assert total(a, b) == float(exact(a) + exact(b))
    assert product(a, b) == float(exact(a) * exact(b))


@given(finite, st.sampled_from(sorted(UNITS)))
def test_a_unit_changes_no_more_than_the_point(value: float, unit: str) -> None:
    assert to_base(value, unit) == float(Decimal(repr(value)) * UNITS[unit][1])


def test_the_driest_to_the_wettest() -> None:
    """Design, section 5: frozen and dry are driest, then damp, wet, flooded."""
    assert [ballast.wetness for ballast in Ballast] == [0, 0, 1, 2, 3]


def test_the_gravest_to_the_best() -> None:
    assert [word.gravity for word in VerdictWord] == [0, 1, 2, 3, 4]
