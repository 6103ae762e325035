"""What contradicts itself or the equipment. Common practice, no source."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.rules.doubtful import WORDS, EquipmentHints, doubts
from service.rules.facts import Reading
from service.rules.words import CircuitKind
from support.rule_cases import reading

DC = EquipmentHints(CircuitKind.DC, feed_emf_v=10.0)
AC = EquipmentHints(CircuitKind.AC_DOUBLE_RAIL, feed_emf_v=10.0)


def volts(quantity: str, value: float, **given: Any) -> Reading:
    return reading("v", value, quantity=quantity, **given)


RELAY = volts("relay_voltage", 3.1)


@pytest.mark.parametrize(
    ("readings", "expected"),
    [
        pytest.param(
            [RELAY, volts("supply_voltage", 2.9)], {0: "relay_above_supply", 1: "relay_above_supply"}, id="32"
        ),
        pytest.param(
            [volts("feed_voltage", 2.9), RELAY], {0: "relay_above_supply", 1: "relay_above_supply"}, id="feed"
        ),
        pytest.param([RELAY, volts("supply_voltage", 3.1)], {}, id="the-same"),
        pytest.param([RELAY, volts("supply_voltage", 2.9, stage="as_found")], {}, id="another-stage"),
        pytest.param([RELAY, volts("supply_voltage", 2.9, comparison="ge")], {}, id="not-exact"),
        pytest.param(
            [volts("rail_voltage", 3.0), volts("rail_voltage", 2.0, test_point="feed_end")],
            {0: "ends_swapped", 1: "ends_swapped"},
            id="swapped",
        ),
        pytest.param(
            [volts("rail_voltage", 2.0), volts("rail_voltage", 3.0, test_point="feed_end")], {}, id="not"
        ),
        pytest.param([volts("residual_voltage", 100.0)], {0: "millivolts_as_volts"}, id="millivolts"),
        pytest.param([volts("residual_voltage", 99.0)], {}, id="merely-high"),
        pytest.param(
            [volts("relay_voltage", 310.0), volts("supply_voltage", 12.0)],
            {0: "millivolts_as_volts"},
            id="one-cause",
        ),
        pytest.param(
            [reading("v", 0.6), reading("v", 0.5, quantity="pick_up_shunt")],
            {0: "drop_above_pick_up", 1: "drop_above_pick_up"},
            id="shunts",
        ),
        pytest.param(
            [reading("v", 0.6), reading("v", 0.5, quantity="pick_up_shunt", test_point="feed_end")],
            {},
            id="elsewhere",
        ),
        pytest.param([reading("v", 0.5), reading("v", 0.5, quantity="pick_up_shunt")], {}, id="same-step"),
        pytest.param(
            [volts("relay_pick_up_voltage", 1.0), volts("relay_drop_away_voltage", 1.1)],
            {0: "drop_above_pick_up", 1: "drop_above_pick_up"},
            id="relay-values",
        ),
    ],
)
def test_doubts_of_a_dc_circuit(readings: list[Reading], expected: dict[int, str]) -> None:
    assert doubts(DC, readings) == expected
    assert set(expected.values()) <= set(WORDS)


def test_a_transformer_may_raise_what_it_is_fed() -> None:
    assert doubts(AC, [RELAY, volts("supply_voltage", 2.9), volts("residual_voltage", 900.0)]) == {}


def test_without_a_registered_feed_nothing_is_too_much() -> None:
    assert doubts(EquipmentHints(CircuitKind.DC), [volts("relay_voltage", 900.0)]) == {}


@given(st.floats(0, 1e4), st.sampled_from(list(CircuitKind)))
def test_no_reading_is_doubtful_for_failing_a_limit(value: float, kind: CircuitKind) -> None:
    """Alone, with no feed registered, a reading has nothing to contradict."""
    assert doubts(EquipmentHints(kind), [reading("v", value)]) == {}
