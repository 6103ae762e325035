"""Operating points: power balance, passivity, what is refused, what is degenerate."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.electrical.changes import with_ballast, with_emf
from service.electrical.circuit import (
    Feed,
    Line,
    PlainCircuit,
    Shunt,
    operating_point,
)
from service.electrical.layout import Bond, Layout, LayoutFeed, LayoutRelay, Leg
from service.electrical.network import Leakage, network
from service.electrical.power import rail_voltage, stages
from service.electrical.relay import Relay
from service.electrical.shunt import residual_voltage
from service.errors import NoAnswerError, NonPhysicalError
from support.electrical import ac, ballasts, circuits, uk

either = st.one_of(circuits(dc=True), circuits(dc=False))
shunts = st.one_of(st.none(), st.builds(Shunt, st.floats(0, 20), st.floats(0, 5)))


@given(either, shunts)
def test_power_in_is_power_dissipated(circuit: PlainCircuit, shunt: Shunt | None) -> None:
    found = stages(circuit, shunt)
    given_w = float(circuit.feed.emf_v * found[0].current_a.real)
    powers = [float(stage.power_w) for stage in found]
    assert sum(powers) == pytest.approx(given_w, rel=1e-9)
    assert min(powers) >= -1e-9 * given_w


@given(either, st.floats(0, 1), st.floats(0, 5))
def test_the_operating_point_agrees_with_the_closed_form(
    circuit: PlainCircuit, share: float, ohm: float
) -> None:
    """The shunted circuit worked through, against V R/(R + Z)."""
    position_m = share * float(circuit.line.length_m)
    point = operating_point(circuit, Shunt(position_m, ohm))
    closed = residual_voltage(circuit, position_m, ohm)
    assert complex(point.relay_v) == pytest.approx(complex(closed), rel=1e-9, abs=1e-12)


@given(circuits(dc=True), st.floats(0, 1), st.floats(0, 5))
def test_a_shunt_never_raises_a_dc_relay(circuit: PlainCircuit, share: float, ohm: float) -> None:
    shunted = operating_point(circuit, Shunt(share * float(circuit.line.length_m), ohm))
    assert float(shunted.relay_v.real) <= float(operating_point(circuit).relay_v.real) * (1 + 1e-12)


@given(circuits(dc=True), ballasts(), ballasts())
def test_wetter_ballast_never_raises_a_dc_relay(circuit: PlainCircuit, one: float, other: float) -> None:
    wet, dry = sorted((one, other))
    volts = [float(operating_point(with_ballast(circuit, rho)).relay_v.real) for rho in (wet, dry)]
    assert volts[0] <= volts[1] * (1 + 1e-12)


@given(either, st.floats(0.1, 10))
def test_volts_scale_with_the_emf(circuit: PlainCircuit, factor: float) -> None:
    scaled = with_emf(circuit, float(circuit.feed.emf_v) * factor)
    assert complex(operating_point(scaled).relay_v) == pytest.approx(
        factor * complex(operating_point(circuit).relay_v), rel=1e-12
    )


@given(either, st.floats(0.1, 10))
def test_every_impedance_times_a_factor_leaves_the_volts(circuit: PlainCircuit, factor: float) -> None:
    """Units scale: ohm, ohm/km and ohm·km together."""
    line, relay = circuit.line, circuit.relay
    scaled = replace(
        circuit,
        feed=replace(circuit.feed, series_ohm=circuit.feed.series_ohm * factor),
        line=replace(
            line,
            loop_ohm_per_km=line.loop_ohm_per_km * factor,
            ballast_ohm_km=line.ballast_ohm_km * factor,
        ),
        relay=replace(
            relay, impedance_ohm=relay.impedance_ohm * factor, series_ohm=relay.series_ohm * factor
        ),
    )
    assert complex(operating_point(scaled).relay_v) == pytest.approx(
        complex(operating_point(circuit).relay_v), rel=1e-9
    )


def test_swapping_ends_is_reciprocal() -> None:
    """The current in the relay for a volt at the feed is that in the feed for a volt at the relay."""
    circuit = ac()
    swapped = replace(
        circuit,
        feed=Feed(circuit.feed.emf_v, complex(circuit.relay.impedance_ohm + circuit.relay.series_ohm)),
        relay=replace(circuit.relay, impedance_ohm=circuit.feed.series_ohm, series_ohm=0.0),
    )
    assert complex(operating_point(swapped).relay_current_a) == pytest.approx(
        complex(operating_point(circuit).relay_current_a), rel=1e-12
    )


def test_a_dead_short_leaves_nothing_and_has_its_current() -> None:
    found = {stage.name: stage for stage in stages(uk(), Shunt(0.0, 0.0))}
    assert complex(found["relay"].voltage_v) == 0
    assert float(found["shunt"].current_a.real) == pytest.approx(10 / 7.2)
    assert float(found["shunt"].power_w) == 0.0


def test_rail_voltage_runs_from_end_to_end() -> None:
    circuit, point = ac(), operating_point(ac())
    volts = rail_voltage(circuit, np.array([0.0, 400.0, 1000.0]))
    assert complex(volts[0]) == pytest.approx(complex(point.feed_end_rail_v), rel=1e-12)
    assert complex(volts[2]) == pytest.approx(complex(point.relay_end_rail_v), rel=1e-12)


@pytest.mark.parametrize("circuit", [uk(), ac()])
@pytest.mark.parametrize(("place_m", "shunt_m"), [(200.0, 700.0), (700.0, 200.0), (300.0, 300.0)])
def test_rail_voltage_with_a_shunt_anywhere(circuit: PlainCircuit, place_m: float, shunt_m: float) -> None:
    """Against a nodal network with terminals at both places and a bond for the shunt."""
    ends = sorted({0.0, place_m, shunt_m, 1000.0})
    layout = Layout(
        circuit.frequency_hz,
        circuit.line.loop_ohm_per_km,
        circuit.line.ballast_ohm_km,
        None,
        legs=tuple(
            Leg(f"{low}", (f"{low}+", f"{low}-"), (f"{high}+", f"{high}-"), high - low)
            for low, high in itertools.pairwise(ends)
        ),
        bonds=(Bond("shunt", (f"{shunt_m}+", f"{shunt_m}-"), 0.4),),
        joints=(),
        feed=LayoutFeed(("0.0+", "0.0-"), circuit.feed.emf_v, circuit.feed.series_ohm),
        relay=LayoutRelay(
            ("1000.0+", "1000.0-"), circuit.relay.impedance_ohm + circuit.relay.series_ohm, 1.0, 0.5
        ),
    )
    solved = network(layout, Leakage(np.array([1 / circuit.line.ballast_ohm_km]), np.array([0.0])))
    plus, minus = (solved.volts[0, solved.nodes[f"{place_m}{side}"]] for side in "+-")
    found = rail_voltage(circuit, place_m, Shunt(shunt_m, 0.4))
    assert complex(found) == pytest.approx(complex(plus - minus), rel=1e-8)


def test_a_dead_short_leaves_no_rail_voltage_behind_it() -> None:
    volts = rail_voltage(uk(), np.array([0.0, 400.0, 500.0, 1000.0]), Shunt(500.0, 0.0))
    assert (np.abs(volts) > 0).tolist() == [True, True, False, False]


def test_arrays_give_arrays_and_numbers_give_arrays_without_shape() -> None:
    many = operating_point(with_ballast(uk(), np.array([2.0, 10.6, math.inf])), Shunt(500.0, 0.5))
    assert many.relay_v.shape == (3,)
    assert many.relay_state.released.tolist() == [True, True, True]
    assert operating_point(uk()).relay_v.shape == ()


@pytest.mark.parametrize(
    ("changes", "field"),
    [
        ({"frequency_hz": -1.0}, ("frequency_hz",)),
        ({"frequency_hz": math.inf}, ("frequency_hz",)),
        ({"feed": Feed(0.0, 7.2)}, ("feed", "emf_v")),
        ({"feed": Feed(10.0, -7.2)}, ("feed", "series_ohm")),
        ({"feed": Feed(10.0, 7.2 + 1j)}, ("feed", "series_ohm")),
        ({"line": Line(0.0, 0.0578, 10.0)}, ("line", "length_m")),
        ({"line": Line(np.array([10.0, math.nan]), 0.0578, 10.0)}, ("line", "length_m")),
        ({"line": Line(1000.0, -0.0578, 10.0)}, ("line", "loop_ohm_per_km")),
        ({"line": Line(1000.0, 0.05 + 0.1j, 10.0)}, ("line", "loop_ohm_per_km")),
        ({"line": Line(1000.0, 0.0578, 0.0)}, ("line", "ballast_ohm_km")),
        ({"line": Line(1000.0, 0.0578, math.nan)}, ("line", "ballast_ohm_km")),
        ({"relay": Relay(20.0 + 1j, 0.0, 1.62, 1.10)}, ("relay", "impedance_ohm")),
        ({"relay": Relay(20.0, 1j, 1.62, 1.10)}, ("relay", "series_ohm")),
        ({"relay": Relay(20.0, 0.0, 1.0, 1.10)}, ("relay", "drop_away_v")),
    ],
)
def test_what_no_circuit_has_is_refused(changes: dict[str, object], field: tuple[str, ...]) -> None:
    with pytest.raises(NonPhysicalError) as caught:
        replace(uk(), **changes)  # type: ignore[arg-type]
    assert caught.value.field == field


@pytest.mark.parametrize(
    ("shunt", "field"),
    [(Shunt(-1.0, 0.5), "position_m"), (Shunt(1001.0, 0.5), "position_m"), (Shunt(0.0, -0.5), "ohm")],
)
def test_a_shunt_outside_the_section_is_refused(shunt: Shunt, field: str) -> None:
    with pytest.raises(NonPhysicalError) as caught:
        operating_point(uk(), shunt)
    assert caught.value.field == ("shunt", field)


def test_a_lossless_resonance_is_told() -> None:
    """A capacitor before a coil of the same reactance, no resistance anywhere."""
    circuit = PlainCircuit(50.0, Feed(10.0, -5j), Line(100.0, 0.0, math.inf), Relay(5j, 0.0, 1.0, 0.5))
    for ask in (operating_point, lambda c: residual_voltage(c, 0.0, 1.0)):
        with pytest.raises(NoAnswerError) as caught:
            ask(circuit)
        assert caught.value.code == "degenerate"


def test_an_ideal_source_shorted_is_told() -> None:
    circuit = replace(uk(), feed=Feed(10.0, 0.0))
    for ask in (
        lambda: operating_point(circuit, Shunt(0.0, 0.0)),
        lambda: residual_voltage(circuit, 0.0, 0.0),
    ):
        with pytest.raises(NoAnswerError) as caught:
            ask()
        assert caught.value.code == "degenerate"
