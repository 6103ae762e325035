"""Relays: pick-up, hold and release told apart, coil temperature, vane torque, a sagging supply."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.electrical.changes import with_local_phase, with_supply
from service.electrical.circuit import operating_point
from service.electrical.relay import Relay, VaneRelay, at_coil_temperature, relay_by_current, state_of
from service.errors import NonPhysicalError
from support.electrical import ac, uk, vane


@given(st.floats(0, 5))
def test_exactly_one_state(volts: float) -> None:
    state = state_of(Relay(20.0, 0.0, 1.62, 1.10), np.asarray(volts))
    assert [bool(x) for x in (state.picks_up, state.holds, state.released)].count(True) == 1


def test_a_relay_whose_two_values_are_one_picks_up_at_it() -> None:
    state = state_of(Relay(20.0, 0.0, 1.1, 1.1), np.asarray(1.1))
    assert bool(state.picks_up)
    assert not bool(state.released)


def test_by_current_at_an_impedance() -> None:
    relay = relay_by_current(3.0 + 4.0j, 0.5, 0.2, 0.1)
    assert (float(relay.pick_up_v), float(relay.drop_away_v)) == pytest.approx((1.0, 0.5))


def test_copper_doubles_every_255_degrees() -> None:
    """IEC 60228: proportional to 234.5 + t, so twice the 20 °C value at 274.5 °C."""
    hot = at_coil_temperature(Relay(20.0, 1.0, 1.62, 1.10), 274.5)
    assert (float(hot.impedance_ohm), float(hot.pick_up_v)) == pytest.approx((40.0, 3.24))
    assert hot.series_ohm == 1.0
    with pytest.raises(NonPhysicalError):
        at_coil_temperature(Relay(20.0, 1.0, 1.62, 1.10), -234.5)


def test_a_cold_relay_releases_at_less() -> None:
    cold = at_coil_temperature(uk().relay, -20.0)
    assert float(cold.drop_away_v) < float(uk().relay.drop_away_v)


@given(st.floats(-math.pi, math.pi), st.floats(-math.pi, math.pi))
def test_torque_is_greatest_at_the_ideal_angle(angle: float, ideal: float) -> None:
    relay = VaneRelay(10j, 0.0, 1.0, 0.7, 110.0, 110.0, ideal)
    assert float(relay.pull_v(np.asarray(2.0 * np.exp(1j * angle)))) <= 2.0 + 1e-12
    assert float(relay.pull_v(np.asarray(2.0 * np.exp(1j * ideal)))) == pytest.approx(2.0)


@given(st.floats(0.5, 1.2))
def test_a_vane_relay_sags_with_the_square_of_a_common_supply(factor: float) -> None:
    circuit = vane(0.0)

    def pull(local_follows: bool) -> float:
        sagged = with_supply(circuit, factor, local_follows=local_follows)
        return float(sagged.relay.pull_v(operating_point(sagged).relay_v))

    before = float(circuit.relay.pull_v(operating_point(circuit).relay_v))
    assert pull(True) == pytest.approx(before * factor**2)
    assert pull(False) == pytest.approx(before * factor)


def test_a_quarter_turn_of_the_local_phase_takes_the_torque() -> None:
    circuit = vane(0.0)
    coil_v = operating_point(circuit).relay_v
    lead = float(np.angle(coil_v))
    ideal = replace(circuit, relay=replace(circuit.relay, ideal_angle_rad=lead))
    slipped = with_local_phase(ideal, math.pi / 2)
    assert float(slipped.relay.pull_v(coil_v)) == pytest.approx(0.0, abs=1e-12)


def test_only_a_vane_relay_has_a_local_phase() -> None:
    with pytest.raises(NonPhysicalError):
        with_local_phase(ac(), 0.1)
    plain = with_supply(ac(), 1.1, local_follows=True)
    assert plain.relay == ac().relay


@pytest.mark.parametrize(
    ("changes", "field"),
    [
        ({"impedance_ohm": 0.0}, "impedance_ohm"),
        ({"impedance_ohm": -1.0 + 5j}, "impedance_ohm"),
        ({"series_ohm": -0.1}, "series_ohm"),
        ({"pick_up_v": 0.0}, "pick_up_v"),
        ({"drop_away_v": math.inf}, "drop_away_v"),
        ({"drop_away_v": 2.0}, "drop_away_v"),
        ({"rated_local_v": 0.0}, "rated_local_v"),
        ({"local_v": math.nan}, "local_v"),
        ({"ideal_angle_rad": math.inf}, "ideal_angle_rad"),
    ],
)
def test_what_no_relay_has_is_refused(changes: dict[str, object], field: str) -> None:
    with pytest.raises(NonPhysicalError) as caught:
        replace(vane(0.0).relay, **changes).check()  # type: ignore[arg-type]
    assert caught.value.field == ("relay", field)
