"""Worked examples from published sources against the electrical models, each to the tolerance it allows."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from service.electrical.chain import series, shunt
from service.electrical.changes import (
    Spread,
    clear_case,
    occupied_case,
    with_ballast,
    with_emf,
    with_length,
)
from service.electrical.circuit import (
    Element,
    EquippedCircuit,
    Feed,
    Line,
    PlainCircuit,
    Shunt,
    operating_point,
)
from service.electrical.estimate import BothEnds, Reading, ballast_from_readings, exact_pair
from service.electrical.line import uniform_line
from service.electrical.longest import longest
from service.electrical.relay import Relay, VaneRelay, at_coil_temperature, relay_by_current
from service.electrical.setting import Requirements
from service.electrical.shunt import residual_voltage, shunt_limits
from service.electrical.traction import interference

# HELM Workbook 30, section 30.5, Engineering Example 1: inputs read, its answer from memory.
HELM = PlainCircuit(0.0, Feed(4.0, 5.0), Line(1000.0, 0.34, 3.0), Relay(10.0, 0.0, 0.9, 0.6))


def test_helm_ladder() -> None:
    """Ten sections, 0.017 ohm a rail and 30 ohm leak: about 120 mA, fed 0.5356 A (workbook, from memory)."""
    section = Element("section", series(0.034) @ shunt(30.0))
    # The whole length lies in the ladder's sections; the line that a circuit must have is next to nothing.
    stub = Line(1e-9, 0.0, math.inf)
    ladder = EquippedCircuit(0.0, HELM.feed, stub, HELM.relay, (), (section,) * 10)
    point = operating_point(ladder)
    assert float(point.relay_current_a.real) == pytest.approx(0.1204, abs=5e-5)  # computed
    assert float(point.feed_current_a.real) == pytest.approx(0.5356, abs=5e-5)


def test_helm_as_a_uniform_line() -> None:
    """Computed by the uniform-line formula from the workbook's inputs."""
    point = operating_point(HELM)
    assert float(point.relay_current_a.real) == pytest.approx(0.12053, abs=5e-6)
    assert float(point.relay_v.real) == pytest.approx(1.2053, abs=5e-5)
    assert float(point.feed_current_a.real) == pytest.approx(0.53681, abs=5e-6)
    assert float(point.feed_end_rail_v.real) == pytest.approx(1.31597, abs=5e-6)
    two_port = uniform_line(1000.0, 0.34, 3.0)
    assert [float(x) for x in (two_port.a, two_port.b, two_port.c)] == pytest.approx(
        [1.05720, 0.34646, 0.33967], abs=5e-6
    )


def test_helm_shunted_is_worst_in_the_middle() -> None:
    """0.5 ohm at feed end, middle, relay end: 28.10, 28.31, 27.43 mA (computed)."""
    v = residual_voltage(HELM, np.array([0.0, 500.0, 1000.0]), 0.5)
    assert (v.real / 10 * 1000).tolist() == pytest.approx([28.10, 28.31, 27.43], abs=0.005)
    drop = shunt_limits(HELM).drop_shunt_ohm
    assert float(drop.worst.ohm) < min(float(drop.feed_end), float(drop.relay_end))
    assert 0 < float(drop.worst.position_m) < 1000


# University course work for 1520 mm railways (read): z = 0.520 + j1.224 ohm/km, ballast 1 ohm·km.
COURSE_LOOP = 0.520 + 1.224j
COURSE = [
    (0.3, 1.023 + 0.055j, 0.151 + 0.373j, 0.302 + 0.006j),
    (0.6, 1.087 + 0.227j, 0.267 + 0.780j, 0.618 + 0.045j),
    (0.9, 1.176 + 0.530j, 0.309 + 1.252j, 0.957 + 0.155j),
    (1.2, 1.260 + 0.987j, 0.226 + 1.816j, 1.323 + 0.378j),
    (1.5, 1.293 + 1.630j, -0.047 + 2.489j, 1.708 + 0.766j),
    (1.8, 1.204 + 2.492j, -0.600 + 3.271j, 2.087 + 1.378j),
]


def off(found: complex, printed: complex) -> float:
    return max(abs(found.real - printed.real), abs(found.imag - printed.imag))


@pytest.mark.parametrize(("km", "a", "b", "c"), COURSE)
def test_ac_line_table(km: float, a: complex, b: complex, c: complex) -> None:
    found = uniform_line(km * 1000, COURSE_LOOP, 1.0)
    for value, printed in ((found.a, a), (found.b, b), (found.c, c), (found.d, a)):
        assert off(complex(value), printed) <= 0.02


