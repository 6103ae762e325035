"""Drop and pick-up shunts: against bisection, against every place, released with no train, vane relays."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from service.electrical.changes import with_ballast
from service.electrical.circuit import EquippedCircuit, Feed, Line, PlainCircuit, operating_point
from service.electrical.relay import Relay
from service.electrical.shunt import lifting_shunts, residual_voltage, shunt_limits
from service.electrical.worst import Condition, track_of
from service.errors import NoAnswerError, NonPhysicalError
from support.electrical import ac, ballasts, circuits, uk, vane

either = st.one_of(circuits(dc=True), circuits(dc=False))
angles = st.floats(-math.pi, math.pi)


def bisected(circuit: PlainCircuit, position_m: float, threshold_v: float) -> float:
    """Largest resistance at which the pull stays at or under a voltage, by the residual voltage alone."""
    low, high = 0.0, 1e-3
    relay = circuit.relay

    def pull(ohm: float) -> float:
        return float(relay.pull_v(residual_voltage(circuit, position_m, ohm)))

    while pull(high) <= threshold_v:
        high *= 2
    for _ in range(30):
        middle = (low + high) / 2
        low, high = (middle, high) if pull(middle) <= threshold_v else (low, middle)
    return low


@given(either)
def test_closed_form_against_bisection(circuit: PlainCircuit) -> None:
    limits = shunt_limits(circuit)
    for found, threshold_v, none in (
        (limits.drop_shunt_ohm, circuit.relay.drop_away_v, limits.released),
        (limits.pick_up_shunt_ohm, circuit.relay.pick_up_v, limits.not_picked_up),
    ):
        pull = float(circuit.relay.pull_v(limits.relay_clear_v))
        assert bool(none) == (pull <= threshold_v)
        # Next to the threshold the resistance grows without bound and neither method is of use.
        if not none and pull > threshold_v * (1 + 1e-6):
            for position_m, ohm in (
                (0.0, found.feed_end),
                (float(circuit.line.length_m) / 2, found.middle),
                (float(circuit.line.length_m), found.relay_end),
            ):
                assert float(ohm) == pytest.approx(
                    bisected(circuit, position_m, float(threshold_v)), rel=1e-7
                )


@given(either)
def test_the_worst_place_is_the_worst(circuit: PlainCircuit) -> None:
    """No place of a thousand is worse, and the worst is what the place it names gives."""
    limits = shunt_limits(circuit)
    assume(not limits.released)
    track = track_of(circuit)
    condition = Condition(*circuit.relay.shunt_terms(track.clear_v, circuit.relay.drop_away_v))
    everywhere, _ = condition.root(*track.seen(np.linspace(0.0, 1.0, 1001)))
    worst = limits.drop_shunt_ohm.worst
    assert float(worst.ohm) <= everywhere.min() * (1 + 1e-9)
    there, _ = condition.root(*track.seen(worst.position_m / circuit.line.length_m))
    assert float(there) == pytest.approx(float(worst.ohm), rel=1e-9)


def test_the_worst_place_of_many_ac_circuits() -> None:
    """Long lines and short ones in one array, many with the worst place inside."""
    chance = np.random.default_rng(7)
    count = 4100  # more than one block
    loop = chance.uniform(0.1, 0.6, count) + 1j * chance.uniform(0.0, 1.3, count)
    rails = Line(chance.uniform(50, 3000, count), loop, np.exp(chance.uniform(-0.7, 4, count)))
    series = chance.uniform(0.1, 10, count) + 1j * chance.uniform(-2, 4, count)
    coil = chance.uniform(0.5, 60, count) + 1j * chance.uniform(-10, 40, count)
    circuit = PlainCircuit(50.0, Feed(10.0, series), rails, Relay(coil, 0.1, 1e-3, 1e-4))
    limits = shunt_limits(circuit)
    track = track_of(circuit)
    condition = Condition(*circuit.relay.shunt_terms(track.clear_v, circuit.relay.drop_away_v))
    everywhere, _ = condition.root(*track.seen(np.linspace(0.0, 1.0, 401)[:, np.newaxis]))
    assert np.all(limits.drop_shunt_ohm.worst.ohm <= everywhere.min(axis=0) * (1 + 1e-9))
    share = limits.drop_shunt_ohm.worst.position_m / rails.length_m
    assert ((share > 0) & (share < 1)).sum() > 400


@given(circuits(dc=True), ballasts(), ballasts())
def test_wetter_ballast_never_lowers_a_dc_drop_shunt(circuit: PlainCircuit, one: float, other: float) -> None:
    wet, dry = sorted((one, other))
    drop = [float(shunt_limits(with_ballast(circuit, rho)).drop_shunt_ohm.worst.ohm) for rho in (wet, dry)]
    assert drop[0] >= drop[1] * (1 - 1e-9)


@given(circuits(dc=True))
def test_the_dc_form(circuit: PlainCircuit) -> None:
    """Z_th/(k - 1) with k = V_clear/V_drop, at the feed end."""
    limits = shunt_limits(circuit)
    k = float(limits.relay_clear_v.real) / float(circuit.relay.drop_away_v)
    assume(k > 1.01)
    z = 1 / (1 / float(circuit.feed.series_ohm.real) + _into_the_line(circuit))
    assert float(limits.drop_shunt_ohm.feed_end) == pytest.approx(z / (k - 1), rel=1e-9)


def _into_the_line(circuit: PlainCircuit) -> float:
    point = operating_point(circuit)
    return float(point.feed_current_a.real) / float(point.feed_end_rail_v.real)


def test_pick_up_shunt_is_over_the_drop_shunt() -> None:
    limits = shunt_limits(uk())
    assert float(limits.pick_up_shunt_ohm.worst.ohm) > float(limits.drop_shunt_ohm.worst.ohm)


def test_released_with_no_train_is_never_a_number() -> None:
    limits = shunt_limits(with_ballast(uk(), np.array([0.5, 10.6])))
    assert limits.released.tolist() == [True, False]
    for found in (limits.drop_shunt_ohm, limits.pick_up_shunt_ohm):
        assert np.isinf([found.feed_end[0], found.worst.ohm[0], found.worst.position_m[0]]).all()
        assert np.isfinite([found.feed_end[1], found.worst.ohm[1], found.worst.position_m[1]]).all()


def test_between_drop_away_and_pick_up_there_is_one_and_not_the_other() -> None:
    limits = shunt_limits(with_ballast(uk(), 1.5))
    assert not limits.released
    assert limits.not_picked_up


def test_an_ideal_source_is_never_shunted_at_its_own_terminals() -> None:
    limits = shunt_limits(replace(uk(), feed=Feed(10.0, 0.0)))
    assert float(limits.drop_shunt_ohm.feed_end) == 0.0
    assert float(limits.drop_shunt_ohm.worst.ohm) == 0.0


def test_lossless_rails_have_no_worst_place() -> None:
    drop = shunt_limits(uk(loop_ohm_per_km=0.0)).drop_shunt_ohm
    assert float(drop.feed_end) == pytest.approx(float(drop.relay_end), rel=1e-12)


@given(angles, angles)
def test_vane_drop_shunt_against_bisection(ideal: float, local: float) -> None:
    circuit = vane(ideal, local)
    pull = float(circuit.relay.pull_v(operating_point(circuit).relay_v))
    limits = shunt_limits(circuit)
    assert bool(limits.released) == (pull <= float(circuit.relay.drop_away_v))
    if pull > float(circuit.relay.drop_away_v) * 1.01:
        # Under the one root the torque is too small; a shunt over it may even raise the torque.
        ohm = float(limits.drop_shunt_ohm.middle)
        under, over = circuit.relay.pull_v(residual_voltage(circuit, 500.0, np.array([0.999, 1.001]) * ohm))
        assert under < float(circuit.relay.drop_away_v) < over


@given(angles, st.floats(0, 1000))
def test_a_vane_relay_that_is_down_and_would_be_lifted(ideal: float, position_m: float) -> None:
    """Every resistance inside the range lifts it, none outside does."""
    circuit = vane(ideal, pick_up_v=2.5)
    low, high = (float(end) for end in lifting_shunts(circuit, position_m))
    ohm = np.geomspace(1e-3, 1e3, 2001)
    lifts = circuit.relay.pull_v(residual_voltage(circuit, position_m, ohm)) >= float(circuit.relay.pick_up_v)
    pull = float(circuit.relay.pull_v(operating_point(circuit).relay_v))
    if pull >= float(circuit.relay.pick_up_v):
        assert (low, high) == (0.0, 0.0)
    else:
        inside = (ohm > low * 1.001) & (ohm < high / 1.001)
        outside = (ohm < low / 1.001) | (ohm > high * 1.001)
        assert lifts[inside].all()
        assert not lifts[outside].any()


def test_some_shunt_lifts_a_vane_relay_far_from_its_ideal_angle() -> None:
    """The case itself must occur, or the property above holds of nothing."""
    circuit = replace(vane(0.0), feed=Feed(6.0, 0.2 + 2.0j))
    coil_v = complex(operating_point(circuit).relay_v)
    ideal = float(np.angle(coil_v)) - 1.2
    away = replace(circuit.relay, ideal_angle_rad=ideal, pick_up_v=abs(coil_v) * 0.42, drop_away_v=0.1)
    low, high = lifting_shunts(replace(circuit, relay=away), 0.0)
    assert 0 < float(low) < float(high)


def test_no_shunt_lifts_a_relay_by_voltage() -> None:
    circuit = replace(ac(), relay=replace(ac().relay, pick_up_v=50.0))
    assert [float(end) for end in lifting_shunts(circuit, 200.0)] == [0.0, 0.0]


def test_inside_a_tuned_zone_there_is_no_answer() -> None:
    circuit = EquippedCircuit(
        1700.0, Feed(2.0, 1.0), Line(600.0, 0.5 + 12j, 8.0), Relay(4.0, 0.0, 0.05, 0.03), (), (), (20.0, 25.0)
    )
    limits = shunt_limits(circuit)
    assert 20.0 <= float(limits.drop_shunt_ohm.worst.position_m) <= 575.0
    for ask in (residual_voltage, lambda c, x, _: lifting_shunts(c, x)):
        for position_m in (10.0, 580.0):
            with pytest.raises(NoAnswerError) as caught:
                ask(circuit, position_m, 0.1)
            assert caught.value.code == "tuned_zone"
    at_edge = residual_voltage(circuit, 20.0, float(limits.drop_shunt_ohm.feed_end))
    assert abs(complex(at_edge)) == pytest.approx(0.03, rel=1e-9)


@pytest.mark.parametrize("position_m", [-1.0, 1001.0])
def test_outside_the_section(position_m: float) -> None:
    with pytest.raises(NonPhysicalError):
        residual_voltage(uk(), position_m, 0.5)
    with pytest.raises(NonPhysicalError):
        lifting_shunts(uk(), position_m)
