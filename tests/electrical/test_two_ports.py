"""Two-ports and the uniform line: conservation, reciprocity, limits."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.electrical.chain import TwoPort, cascade, series, shunt, transformer
from service.electrical.line import UniformLine, sinhc, uniform_line
from service.errors import NoAnswerError, NonPhysicalError
from support.electrical import ballasts

ohms = st.builds(complex, st.floats(0.001, 50), st.floats(-30, 30))
elements = st.one_of(
    ohms.map(series),
    ohms.map(shunt),
    st.floats(0.05, 20).map(transformer),
    st.builds(
        uniform_line, st.floats(0, 3000), st.builds(complex, st.floats(0, 1), st.floats(0, 2)), ballasts()
    ),
)


def determinant(two_port: TwoPort) -> complex:
    return complex(two_port.a * two_port.d - two_port.b * two_port.c)


def size(two_port: TwoPort) -> float:
    return abs(complex(two_port.a * two_port.d)) + abs(complex(two_port.b * two_port.c))


@given(st.lists(elements, max_size=6))
def test_every_cascade_is_reciprocal(parts: list[TwoPort]) -> None:
    """AD - BC = 1, which is reciprocity in chain form."""
    whole = cascade(*parts)
    scale = math.prod(size(part) for part in parts) + size(whole)
    assert determinant(whole) == pytest.approx(1, abs=1e-13 * scale)


@given(st.lists(elements, min_size=1, max_size=4), ohms)
def test_a_reciprocal_chain_carries_the_same_both_ways(parts: list[TwoPort], load: complex) -> None:
    """Current into a load for one volt behind it at the other end is the same from either side."""
    whole = cascade(*parts)
    there = 1 / (whole.a * load + whole.b + load * (whole.c * load + whole.d))
    turned = TwoPort(whole.d, whole.b, whole.c, whole.a)
    back = 1 / (turned.a * load + turned.b + load * (turned.c * load + turned.d))
    assert complex(there) == pytest.approx(complex(back), rel=1e-9)


@given(st.floats(0, 1), st.floats(1, 2000), st.builds(complex, st.floats(0, 1), st.floats(0, 2)), ballasts())
def test_a_line_is_the_sum_of_its_parts(share: float, length_m: float, loop: complex, ballast: float) -> None:
    km = length_m / 1000
    line = UniformLine.of(np.asarray(loop * km), np.asarray(km / ballast))
    both, whole = line.part(share) @ line.part(1 - share), line.part(1.0)
    for name in ("a", "b", "c", "d"):
        assert complex(getattr(both, name)) == pytest.approx(
            complex(getattr(whole, name)), rel=1e-9, abs=1e-12
        )


@given(st.floats(100, 2000), st.builds(complex, st.floats(0.01, 1), st.floats(0.01, 2)), st.floats(0.5, 60))
def test_the_textbook_form(length_m: float, loop: complex, ballast: float) -> None:
    """B = Zc sinh gl and C = sinh gl/Zc where Zc is finite."""
    angle, surge = cmath.sqrt(loop / ballast) * length_m / 1000, cmath.sqrt(loop * ballast)
    line = uniform_line(length_m, loop, ballast)
    assert complex(line.a) == pytest.approx(cmath.cosh(angle), rel=1e-12)
    assert complex(line.b) == pytest.approx(surge * cmath.sinh(angle), rel=1e-12)
    assert complex(line.c) == pytest.approx(cmath.sinh(angle) / surge, rel=1e-12)


def test_limits_of_the_line() -> None:
    bare = uniform_line(500.0, 0.4, math.inf)
    assert [float(x) for x in (bare.a, bare.b, bare.c)] == [1.0, 0.2, 0.0]
    lossless = uniform_line(500.0, 0.0, 2.0)
    assert [float(x) for x in (lossless.a, lossless.b, lossless.c)] == [1.0, 0.0, 0.25]
    nothing = uniform_line(0.0, 0.4, 2.0)
    assert [float(x) for x in (nothing.a, nothing.b, nothing.c)] == [1.0, 0.0, 0.0]


def test_next_to_nothing_is_exact() -> None:
    """Ballast of 1e12 ohm·km differs from none by what it leaks and no more."""
    line = uniform_line(1000.0, 0.4, 1e12)
    assert float(line.b) == pytest.approx(0.4, rel=1e-12)
    assert float(line.c) == pytest.approx(1e-12, rel=1e-12)
    assert float(sinhc(np.asarray(0.0))) == 1.0
    assert complex(sinhc(np.asarray(0.3 + 0.4j))) == pytest.approx(cmath.sinh(0.3 + 0.4j) / (0.3 + 0.4j))


def test_arrays_broadcast() -> None:
    line = uniform_line(np.array([100.0, 200.0])[:, np.newaxis], 0.3, np.array([2.0, math.inf, 5.0]))
    assert line.b.shape == (2, 3)
    assert float(line.c[1, 1]) == 0.0


def test_a_line_on_which_nothing_arrives() -> None:
    with pytest.raises(NoAnswerError) as caught:
        uniform_line(1e6, 100.0, 1e-3)
    assert caught.value.code == "line_too_long"


def test_a_source_through_a_transformer() -> None:
    emf, ohm = cascade(transformer(10.0), series(0.5)).thevenin(np.asarray(100.0), np.asarray(20.0))
    assert (float(emf), float(ohm)) == pytest.approx((10.0, 0.7))
    load = cascade(series(0.5), transformer(0.1)).input_ohm(np.asarray(200.0))
    assert float(load) == pytest.approx(2.5)


def test_degenerate_ends() -> None:
    capacitor, coil = -10j, 10j
    with pytest.raises(NoAnswerError) as caught:
        shunt(coil).input_ohm(np.asarray(capacitor))
    assert caught.value.code == "degenerate"
    with pytest.raises(NoAnswerError):
        shunt(coil).thevenin(np.asarray(1.0), np.asarray(capacitor))


@pytest.mark.parametrize(
    ("make", "value", "field"),
    [
        (series, -1.0, "ohm"),
        (series, math.nan, "ohm"),
        (series, math.inf, "ohm"),
        (shunt, 0.0, "ohm"),
        (shunt, -1.0 + 2j, "ohm"),
        (transformer, 0.0, "turns_ratio"),
        (transformer, math.inf, "turns_ratio"),
        (transformer, np.array([1.0, -2.0]), "turns_ratio"),
    ],
)
def test_what_no_element_has_is_refused(make: object, value: object, field: str) -> None:
    with pytest.raises(NonPhysicalError) as caught:
        make(value)  # type: ignore[operator]
    assert caught.value.field == (field,)