@pytest.mark.parametrize(("km", "a", "b", "c"), COURSE)
def test_ac_line_table_with_its_own_propagation(km: float, a: complex, b: complex, c: complex) -> None:
    """With the printed gamma = 0.962 + j0.636 at 1 ohm·km, so z = gamma^2, the table holds to 0.001."""
    found = uniform_line(km * 1000, (0.962 + 0.636j) ** 2, 1.0)
    for value, printed in ((found.a, a), (found.b, b), (found.c, c)):
        assert off(complex(value), printed) <= 0.001


@pytest.mark.parametrize(("loop", "tolerance"), [(COURSE_LOOP, 0.03), ((0.962 + 0.636j) ** 2, 0.01)])
def test_ac_transfer_impedance(loop: complex, tolerance: float) -> None:
    """C Zv^2 + 2 A Zv + B at 3.0 km with Zv = 0.365 + j0.163 ohm at both ends, from the same course work."""
    line, end = uniform_line(3000.0, loop, 1.0), 0.365 + 0.163j
    assert off(complex(line.c * end**2 + 2 * line.a * end + line.b), -13.851 + 12.498j) <= tolerance


# An institution's exam papers (inputs read; answers computed by F1, lossless rails): emf, feed, relay,
# pick-up current, ballast, longest km, drop shunt there, with infinite ballast. Drop-away 68 % of pick-up.
EXAMS = [
    pytest.param(5.0, 12.0, 9.0, 0.040, 2.5, 2.407, 1.836, 0.663, id="2008"),
    pytest.param(5.0, 6.0, 9.0, 0.050, 2.5, 3.935, 1.148, 0.409, id="2010"),
    pytest.param(50.0, 50.0, 25.0, 0.4, 75.0, 3.000, 21.25, 11.49, id="2013"),
]


def exam(emf: float, feed: float, relay: float, pick_up_a: float, ballast: float, km: float) -> PlainCircuit:
    fitted = relay_by_current(relay, 0.0, pick_up_a, 0.68 * pick_up_a)
    return PlainCircuit(0.0, Feed(emf, feed), Line(km * 1000, 0.0, ballast), fitted)


@pytest.mark.parametrize(("emf", "feed", "relay", "pick_up_a", "ballast", "km", "wet", "dry"), EXAMS)
def test_exam_circuits(
    emf: float, feed: float, relay: float, pick_up_a: float, ballast: float, km: float, wet: float, dry: float
) -> None:
    circuit = exam(emf, feed, relay, pick_up_a, ballast, km)
    found = longest(circuit, Requirements(1.0, 1e-3, 1.0, math.inf, ballast, ballast), 6000.0, None)
    assert found.binds == "pick_up"
    assert found.length_m / 1000 == pytest.approx(km, abs=5e-4)
    at_longest = with_length(circuit, found.length_m)
    assert float(shunt_limits(at_longest).drop_shunt_ohm.worst.ohm) == pytest.approx(wet, abs=5e-3)
    dried = with_ballast(at_longest, math.inf)
    assert float(shunt_limits(dried).drop_shunt_ohm.worst.ohm) == pytest.approx(dry, abs=5e-3)


def test_the_2010_circuit_passes_wet_and_fails_dry() -> None:
    circuit = exam(5.0, 6.0, 9.0, 0.050, 2.5, 3.935)
    assert float(shunt_limits(circuit).drop_shunt_ohm.worst.ohm) > 0.5
    assert float(shunt_limits(with_ballast(circuit, math.inf)).drop_shunt_ohm.worst.ohm) < 0.5


def test_the_2010_circuit_down_with_no_train() -> None:
    """Second part: 1.5 ohm·km, 0.287 V on the rails, under the 0.306 V drop-away; F1 would say -5.62 ohm."""
    circuit = exam(5.0, 6.0, 9.0, 0.050, 1.5, 3.935)
    point = operating_point(circuit)
    assert float(point.relay_end_rail_v.real) == pytest.approx(0.287, abs=5e-4)
    assert bool(point.relay_state.released)
    limits = shunt_limits(circuit)
    assert bool(limits.released)
    assert math.isinf(limits.drop_shunt_ohm.worst.ohm)


