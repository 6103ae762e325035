"""Values far outside any depot: an answer or a told error, never a warning and never NaN."""

from __future__ import annotations

import math

import numpy as np
from hypothesis import event, given, settings
from hypothesis import strategies as st

from service.electrical.circuit import Feed, Line, PlainCircuit, Shunt, operating_point
from service.electrical.layout import LayoutFeed, LayoutRelay, Leg
from service.electrical.network import Leakage, network
from service.electrical.relay import Relay
from service.electrical.shunt import residual_voltage, shunt_limits
from service.errors import NoAnswerError
from support.electrical import plain_line

sizes = st.floats(-9, 9).map(lambda exponent: 10.0**exponent)
nothing_or = st.one_of(st.just(0.0), sizes)


@st.composite
def extremes(draw: st.DrawFn) -> PlainCircuit:
    ac = draw(st.booleans())

    def ohm(low: st.SearchStrategy[float]) -> complex:
        return complex(draw(low), draw(nothing_or) * draw(st.sampled_from([-1, 1])) if ac else 0.0)

    pick_up_v = draw(sizes)
    return PlainCircuit(
        50.0 if ac else 0.0,
        Feed(draw(sizes), ohm(nothing_or)),
        Line(draw(sizes), ohm(nothing_or), draw(st.one_of(sizes, st.just(math.inf)))),
        Relay(ohm(sizes), draw(nothing_or), pick_up_v, pick_up_v * draw(st.floats(0.01, 1.0))),
    )


@settings(max_examples=400)
@given(extremes(), st.floats(0, 1), nothing_or)
def test_an_answer_or_a_told_error(circuit: PlainCircuit, share: float, ohm: float) -> None:
    position_m = share * circuit.line.length_m
    try:
        point = operating_point(circuit, Shunt(position_m, ohm))
        limits = shunt_limits(circuit)
        left = residual_voltage(circuit, position_m, ohm)
    except NoAnswerError as error:
        event(f"told: {error.code}")
        return
    for value in (point.relay_v, point.feed_current_a, point.feed_end_rail_v, left, limits.relay_clear_v):
        assert np.isfinite(value).all()
    for found in (limits.drop_shunt_ohm, limits.pick_up_shunt_ohm):
        for ohms in (found.feed_end, found.middle, found.relay_end, found.worst.ohm, found.worst.position_m):
            assert not np.isnan(ohms).any()
            assert (ohms >= 0).all()


@settings(max_examples=100)
@given(sizes, nothing_or, nothing_or, st.floats(-3, 5), sizes, sizes)
def test_a_layout_answers_or_says_why_not(
    loop: float, g: float, e: float, length: float, feed: float, relay: float
) -> None:
    layout = plain_line(
        loop_ohm_per_km=loop,
        legs=(Leg("a", ("f1", "f2"), ("r1", "r2"), 10.0**length * 1.001),),
        feed=LayoutFeed(("f1", "f2"), 10.0, feed),
        relay=LayoutRelay(("r1", "r2"), relay, 1.62, 1.10),
    )
    try:
        solved = network(layout, Leakage(np.array([g]), np.array([e])))
    except NoAnswerError as error:
        event(f"told: {error.code}")
        return
    leg = layout.legs[0]
    places = np.array([0.0, leg.length_m / 3, leg.length_m])
    for volts in (solved.relay_v(), solved.broken_v(leg, 0, places), solved.shunted_v(leg, places, 0.5)):
        assert np.isfinite(volts).all()
