"""The unit traps of the trade, as far as the electrical models can fall into them."""

from __future__ import annotations

import math

import numpy as np
import pytest

from service.electrical.circuit import Feed, Line, PlainCircuit, operating_point
from service.electrical.layout import Layout, LayoutFeed, LayoutRelay, Leg
from service.electrical.line import uniform_line
from service.electrical.network import Leakage, network
from service.electrical.relay import Relay
from service.electrical.shunt import residual_voltage, shunt_limits


def test_ballast_is_ohm_kilometre() -> None:
    """2 ohm·km over 0.5 km is 4 ohm in total, not 1 (an institution's 2010 exam discussion, read)."""
    leak = uniform_line(500.0, 0.0, 2.0).c
    assert 1 / float(leak) == pytest.approx(4.0, rel=1e-12)


@pytest.mark.parametrize(("ohm_kft", "ohm_km"), [(2.0, 0.610), (5.0, 1.524), (10.0, 3.048)])
def test_ohm_for_a_thousand_feet(ohm_kft: float, ohm_km: float) -> None:
    """1 ohm·(1000 ft) = 0.3048 ohm·km (computed): the same track leaks the same, however it is told."""
    feet = 3000.0
    leak = float(uniform_line(feet * 0.3048, 0.0, ohm_km).c)
    assert leak == pytest.approx(feet / 1000 / ohm_kft, rel=1e-3)


def test_loop_is_both_rails() -> None:
    """0.0289 ohm/km a rail is 0.0578 ohm/km of loop where both rails carry the signal current."""
    rail = 0.0289
    circuit = PlainCircuit(
        0.0, Feed(10.0, 7.2), Line(1000.0, 2 * rail, math.inf), Relay(20.0, 0.0, 1.62, 1.1)
    )
    point = operating_point(circuit)
    lost = float((point.feed_end_rail_v - point.relay_end_rail_v).real)
    assert lost == pytest.approx(2 * rail * float(point.feed_current_a.real), rel=1e-12)


def test_leakages_to_earth_act_in_series() -> None:
    """g = y1 y2/(y1 + y2): two equal ones leave half from rail to rail."""
    layout = Layout(
        frequency_hz=0.0,
        loop_ohm_per_km=0.0578,
        ballast_ohm_km=math.inf,
        rail_to_earth_ohm_km=5.0,
        legs=(Leg("a", ("f1", "f2"), ("r1", "r2"), 1000.0),),
        bonds=(),
        joints=(),
        feed=LayoutFeed(("f1", "f2"), 10.0, 7.2),
        relay=LayoutRelay(("r1", "r2"), 20.0, 1.62, 1.10),
    )
    through_earth = network(layout, Leakage(np.array([0.0]), np.array([0.2]))).relay_v()[0]
    circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 10.0), Relay(20.0, 0.0, 1.62, 1.1))
    assert float(through_earth) == pytest.approx(float(operating_point(circuit).relay_v.real), rel=1e-9)


def test_drop_shunt_is_the_largest_that_releases() -> None:
    """IEC 60050, 821-03-30 (read): less still releases, more does not."""
    circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 10.0), Relay(20.0, 0.0, 1.62, 1.1))
    drop = float(shunt_limits(circuit).drop_shunt_ohm.relay_end)
    less, more = residual_voltage(circuit, 1000.0, np.array([0.99, 1.01]) * drop).real
    assert less < 1.1 < more