def test_two_relays_one_at_each_end() -> None:
    """10 V, 7 ohm, two 20 ohm relays, 110 mA with 10 % over, 2 ohm·km (read; reproduced within 1 %)."""
    relay = relay_by_current(20.0, 0.0, 0.110, 0.075)
    near = Element("relay at the feed", shunt(20.0))
    circuit = EquippedCircuit(0.0, Feed(10.0, 7.0), Line(690.0, 0.0, 2.0), relay, (near,), ())
    found = longest(circuit, Requirements(1.1, 1e-3, 1.0, math.inf, 2.0, 2.0), 2000.0, None)
    assert found.length_m / 1000 == pytest.approx(0.69, rel=0.01)
    point = operating_point(with_length(circuit, found.length_m))
    assert float(point.relay_current_a.real) == pytest.approx(0.121, rel=0.01)
    assert float(point.relay_v.real) == pytest.approx(2.42, rel=0.01)
    # The feed's own current: what enters the rails and what the near relay takes.
    fed = float(point.feed_current_a.real) + float(point.feed_end_rail_v.real) / 20.0
    assert fed == pytest.approx(1.082, rel=0.01)


# University model of UK DC circuits, Space Weather 2023: 10 V behind 7.2 ohm, 0.0289 ohm/km a rail,
# ballast of its three conditions, 81 and 55 mA at 20 ohm (inputs read, results computed).
CONDITIONS = {"dry": 40.7, "moderate": 10.6, "wet": 3.00}
CURRENTS = [
    (20.0, 1000.0, {"dry": 0.3245, "moderate": 0.2445, "wet": 0.1321}),
    (9.0, 680.0, {"dry": 0.5771, "moderate": 0.4900, "wet": 0.3224}),
    (60.0, 350.0, {"dry": 0.1410, "moderate": 0.1227, "wet": 0.0849}),
]


def uk(condition: str, relay_ohm: float = 20.0, length_m: float = 1000.0) -> PlainCircuit:
    """Ballast from the model's own leakages, whose rounded sums CONDITIONS prints."""
    signal, traction = {"dry": (0.025, 1.53), "moderate": (0.1, 1.6), "wet": (0.4, 2.0)}[condition]
    ballast = (signal + traction) / (signal * traction)
    assert ballast == pytest.approx(CONDITIONS[condition], abs=0.05)
    relay = relay_by_current(relay_ohm, 0.0, 0.081, 0.055)
    return PlainCircuit(0.0, Feed(10.0, 7.2), Line(length_m, 0.0578, ballast), relay)


@pytest.mark.parametrize(("relay_ohm", "length_m", "expected"), CURRENTS)
def test_uk_relay_currents(relay_ohm: float, length_m: float, expected: dict[str, float]) -> None:
    for condition, ampere in expected.items():
        found = operating_point(uk(condition, relay_ohm, length_m)).relay_current_a
        assert float(found.real) == pytest.approx(ampere, abs=6e-5)


@pytest.mark.parametrize(
    ("condition", "drop", "pick_up"),
    [
        ("dry", [0.957, 0.959, 0.962], [1.560, 1.564, 1.568]),
        ("wet", [1.374, 1.371, 1.381], [3.052, 3.045, 3.067]),
    ],
)
def test_uk_shunts(condition: str, drop: list[float], pick_up: list[float]) -> None:
    """Feed end, middle, relay end of the 20 ohm circuit (computed from the model's inputs)."""
    limits = shunt_limits(uk(condition))
    for found, expected in ((limits.drop_shunt_ohm, drop), (limits.pick_up_shunt_ohm, pick_up)):
        values = [float(x) for x in (found.feed_end, found.middle, found.relay_end)]
        assert values == pytest.approx(expected, abs=1e-3)


def test_occupied_worst_cases() -> None:
    """0.934 ohm at 20 °C and 10 V, 0.812 at -10 °C, 0.836 at 11 V (computed from the model's inputs)."""
    dry = with_ballast(uk("dry"), math.inf)
    cold = replace(dry, relay=at_coil_temperature(dry.relay, -10.0))
    for circuit, expected in ((dry, 0.934), (cold, 0.812), (with_emf(dry, 11.0), 0.836)):
        assert float(shunt_limits(circuit).drop_shunt_ohm.worst.ohm) == pytest.approx(expected, abs=1e-3)


def test_worst_cases_stand_on_both_sides_of_nominal() -> None:
    """Which way each value goes in the two cases: from memory."""
    spread = Spread((0.95, 1.1), (0.9, 1.1), (1.0, 1.5), (3.0, math.inf), 1.05, 0.95, (-10.0, 40.0), False)
    nominal = uk("moderate")
    clear, occupied = clear_case(nominal, spread), occupied_case(nominal, spread)
    pull = [float(operating_point(c).relay_v.real / c.relay.pick_up_v) for c in (clear, nominal, occupied)]
    assert pull == sorted(pull)
    drop = [float(shunt_limits(c).drop_shunt_ohm.worst.ohm) for c in (occupied, nominal, clear)]
    assert drop == sorted(drop)


