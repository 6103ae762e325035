"""Layouts: against the plain circuit, breaks and shunts against built ones, what is refused."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service.electrical.circuit import Feed, Line, PlainCircuit, operating_point
from service.electrical.layout import (
    Bond,
    Joint,
    Layout,
    LayoutFeed,
    LayoutRelay,
    Leg,
    check_connected,
    with_break,
    with_short,
    without_bond,
)
from service.electrical.network import Leakage, network
from service.electrical.relay import Relay
from service.electrical.shunt import residual_voltage
from service.errors import NoAnswerError, NonPhysicalError
from support.electrical import plain_line, points

# None, through the ballast, through earth, both.
LEAKAGE = Leakage(np.array([0.0, 0.1, 0.0, 0.1]), np.array([0.0, 0.0, 0.2, 0.3]))
RAIL_TO_RAIL = [math.inf, 10.0, 10.0, 4.0]


def ac_line() -> Layout:
    return plain_line(
        frequency_hz=50.0,
        loop_ohm_per_km=0.31 + 0.39j,
        feed=LayoutFeed(("f1", "f2"), 6.0, 1.5 + 0.5j),
        relay=LayoutRelay(("r1", "r2"), 4.0 + 3.0j, 1.0, 0.6),
    )


@pytest.mark.parametrize("layout", [plain_line(), ac_line()])
def test_one_leg_is_the_plain_circuit(layout: Layout) -> None:
    """Two rails to earth act as half of either from rail to rail, beside the ballast."""
    solved = network(layout, LEAKAGE)
    feed, relay = layout.feed, layout.relay
    circuit = PlainCircuit(
        layout.frequency_hz,
        Feed(feed.emf_v, feed.series_ohm),
        Line(1000.0, layout.loop_ohm_per_km, np.array(RAIL_TO_RAIL)),
        Relay(relay.impedance_ohm, 0.0, relay.pick_up_v, relay.drop_away_v),
    )
    assert solved.relay_v() == pytest.approx(operating_point(circuit).relay_v, rel=1e-8)
    places = np.array([0.0, 250.0, 999.0, 1000.0])
    shunted = residual_voltage(
        replace(circuit, line=replace(circuit.line, ballast_ohm_km=np.array(RAIL_TO_RAIL)[:, np.newaxis])),
        places,
        0.3,
    )
    assert solved.shunted_v(layout.legs[0], places, 0.3) == pytest.approx(shunted, rel=1e-8)


def test_a_chain_of_legs_is_one_leg() -> None:
    whole = plain_line()
    parts = replace(
        whole,
        legs=(
            Leg("a", ("f1", "f2"), ("m1", "m2"), 300.0),
            Leg("b", ("r1", "r2"), ("m1", "m2"), 700.0),  # laid the other way round
        ),
    )
    assert network(parts, LEAKAGE).relay_v() == pytest.approx(network(whole, LEAKAGE).relay_v(), rel=1e-8)


legs = st.sampled_from([0, 1, 2])
shares = st.one_of(st.floats(0.001, 0.999), st.sampled_from([0.0, 1.0]))


@settings(max_examples=40)
@given(legs, st.sampled_from([0, 1]), shares, st.booleans(), st.booleans())
def test_a_break_in_closed_form_is_the_break_built(
    at: int, rail: int, share: float, series: bool, ac: bool
) -> None:
    """The gap by compensation, against a network with the rail cut in two, both ends of the leg included."""
    layout = points(series=series)
    if ac:
        layout = replace(layout, frequency_hz=50.0, loop_ohm_per_km=0.3 + 0.6j)
    leg = layout.legs[at]
    position_m = share * leg.length_m
    leakage = Leakage(LEAKAGE.rail_to_rail[1:], LEAKAGE.rail_to_earth[1:])
    closed = network(layout, leakage).broken_v(leg, rail, np.array([position_m]))[:, 0]
    built = network(with_break(layout, leg, rail, position_m), leakage).relay_v()
    assert np.abs(closed - built).max() < 1e-6 * layout.feed.emf_v


@settings(max_examples=30)
@given(legs, shares, st.floats(0, 2), st.booleans())
def test_a_shunt_in_closed_form_is_the_shunt_built(at: int, share: float, ohm: float, series: bool) -> None:
    """Against a bond across a leg cut into two legs there."""
    layout = points(series=series)
    leg = layout.legs[at]
    position_m = share * leg.length_m
    closed = network(layout, LEAKAGE).shunted_v(leg, np.array([position_m]), ohm + 0.01)[:, 0]
    if 0 < position_m < leg.length_m:
        near = replace(leg, end=("x1", "x2"), length_m=position_m)
        far = replace(leg, name="far", start=("x1", "x2"), length_m=leg.length_m - position_m)
        across = ("x1", "x2")
        cut = [near, far]
    else:
        across = leg.start if position_m == 0 else leg.end
        cut = [leg]
    built = replace(
        layout,
        legs=(*(other for other in layout.legs if other != leg), *cut),
        bonds=(*layout.bonds, Bond("shunt", across, ohm + 0.01)),
    )
    assert closed == pytest.approx(network(built, LEAKAGE).relay_v(), abs=1e-8)


def test_a_break_of_a_stub_without_leakage_changes_nothing() -> None:
    """Parallel leg, infinite ballast: no current in it, open or not."""
    layout = points(series=False)
    solved = network(layout, Leakage(np.array([0.0]), np.array([0.0])))
    volts = solved.broken_v(layout.legs[2], 0, np.linspace(0.0, 40.0, 9))
    assert volts == pytest.approx(np.full((1, 9), solved.relay_v()[0]))


def test_a_relay_cut_off_has_nothing_at_all() -> None:
    layout = without_bond(points(series=True), "k1")
    assert network(layout, LEAKAGE).relay_v()[:2] == pytest.approx([0.0, 0.0], abs=1e-9)


def test_a_shorted_joint_makes_one_of_its_terminals() -> None:
    layout = points(series=True)
    shorted = with_short(layout, layout.joints[0])
    assert all("g2" not in (*leg.start, *leg.end) for leg in shorted.legs)
    dry = Leakage(np.array([0.0]), np.array([0.0]))
    assert abs(network(shorted, dry).relay_v()[0]) < 0.01 * abs(network(layout, dry).relay_v()[0])


def test_leakage_too_great_for_the_leg_is_told() -> None:
    with pytest.raises(NoAnswerError) as caught:
        network(plain_line(), Leakage(np.array([1e9]), np.array([0.0])))
    assert caught.value.code == "line_too_long"


def test_a_resonance_without_loss_is_told() -> None:
    """A coil of a relay across a capacitor of a feed, with nothing else to limit the current."""
    layout = plain_line(
        frequency_hz=50.0,
        loop_ohm_per_km=1j,
        feed=LayoutFeed(("f1", "f2"), 10.0, -2j),
        relay=LayoutRelay(("r1", "r2"), 1j, 1.0, 0.5),
    )
    with pytest.raises(NoAnswerError) as caught:
        network(layout, Leakage(np.array([0.0]), np.array([0.0])))
    assert caught.value.code == "degenerate"


BAD = [
    ({"frequency_hz": -1.0}, ("frequency_hz",), "not negative"),
    ({"loop_ohm_per_km": 0.0}, ("loop_ohm_per_km",), "greater than zero"),
    ({"loop_ohm_per_km": 0.1 + 0.2j}, ("loop_ohm_per_km",), "0 Hz"),
    ({"ballast_ohm_km": 0.0}, ("ballast_ohm_km",), "greater than zero"),
    ({"rail_to_earth_ohm_km": -5.0}, ("rail_to_earth_ohm_km",), "greater than zero"),
    ({"feed": LayoutFeed(("a1", "a2"), 0.0, 1.5)}, ("feed", "emf_v"), "greater than zero"),
    ({"feed": LayoutFeed(("a1", "a2"), 3.0, 0.0)}, ("feed", "series_ohm"), "greater than zero"),
    (
        {"relay": LayoutRelay(("d1", "d2"), -9.0, 1.4, 0.95)},
        ("relay", "impedance_ohm"),
        "negative resistance",
    ),
    ({"relay": LayoutRelay(("d1", "d2"), 9.0, 0.0, 0.95)}, ("relay", "pick_up_v"), "greater than zero"),
    ({"relay": LayoutRelay(("d1", "d2"), 9.0, 1.4, 0.0)}, ("relay", "drop_away_v"), "greater than zero"),
    ({"relay": LayoutRelay(("d1", "d2"), 9.0, 1.4, 1.5)}, ("relay", "drop_away_v"), "over its pick-up"),
    ({"legs": (Leg("a", ("a1", "a2"), ("b1", "b2"), 0.0),)}, ("legs", 0, "length_m"), "greater than zero"),
    ({"legs": (Leg("a", ("a1", "a2"), ("b1", "b2"), 1e-6),)}, ("legs", 0, "length_m"), "millimetre"),
    ({"bonds": (Bond("k", ("b1", "c1"), 0.0),)}, ("bonds", 0, "resistance_ohm"), "greater than zero"),
]


@pytest.mark.parametrize(("changes", "field", "words"), BAD)
def test_what_no_layout_has_is_refused(
    changes: dict[str, object], field: tuple[object, ...], words: str
) -> None:
    with pytest.raises(NonPhysicalError) as caught:
        points(series=True, **changes)
    assert caught.value.field == field
    assert words in caught.value.reason


def broken_up(**changes: object) -> Layout:
    return points(series=True, **changes)


def with_bond(between: tuple[str, str], name: str = "wrong") -> Layout:
    sound = points(series=True)
    return replace(sound, bonds=(*sound.bonds, Bond(name, between, 0.0015)))


STRAY = Leg("stray", ("s1", "s2"), ("t1", "t2"), 30.0)
DISCONNECTED = [
    (broken_up(legs=()), ("legs",), "at least one leg"),
    (broken_up(legs=points(series=True).legs + points(series=True).legs[:1]), ("legs",), "'a' is used twice"),
    (broken_up(joints=(Joint("j", ("x", "y")),) * 2), ("joints",), "'j' is used twice"),
    (with_bond(("b1", "c1"), "k1"), ("bonds",), "'k1' is used twice"),
    (with_bond(("b1", "c1"), "a/rail1"), ("bonds", 4, "name"), "'a/rail1' is that of a rail"),
    (broken_up(feed=LayoutFeed(("a1", "zz"), 3.0, 1.5)), ("feed", "across"), "the feed is left floating"),
    (with_bond(("b1", "b2")), ("bonds", 4), "bond 'wrong' shorts the feed"),
    (
        replace(with_bond(("b1", "b2")), feed=LayoutFeed(("a1", "a1"), 3.0, 1.5)),
        ("feed", "across"),
        "short-circuited",
    ),
    (
        broken_up(relay=LayoutRelay(("d1", "zz"), 9.0, 1.4, 0.95)),
        ("relay", "across", 1),
        "the relay is left floating: 'zz'",
    ),
    (
        broken_up(relay=LayoutRelay(("d1", "c1"), 9.0, 1.4, 0.95)),
        ("relay", "across"),
        "same side of the feed",
    ),
    (
        broken_up(legs=(*points(series=True).legs, STRAY)),
        ("legs", 3),
        "leg 'stray' leads to nowhere: its rail 1",
    ),
    (
        broken_up(
            legs=(*points(series=True).legs, STRAY),
            bonds=(
                *points(series=True).bonds,
                Bond("s", ("d1", "s1"), 0.0015),
                Bond("t", ("d1", "s2"), 0.0015),
            ),
        ),
        ("legs", 3),
        "both rails of leg 'stray'",
    ),
]


@pytest.mark.parametrize(("layout", "field", "words"), DISCONNECTED)
def test_what_does_not_hang_together_is_told_in_words(
    layout: Layout, field: tuple[object, ...], words: str
) -> None:
    with pytest.raises(NonPhysicalError) as caught:
        check_connected(layout)
    assert caught.value.field == field
    assert words in caught.value.reason


@pytest.mark.parametrize("layout", [plain_line(), points(series=True), points(series=False, duplicated=True)])
def test_sound_layouts_pass(layout: Layout) -> None:
    check_connected(layout)
