"""Canonical text: RFC 8785's own examples, and the library for whatever JSON there is."""

from __future__ import annotations

import json
import struct
from typing import Any

import pytest
import rfc8785
from hypothesis import given, settings
from hypothesis import strategies as st

from service.records.journal import canonical

# RFC 8785, appendix B: the bits of a double and the number that ECMAScript writes for it.
NUMBERS = {
    "0000000000000000": "0",
    "8000000000000000": "0",
    "0000000000000001": "5e-324",
    "8000000000000001": "-5e-324",
    "7fefffffffffffff": "1.7976931348623157e+308",
    "ffefffffffffffff": "-1.7976931348623157e+308",
    "4340000000000000": "9007199254740992",
    "c340000000000000": "-9007199254740992",
    "4430000000000000": "295147905179352830000",
    "44b52d02c7e14af5": "9.999999999999997e+22",
    "44b52d02c7e14af6": "1e+23",
    "44b52d02c7e14af7": "1.0000000000000001e+23",
    "444b1ae4d6e2ef4e": "999999999999999700000",
    "444b1ae4d6e2ef4f": "999999999999999900000",
    "444b1ae4d6e2ef50": "1e+21",
    "3eb0c6f7a0b5ed8c": "9.999999999999997e-7",
    "3eb0c6f7a0b5ed8d": "0.000001",
    "41b3de4355555553": "333333333.3333332",
    "41b3de4355555554": "333333333.33333325",
    "41b3de4355555555": "333333333.3333333",
    "41b3de4355555556": "333333333.3333334",
    "41b3de4355555557": "333333333.33333343",
    "becbf647612f3696": "-0.0000033333333333333333",
    "43143ff3c1cb0959": "1424953923781206.2",
}


@pytest.mark.parametrize(("bits", "expected"), NUMBERS.items())
def test_numbers_of_the_standard(bits: str, expected: str) -> None:
    (number,) = struct.unpack(">d", bytes.fromhex(bits))
    assert canonical(number) == expected
    assert canonical({"a": [number, 1]}) == f'{{"a":[{expected},1]}}'


def test_the_example_of_the_standard() -> None:
    """RFC 8785, 3.2.2 and 3.2.4."""
    value = {
        "numbers": [333333333.33333329, 1e30, 4.50, 2e-3, 0.000000000000000000000000001],
        "string": "\u20ac$\u000f\u000aA'\u0042\u0022\u005c\\\"/",
        "literals": [None, True, False],
    }
    assert canonical(value) == (
        '{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],'
        '"string":"€$\\u000f\\nA\'B\\"\\\\\\\\\\"/"}'
    )


def test_keys_in_the_order_of_the_standard() -> None:
    """RFC 8785, 3.2.3: by UTF-16 code units, so that a letter beyond the basic plane comes before U+FB33."""
    keys = ["\u20ac", "\r", "\ufb33", "1", "\U0001f600", "\u0080", "\u00f6"]
    assert list(json.loads(canonical(dict.fromkeys(keys, 0)))) == [
        "\r",
        "1",
        "\u0080",
        "\u00f6",
        "\u20ac",
        "\U0001f600",
        "\ufb33",
    ]


FLOATS = st.one_of(
    st.floats(allow_nan=False, allow_infinity=False),
    st.integers(-400, 400).map(lambda number: number / 2),
    st.builds(lambda digits, power: float(f"{digits}e{power}"), st.integers(0, 10**17), st.integers(-25, 10)),
)
TEXTS = st.one_of(
    st.text(st.characters(codec="utf-8")),
    st.text(st.sampled_from('0123456789.eE-+:,["\\ \u2028\ufb33\U0001f600')),
)
JSON = st.recursive(
    st.one_of(st.none(), st.booleans(), st.integers(-(2**53) + 1, 2**53 - 1), FLOATS, TEXTS),
    lambda inner: st.lists(inner) | st.dictionaries(TEXTS, inner),
)


@settings(max_examples=200, deadline=None)
@given(JSON)
def test_as_the_library_writes_it(value: Any) -> None:
    assert canonical(value).encode() == rfc8785.dumps(value)


@pytest.mark.slow
@settings(max_examples=2_000, deadline=None)
@given(JSON)
def test_as_the_library_writes_it_longer(value: Any) -> None:
    assert canonical(value).encode() == rfc8785.dumps(value)


@settings(max_examples=200, deadline=None)
@given(JSON)
def test_written_again_it_is_the_same(value: Any) -> None:
    """Read as ECMAScript reads it, where every number is a double."""
    assert canonical(json.loads(canonical(value), parse_int=float)) == canonical(value)


IMPOSSIBLE = [float("nan"), float("inf"), 2**53, -(2**53), "\ud800", {"a": ["\udfff"]}, {"\ud800": 1}]


@pytest.mark.parametrize("value", IMPOSSIBLE, ids=repr)
@pytest.mark.parametrize("nested", [False, True])
def test_what_has_no_canonical_form_is_refused(value: Any, nested: bool) -> None:
    with pytest.raises((ValueError, UnicodeError)):
        canonical([value] if nested else value)