@pytest.mark.parametrize(("km", "ballast"), [(1.0, 4.0), (0.67, 2.0), (1.1, 2.0)])
def test_handbook_ballast_reads_high(km: float, ballast: float) -> None:
    """R = (Vf + Vr)/(2 (If - Ir)), training notes (read): 0.2 to 1.9 % over the exact line (computed)."""
    circuit = PlainCircuit(0.0, Feed(10.0, 3.0), Line(km * 1000, 0.34, ballast), Relay(9.0, 0.0, 1.4, 0.95))
    point = operating_point(circuit)
    readings = [float(x.real) for x in (point.feed_end_rail_v, point.feed_current_a, point.relay_end_rail_v)]
    readings.append(float(point.relay_current_a.real))
    ends = BothEnds(*(Reading(value, 1e-9 * value) for value in readings))
    found = ballast_from_readings(ends, km * 1000, 0.34, 0.0)
    assert float(found.ballast_ohm_km) == pytest.approx(ballast, rel=1e-9)
    assert 0.002 < float(found.handbook_ohm_km) / ballast - 1 < 0.019
    loop, leak = exact_pair(ends, km * 1000)
    assert float(loop) == pytest.approx(0.34, rel=1e-6)
    assert float(leak) == pytest.approx(ballast, rel=1e-6)


def test_exact_pair_is_the_printed_identity() -> None:
    """cosh gl = (Vf If + Vr Ir)/(Vf Ir + Vr If), Zc^2 = (Vf^2 - Vr^2)/(If^2 - Ir^2), exact for a line."""
    vf, jf, vr, jr = 1.31597, 0.53681, 1.20526, 0.120526
    loop, ballast = exact_pair(BothEnds(*(Reading(x, 0.0) for x in (vf, jf, vr, jr))), 1000.0)
    angle = math.acosh((vf * jf + vr * jr) / (vf * jr + vr * jf))
    surge = math.sqrt((vf**2 - vr**2) / (jf**2 - jr**2))
    assert [float(loop), float(ballast)] == pytest.approx([angle * surge, surge / angle], rel=1e-9)


def test_facts_of_the_trade() -> None:
    """Wet: relay voltage falls, drop shunt rises (common practice, no source)."""
    ballast = np.array([2.0, 3.0, 10.6, 40.7, math.inf])
    circuit = with_ballast(uk("dry"), ballast)
    limits = shunt_limits(circuit)
    assert np.all(np.diff(limits.relay_clear_v.real) > 0)
    assert np.all(np.diff(limits.drop_shunt_ohm.worst.ohm) < 0)


def test_vane_torque_follows_the_sine_of_the_angle() -> None:
    """sin 90, 75, 60, 45, 30° between the two fluxes (induction-relay textbook, read)."""
    vane = VaneRelay(100.0, 0.0, 10.0, 7.0, local_v=110.0, rated_local_v=110.0, ideal_angle_rad=math.pi / 2)
    for degree in (90, 75, 60, 45, 30):
        pull = float(vane.pull_v(np.asarray(12.0 * np.exp(1j * math.radians(degree)))))
        assert pull == pytest.approx(12.0 * math.sin(math.radians(degree)), rel=1e-12)


def test_vane_picks_only_with_both_windings() -> None:
    """Common practice, no source."""
    vane = VaneRelay(100.0, 0.0, 10.0, 7.0, local_v=0.0, rated_local_v=110.0, ideal_angle_rad=0.0)
    assert float(vane.pull_v(np.asarray(100.0 + 0j))) == 0.0


@pytest.mark.parametrize(("km", "immunity_v"), [(0.45, 50.0), (0.75, 80.0)])
def test_immunity_and_length_imply_the_same_rail(km: float, immunity_v: float) -> None:
    """300 A over 0.45 km at 50 V and over 0.75 km at 80 V: about 0.36 ohm/km (IR SEM 2021, computed)."""
    relay = Relay(1e6, 0.0, 1.4, 0.95)
    circuit = PlainCircuit(50.0, Feed(1.0, 1e-6), Line(km * 1000, 0.72, math.inf), relay)
    volts = abs(complex(interference(circuit, 300.0, 0.36, "none", 1.0)))
    assert volts == pytest.approx(immunity_v, rel=0.03)


def test_shunt_in_the_operating_point_is_the_residual() -> None:
    found = operating_point(HELM, Shunt(500.0, 0.5)).relay_current_a
    assert float(found.real) * 1000 == pytest.approx(28.31, abs=0.005)
