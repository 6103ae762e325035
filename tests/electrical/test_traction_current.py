"""Rail balance and interference: by hand, against a ladder, and the limits that follow."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.electrical.circuit import Feed, Line, PlainCircuit
from service.electrical.relay import Relay
from service.electrical.traction import (
    Train,
    interference,
    largest_current,
    longest_immune,
    rail_balance,
)
from service.errors import NoAnswerError, NonPhysicalError

RAILS = Line(450.0, 0.5 + 0.6j, 4.0)
CIRCUIT = PlainCircuit(50.0, Feed(1.0, 3.0 + 1.0j), RAILS, Relay(9.0 + 90.0j, 120.0, 1.4, 0.95))


def test_balance_by_hand() -> None:
    found = rail_balance(0.030, 0.020, 10.0, 0.05, 8.0, 400.0)
    assert [float(x) for x in (found.rail_1_a, found.rail_2_a)] == pytest.approx([60.0, 40.0])
    assert float(found.difference_a) == pytest.approx(20.0)
    assert (float(found.of_total), float(found.of_mean)) == pytest.approx((0.2, 0.4))
    assert float(found.ampere_turns) == pytest.approx(80.0)
    assert float(found.saturation_margin) == pytest.approx(0.8)
    swapped = rail_balance(0.020, 0.030, 10.0, 0.05, 8.0, 10.0)
    assert float(swapped.difference_a) == pytest.approx(-20.0)
    assert float(swapped.saturation_margin) < 0


def test_balance_of_no_current_is_told() -> None:
    with pytest.raises(NoAnswerError) as caught:
        rail_balance(0.0, 0.0, 10.0, 0.05, 8.0, 400.0)
    assert caught.value.code == "degenerate"


@pytest.mark.parametrize(
    "values",
    [
        (-0.01, 0.02, 10.0, 0.05, 8.0, 400.0),
        (0.01, math.nan, 10.0, 0.05, 8.0, 400.0),
        (0.01, 0.02, 0.0, 0.05, 8.0, 400.0),
        (0.01, 0.02, 10.0, 0.0, 8.0, 400.0),
        (0.01, 0.02, 10.0, 0.05, 0.0, 400.0),
        (0.01, 0.02, 10.0, 0.05, 8.0, -1.0),
    ],
)
def test_balance_refuses_what_cannot_be(values: tuple[float, ...]) -> None:
    with pytest.raises(NonPhysicalError):
        rail_balance(*values)


def laddered(
    circuit: PlainCircuit, series_v: complex, feed_ohm: complex, relay_ohm: complex, n: int
) -> complex:
    """Relay-end rail voltage by solving n sections, each with its share of the series voltage."""
    km = float(circuit.line.length_m) / 1000
    z, y = complex(circuit.line.loop_ohm_per_km) * km / n, km / float(circuit.line.ballast_ohm_km) / n
    matrix = np.zeros((n + 1, n + 1), dtype=complex)
    right = np.zeros(n + 1, dtype=complex)
    for at in range(n + 1):
        matrix[at, at] += y if 0 < at < n else y / 2
    matrix[0, 0] += 1 / feed_ohm
    matrix[n, n] += 1 / relay_ohm
    for at in range(n):
        matrix[at : at + 2, at : at + 2] += np.array([[1, -1], [-1, 1]]) / z
        right[at] -= series_v / n / z
        right[at + 1] += series_v / n / z
    return complex(np.linalg.solve(matrix, right)[n])


@pytest.mark.parametrize("train", ["none", "feed_end", "relay_end"])
def test_interference_against_a_ladder(train: Train) -> None:
    current, rail, axle = 300.0, 0.2 + 0.3j, 0.05
    feed, relay = 3.0 + 1.0j, 129.0 + 90.0j
    if train == "feed_end":
        feed = feed * axle / (feed + axle)
    if train == "relay_end":
        relay = relay * axle / (relay + axle)
    expected = laddered(CIRCUIT, current * rail * 0.45, feed, relay, 800) * (9.0 + 90.0j) / (129.0 + 90.0j)
    found = complex(interference(CIRCUIT, current, rail, train, axle))
    assert found == pytest.approx(expected, rel=1e-5)


def test_a_train_at_the_feed_end_is_the_worse() -> None:
    volts = {
        train: abs(complex(interference(CIRCUIT, 300.0, 0.36, train, 0.025)))
        for train in ("none", "feed_end", "relay_end")
    }
    assert volts["feed_end"] > volts["none"] > volts["relay_end"]


def test_dc_stray_on_a_dc_circuit() -> None:
    """Infinite ballast, by hand: U Rr/(Rf + Rl + Rr)."""
    circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, math.inf), Relay(20.0, 0.0, 1.62, 1.10))
    found = float(interference(circuit, 50.0, 0.0289, "none", 1.0).real)
    assert found == pytest.approx(50.0 * 0.0289 * 20.0 / 27.2578)


@given(st.floats(0.1, 2000))
def test_the_largest_current_is_at_the_limit(limit_v: float) -> None:
    current = float(largest_current(CIRCUIT, 0.36, "feed_end", 0.025, limit_v))
    assert abs(complex(interference(CIRCUIT, current, 0.36, "feed_end", 0.025))) == pytest.approx(limit_v)


def test_without_rail_impedance_no_current_is_the_largest() -> None:
    with pytest.raises(NoAnswerError) as caught:
        largest_current(CIRCUIT, 0.0, "none", 0.025, 50.0)
    assert caught.value.code == "degenerate"


def test_the_longest_is_at_the_limit() -> None:
    found = longest_immune(CIRCUIT, 300.0, 0.36, "feed_end", 0.025, 20.0, 2000.0)
    at = replace(CIRCUIT, line=replace(RAILS, length_m=found))
    assert abs(complex(interference(at, 300.0, 0.36, "feed_end", 0.025))) == pytest.approx(20.0, rel=1e-9)
    assert longest_immune(CIRCUIT, 1.0, 0.36, "feed_end", 0.025, 20.0, 2000.0) == 2000.0


def test_over_the_limit_however_short() -> None:
    with pytest.raises(NoAnswerError) as caught:
        longest_immune(CIRCUIT, 3e6, 0.36, "feed_end", 0.025, 1.0, 2000.0)
    assert caught.value.code == "no_length"


def test_a_broken_return_bond_doubles_what_one_rail_carries() -> None:
    """Single rail, its return shared with another track until the bond that shares it breaks."""
    whole, half = (abs(complex(interference(CIRCUIT, a, 0.36, "none", 1.0))) for a in (300.0, 150.0))
    assert whole == pytest.approx(2 * half)


@pytest.mark.parametrize(("rail", "axle"), [(-0.1, 0.05), (0.1, 0.0), (math.nan, 0.05)])
def test_interference_refuses_what_cannot_be(rail: float, axle: float) -> None:
    with pytest.raises(NonPhysicalError):
        interference(CIRCUIT, 300.0, rail, "none", axle)
