"""Circuits of each kind from their equipment, changes to them, and the worst cases."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from service.electrical.chain import shunt
from service.electrical.changes import (
    Spread,
    clear_case,
    occupied_case,
    with_element,
    with_feed_ratio,
)
from service.electrical.circuit import EquippedCircuit, Feed, Line, operating_point
from service.electrical.power import stages
from service.electrical.presets import (
    RailEnd,
    ac_double_rail,
    ac_single_rail,
    audio_frequency,
    direct_current,
    refuse_without_model,
    resonated_bond,
)
from service.electrical.relay import Relay
from service.electrical.shunt import shunt_limits
from service.errors import NoAnswerError, NonPhysicalError
from support.electrical import ac, uk, vane

RAILS = Line(1500.0, 0.45 + 0.6j, 8.0)
FEED_END, RELAY_END = RailEnd(20.0, 1.0), RailEnd(13.0, 0.05)
RELAY = Relay(120.0 + 200.0j, 0.0, 10.0, 6.0)
PLAIN_BOND = 0.03 + 0.35j


def double_rail(bond_ohm: complex) -> EquippedCircuit:
    return ac_double_rail(50.0, Feed(220.0, 0.0), FEED_END, bond_ohm, RAILS, bond_ohm, RELAY_END, RELAY)


def test_direct_current_puts_leads_where_they_are() -> None:
    circuit = direct_current(Feed(10.0, 6.0), 1.2, uk().line, 0.4, Relay(9.0, 3.0, 1.4, 0.95))
    assert (float(circuit.feed.series_ohm), float(circuit.relay.series_ohm)) == pytest.approx((7.2, 3.4))
    point = operating_point(circuit)
    assert float(point.relay_v.real) == pytest.approx(float(point.relay_end_rail_v.real) * 9.0 / 12.4)
    for leads in ((-1.0, 0.0), (0.0, -1.0)):
        with pytest.raises(NonPhysicalError):
            direct_current(Feed(10.0, 6.0), leads[0], uk().line, leads[1], uk().relay)


def test_single_rail_is_double_rail_with_bonds_that_pass_nothing() -> None:
    single = ac_single_rail(50.0, Feed(220.0, 0.0), FEED_END, RAILS, RELAY_END, RELAY)
    assert complex(operating_point(double_rail(1e12)).relay_v) == pytest.approx(
        complex(operating_point(single).relay_v), rel=1e-9
    )


def test_transformers_bring_impedances_to_the_rails() -> None:
    """Worked by hand: 220 V through 20 : 1 behind 1 ohm, and the relay through 1 : 13."""
    circuit = ac_single_rail(
        50.0, Feed(220.0, 0.0), FEED_END, replace(RAILS, length_m=1e-6), RELAY_END, RELAY
    )
    load = 0.05 + (120.0 + 200.0j) / 13.0**2
    expected = 11.0 * load / (load + 1.0)
    point = operating_point(circuit)
    assert complex(point.relay_end_rail_v) == pytest.approx(expected, rel=1e-6)
    assert complex(point.relay_v) == pytest.approx(expected * (load - 0.05) / load * 13.0, rel=1e-6)


def test_every_element_has_its_name_and_power() -> None:
    found = stages(double_rail(PLAIN_BOND))
    assert [stage.name for stage in found] == [
        "feed series",
        "feed transformer",
        "feed series",
        "feed bond",
        "line",
        "relay bond",
        "relay end series",
        "relay transformer",
        "relay series",
        "relay",
    ]
    powers = {stage.name: float(stage.power_w) for stage in found}
    assert powers["feed transformer"] == pytest.approx(0.0, abs=1e-9)
    assert powers["feed bond"] > 0
    assert sum(float(stage.power_w) for stage in found) == pytest.approx(
        220.0 * float(found[0].current_a.real)
    )


def test_old_bonds_hold_the_drop_shunt_down_and_resonated_ones_do_not() -> None:
    """0.15 to 0.2 ohm is reachable with old bonds of 0.3 to 0.4 ohm; a resonated one has about 2.5 ohm.

    VRIOGS 010.7 Rev A, 6.6.3 (read). That a relay works at about twice its drop-away: common practice,
    no source.
    """
    resonated = complex(resonated_bond(PLAIN_BOND, 50.0, 90e-6, 10.0))
    assert abs(resonated) > 2.5
    drop = {}
    for name, bond in (("plain", PLAIN_BOND), ("resonated", resonated)):
        circuit = double_rail(bond)
        level = abs(complex(operating_point(circuit).relay_v))
        held = replace(circuit, relay=replace(RELAY, pick_up_v=level, drop_away_v=level / 2))
        drop[name] = float(shunt_limits(held).drop_shunt_ohm.worst.ohm)
    assert 0.15 < drop["plain"] < 0.2
    assert drop["resonated"] > 0.5


def test_a_resonated_bond_is_largest_at_its_frequency() -> None:
    near = np.abs(resonated_bond(PLAIN_BOND, 50.0, np.array([70e-6, 90e-6, 110e-6]), 10.0))
    assert near.argmax() == 1
    for wrong in (
        (0.0, 50.0, 1e-6, 10.0),
        (1j, 0.0, 1e-6, 10.0),
        (1j, 50.0, 0.0, 10.0),
        (1j, 50.0, 1e-6, 0.0),
    ):
        with pytest.raises(NonPhysicalError):
            resonated_bond(*wrong)


def test_a_saturated_bond_lowers_the_relay() -> None:
    sound = double_rail(PLAIN_BOND)
    saturated = with_element(sound, "feed bond", shunt(0.03 + 0.05j))
    assert abs(complex(operating_point(saturated).relay_v)) < abs(complex(operating_point(sound).relay_v))


def test_a_lower_tap_raises_the_open_voltage() -> None:
    tapped = with_feed_ratio(double_rail(PLAIN_BOND), 10.0)
    assert isinstance(tapped, EquippedCircuit)
    assert float(tapped.feed_end[0].two_port.a) == 10.0


@pytest.mark.parametrize("circuit", [uk(), double_rail(PLAIN_BOND)])
def test_only_an_element_that_is_there_is_changed(circuit: EquippedCircuit) -> None:
    with pytest.raises(NonPhysicalError):
        with_element(circuit, "booster", shunt(1.0))


def test_audio_frequency_is_a_threshold_between_tuned_zones() -> None:
    circuit = audio_frequency(
        1700.0,
        Feed(3.0, 0.4),
        1.5 + 0.2j,
        Line(600.0, 0.6 + 13j, 6.0),
        1.5 + 0.2j,
        Relay(8.0, 0.0, 0.2, 0.15),
        (20.0, 20.0),
    )
    limits = shunt_limits(circuit)
    assert not limits.released
    assert float(limits.drop_shunt_ohm.worst.ohm) > 0.15  # maintenance practice, from memory
    for zone in ((300.0, 300.0), (-1.0, 0.0)):
        with pytest.raises(NonPhysicalError):
            replace(circuit, tuned_zone_m=zone)


def test_alternating_current_has_a_frequency() -> None:
    with pytest.raises(NonPhysicalError) as caught:
        ac_single_rail(0.0, Feed(220.0, 0.0), FEED_END, RAILS, RELAY_END, RELAY)
    assert caught.value.field == ("frequency_hz",)
    with pytest.raises(NonPhysicalError):
        ac_single_rail(50.0, Feed(220.0, 0.0), FEED_END, RAILS, RailEnd(0.0, 0.1), RELAY)


@pytest.mark.parametrize("kind", ["impulse", "coded"])
def test_kinds_without_a_linear_model_say_so(kind: str) -> None:
    with pytest.raises(NoAnswerError) as caught:
        refuse_without_model(kind)
    assert caught.value.code == "no_linear_model"


def test_other_kinds_pass() -> None:
    for kind in ("dc", "dc_ac_immune", "ac_single_rail", "ac_double_rail", "audio_frequency"):
        refuse_without_model(kind)


SPREAD = Spread(
    (0.9, 1.1), (0.95, 1.05), (1.0, 1.3), (2.0, math.inf), 1.05, 0.9, (-10.0, 40.0), local_follows=True
)


def test_worst_cases_move_every_value() -> None:
    clear, occupied = clear_case(uk(), SPREAD), occupied_case(uk(), SPREAD)
    assert [float(c.feed.emf_v) for c in (clear, occupied)] == pytest.approx([9.0, 11.0])
    assert [float(c.feed.series_ohm) for c in (clear, occupied)] == pytest.approx([7.56, 6.84])
    assert [float(c.line.loop_ohm_per_km) for c in (clear, occupied)] == pytest.approx([0.0578 * 1.3, 0.0578])
    assert [float(c.line.ballast_ohm_km) for c in (clear, occupied)] == [2.0, math.inf]
    assert float(clear.relay.pick_up_v) == pytest.approx(1.62 * 1.05 * 274.5 / 254.5)
    assert float(occupied.relay.drop_away_v) == pytest.approx(1.10 * 0.9 * 224.5 / 254.5)


def test_worst_cases_of_a_vane_relay_leave_its_coil_alone() -> None:
    circuit = vane(0.0)
    occupied = occupied_case(circuit, replace(SPREAD, coil_c=None))
    assert complex(occupied.relay.impedance_ohm) == complex(circuit.relay.impedance_ohm)
    assert complex(occupied.relay.local_v) == pytest.approx(complex(circuit.relay.local_v) * 1.1)


def test_a_coil_temperature_is_for_dc_relays() -> None:
    for case in (clear_case, occupied_case):
        with pytest.raises(NonPhysicalError) as caught:
            case(ac(), SPREAD)
        assert caught.value.field == ("coil_c",)


def test_there_is_no_reactance_at_0_hz_in_equipment_either() -> None:
    with pytest.raises(NonPhysicalError) as caught:
        replace(double_rail(PLAIN_BOND), frequency_hz=0.0, line=uk().line, relay=uk().relay)
    assert caught.value.field == ("feed_end", 2)


@pytest.mark.parametrize(
    "changes",
    [
        {"supply": (1.1, 0.9)},
        {"supply": (0.0, 1.0)},
        {"loop_ohm": (-1.0, 1.0)},
        {"ballast_ohm_km": (5.0, 2.0)},
        {"coil_c": (30.0, 20.0)},
        {"pick_up": 0.0},
        {"drop_away": math.nan},
    ],
)
def test_ranges_upside_down_are_refused(changes: dict[str, object]) -> None:
    with pytest.raises(NonPhysicalError):
        replace(SPREAD, **changes)  # type: ignore[arg-type]
