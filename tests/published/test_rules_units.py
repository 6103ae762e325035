"""Unit traps and the sense of words, as the rules have them. Sources beside each."""

from __future__ import annotations

from math import inf

import pytest

from service.rules.bounds import resolve, weigh
from service.rules.limits import Bound
from service.rules.quantities import QUANTITIES, UNITS, to_base
from service.rules.readings import interval
from service.rules.words import VerdictWord
from support.rule_cases import WRONG, limit, reading


def test_ballast_is_a_product_not_a_quotient() -> None:
    """An institution's 2010 exam discussion (read): what handbooks print "ohm per km" is Ω·km."""
    assert QUANTITIES["ballast_resistance"].unit == "Ohm.km"
    assert not [code for code in UNITS if "/" in code]


@pytest.mark.parametrize(
    ("code", "one_base"),
    [("mOhm", 1e-3), ("kOhm", 1e3), ("MOhm", 1e6), ("mV", 1e-3), ("mA", 1e-3)],
)
def test_prefixes(code: str, one_base: float) -> None:
    """SI prefixes as UCUM codes them: m is milli and M is mega, a factor of 10⁹ apart (UCUM, from memory)."""
    assert to_base(1, code) == one_base


def test_drop_shunt_is_the_largest_that_releases() -> None:
    """IEC 60050, 821-03-30 (read): the largest resistance that still releases.

    So what released on this step and not on the next lies from this step up, and a limit is a minimum.
    """
    low, high, *_ = interval(reading("v", 0.5), 0.1)
    assert (low, high) == (0.5, 0.6)
    bounds = resolve(limit(minimum=Bound(0.5, WRONG)), None)
    assert weigh(0.5, inf, bounds)[0] is VerdictWord.WITHIN
    assert weigh(-inf, 0.5, bounds)[0] is VerdictWord.OUTSIDE


@pytest.mark.parametrize(("released_on", "word"), [(0.06, VerdictWord.WITHIN), (0.05, VerdictWord.OUTSIDE)])
def test_236_56_a_fixed_shunt(released_on: float, word: VerdictWord) -> None:
    """49 CFR 236.56 (0.06 Ω, from memory): to release on 0.06 Ω is enough, on 0.05 Ω alone is not."""
    bounds = resolve(limit(minimum=Bound(0.06, WRONG)), None)
    assert weigh(released_on, released_on, bounds)[0] is word


@pytest.mark.parametrize("unit", ["Ohm", "mOhm"])
def test_17_3_1_f_half_an_ohm_in_either_unit(unit: str) -> None:
    """Indian Railways Signal Engineering Manual, 2021, 17.3.1(f) (read): 0.5 Ω. On the bound is inside."""
    value = to_base(0.5 if unit == "Ohm" else 500, unit)
    assert weigh(value, value, resolve(limit(minimum=Bound(0.5, WRONG)), None))[0] is VerdictWord.WITHIN
