"""Ballast from readings, fitted circuits, forecasts: known answers, honest uncertainties."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.electrical.changes import with_ballast, with_emf, with_feed_ohm, with_length
from service.electrical.circuit import Feed, PlainCircuit, operating_point
from service.electrical.estimate import (
    BothEnds,
    Reading,
    ballast_from_readings,
    currents_from_voltages,
    exact_pair,
    working_drop_away,
)
from service.electrical.fit import Doubt, Sight, fit
from service.electrical.forecast import forecast
from service.electrical.shunt import shunt_limits
from service.errors import NoAnswerError, NonPhysicalError
from support.electrical import ac, circuits, uk, vane

DOUBT = Doubt(ballast=1.0, emf=0.02, feed_ohm=0.3, loop_ohm=0.1, drop_away=0.05)


def both_ends(circuit: PlainCircuit, accuracy: float) -> BothEnds:
    """What perfect meters would read at both ends, with the accuracy put to them."""
    point = operating_point(circuit)
    rail_a = point.relay_end_rail_v / (circuit.relay.impedance_ohm + circuit.relay.series_ohm)
    values = (point.feed_end_rail_v, point.feed_current_a, point.relay_end_rail_v, rail_a)
    return BothEnds(*(Reading(float(v.real), accuracy * float(v.real)) for v in values))


@given(circuits(dc=True), st.floats(0.5, 20))
def test_ballast_is_found_again(circuit: PlainCircuit, ballast: float) -> None:
    there = with_ballast(circuit, ballast)
    found = ballast_from_readings(
        both_ends(there, 0.0), there.line.length_m, there.line.loop_ohm_per_km.real, 0.0
    )
    assert float(found.ballast_ohm_km) == pytest.approx(ballast, rel=1e-6)
    assert float(found.handbook_ohm_km) >= ballast * (1 - 1e-6)


def test_without_rail_impedance_the_handbook_is_exact() -> None:
    circuit = uk(4.0, loop_ohm_per_km=0.0)
    found = ballast_from_readings(both_ends(circuit, 0.005), 1000.0, 0.0, 0.1)
    assert float(found.ballast_ohm_km) == pytest.approx(4.0)
    assert float(found.handbook_ohm_km) == float(found.ballast_ohm_km)


def test_stated_uncertainty_is_what_trials_scatter() -> None:
    """Four thousand trials with meters of 0.5 % and rails of 5 %."""
    chance = np.random.default_rng(11)
    circuit = uk(4.0, loop_ohm_per_km=0.34)
    exact = both_ends(circuit, 0.005)
    noisy = BothEnds(
        *(
            Reading(r.value * (1 + 0.005 * chance.standard_normal(4000)), r.u)
            for r in (exact.feed_v, exact.feed_a, exact.relay_v, exact.relay_a)
        )
    )
    loop = 0.34 * (1 + 0.05 * chance.standard_normal(4000))
    stated = float(ballast_from_readings(exact, 1000.0, 0.34, 0.05).relative_u)
    scatter = np.log(ballast_from_readings(noisy, 1000.0, loop, 0.05).ballast_ohm_km).std()
    assert float(scatter) == pytest.approx(stated, rel=0.05)


def test_the_exact_pair_is_ill_conditioned_on_short_circuits() -> None:
    """With meters of 0.5 % a good part of the trials on 350 m cannot be solved at all (computed)."""
    chance = np.random.default_rng(5)
    circuit = replace(with_length(uk(10.6), 350.0), relay=replace(uk().relay, impedance_ohm=60.0))
    exact = both_ends(circuit, 0.0)
    solvable = 0
    for _ in range(300):
        readings = [
            Reading(r.value * (1 + 0.005 * chance.standard_normal()), 0.0)
            for r in (exact.feed_v, exact.feed_a, exact.relay_v, exact.relay_a)
        ]
        try:
            exact_pair(BothEnds(*readings), 350.0)
            solvable += 1
        except NoAnswerError:
            pass
    assert 0.4 < solvable / 300 < 0.8
    with pytest.raises(NoAnswerError) as caught:
        exact_pair(both_ends(circuit, 0.005), 350.0)
    assert caught.value.code == "ill_conditioned"
    assert "voltages" in caught.value.reason


def test_the_exact_pair_where_it_is_well_conditioned() -> None:
    circuit = uk(2.0, length_m=1500.0, loop_ohm_per_km=0.34)
    loop, ballast = exact_pair(both_ends(circuit, 0.001), 1500.0)
    assert (float(loop), float(ballast)) == pytest.approx((0.34, 2.0), rel=1e-9)


def test_currents_that_do_not_differ_tell_no_ballast() -> None:
    for ask in (
        lambda ends: ballast_from_readings(ends, 1000.0, 0.0578, 0.05),
        lambda ends: exact_pair(ends, 1000.0),
    ):
        ends = both_ends(uk(4000.0, loop_ohm_per_km=1.0), 0.005)
        with pytest.raises(NoAnswerError) as caught:
            ask(ends)
        assert caught.value.code == "ill_conditioned"
        assert "currents" in caught.value.reason


def test_currents_are_derived_where_not_measured() -> None:
    circuit = uk(4.0)
    exact = both_ends(circuit, 0.002)
    derived = currents_from_voltages(circuit, exact.feed_v, exact.relay_v, 0.01, 0.02)
    assert float(derived.feed_a.value) == pytest.approx(exact.feed_a.value)
    assert float(derived.relay_a.value) == pytest.approx(exact.relay_a.value)
    assert float(derived.relay_a.u) == pytest.approx(exact.relay_a.value * math.hypot(0.002, 0.02))
    with pytest.raises(NonPhysicalError) as caught:
        currents_from_voltages(circuit, Reading(11.0, 0.0), exact.relay_v, 0.01, 0.02)
    assert caught.value.field == ("feed_v",)
    with pytest.raises(NonPhysicalError) as caught:
        currents_from_voltages(ac(), exact.feed_v, exact.relay_v, 0.01, 0.02)
    assert caught.value.field == ("frequency_hz",)


@pytest.mark.parametrize("circuit", [uk(), ac(), vane(0.3)])
def test_working_drop_away_from_a_shunt_test(circuit: PlainCircuit) -> None:
    """What the model calls the drop shunt gives its own drop-away back, at every place."""
    drop = shunt_limits(circuit).drop_shunt_ohm
    for position_m, ohm in ((0.0, drop.feed_end), (1000.0, drop.relay_end)):
        found = working_drop_away(circuit, position_m, ohm)
        assert float(found) == pytest.approx(float(circuit.relay.drop_away_v), rel=1e-9)


@pytest.mark.parametrize("bad", [Reading(0.0, 0.1), Reading(-1.0, 0.1), Reading(1.0, -0.1)])
def test_readings_that_cannot_be_meant(bad: Reading) -> None:
    with pytest.raises(NonPhysicalError):
        BothEnds(bad, Reading(1.0, 0.0), Reading(1.0, 0.0), Reading(1.0, 0.0))


def sight_of(circuit: PlainCircuit, accuracy: float) -> Sight:
    """Everything a thorough visit reads, exact, with an accuracy put to it."""
    point, drop = operating_point(circuit), shunt_limits(circuit).drop_shunt_ohm

    def read(value: object) -> Reading:
        size = np.abs(np.asarray(value))
        return Reading(size, accuracy * size)

    return Sight(
        relay_v=read(point.relay_v),
        relay_end_rail_v=read(point.relay_end_rail_v),
        feed_end_rail_v=read(point.feed_end_rail_v),
        feed_current_a=read(point.feed_current_a),
        feed_drop_shunt_ohm=read(drop.feed_end),
        relay_drop_shunt_ohm=read(drop.relay_end),
    )


@pytest.mark.parametrize("circuit", [uk(5.0), ac(5.0), vane(0.3)])
def test_a_fit_finds_what_was_changed(circuit: PlainCircuit) -> None:
    """The register is off in ballast and feed; the readings are of the true circuit."""
    off = with_feed_ohm(with_ballast(circuit, 12.0), np.asarray(circuit.feed.series_ohm) * 1.4)
    found = fit(off, sight_of(circuit, 0.0005), replace(DOUBT, ballast=2.0, feed_ohm=1.0))
    assert found.settled
    ballast = float(circuit.line.ballast_ohm_km)
    assert float(found.circuit.line.ballast_ohm_km) == pytest.approx(ballast, rel=0.05)
    assert complex(found.circuit.feed.series_ohm) == pytest.approx(
        complex(np.asarray(circuit.feed.series_ohm)), rel=0.05
    )


def test_a_fit_without_news_stays_with_the_register() -> None:
    """A reading that was not taken weighs nothing: its uncertainty is infinite."""
    found = fit(uk(5.0), Sight(relay_v=Reading(1.0, math.inf)), DOUBT)
    assert float(found.circuit.line.ballast_ohm_km) == pytest.approx(5.0)
    expected = np.diag([1.0, 0.02**2, 0.3**2, 0.1**2, 0.05**2])
    assert found.covariance == pytest.approx(expected)


def test_readings_only_ever_narrow_the_doubt() -> None:
    before = np.array([1.0, 0.02, 0.3, 0.1, 0.05])
    after = np.sqrt(np.diagonal(fit(uk(5.0), sight_of(uk(5.0), 0.01), DOUBT).covariance))
    assert (after <= before * (1 + 1e-6)).all()
    assert after[0] < 0.2


def test_many_circuits_at_once_are_each_their_own() -> None:
    ballast = np.array([2.0, 5.0, 20.0])
    many = fit(uk(8.0), sight_of(uk(ballast), 0.005), DOUBT)
    for at, one in enumerate(ballast):
        alone = fit(uk(8.0), sight_of(uk(one), 0.005), DOUBT)
        assert many.circuit.line.ballast_ohm_km[at] == pytest.approx(
            float(alone.circuit.line.ballast_ohm_km), rel=1e-6
        )


def test_a_fit_that_does_not_settle_says_so() -> None:
    """A reading that would take more steps, each of bounded length, than the fit may take."""
    wide = Doubt(ballast=10.0, emf=10.0, feed_ohm=10.0, loop_ohm=10.0, drop_away=10.0)
    found = fit(uk(5.0), Sight(relay_v=Reading(1e30, 1e28)), wide)
    assert not found.settled


def test_doubts_beyond_all_arithmetic_are_told() -> None:
    boundless = Doubt(ballast=1e12, emf=1e12, feed_ohm=1e12, loop_ohm=1e12, drop_away=1e12)
    with pytest.raises(NoAnswerError) as caught:
        fit(uk(5.0), Sight(relay_v=Reading(5.0, 1e-9), feed_end_rail_v=Reading(5.1, 1e-9)), boundless)
    assert caught.value.code == "ill_conditioned"


@pytest.mark.parametrize(
    ("circuit", "sight", "doubt"),
    [
        (uk(5.0), Sight(), DOUBT),
        (uk(math.inf), Sight(relay_v=Reading(1.0, 0.1)), DOUBT),
        (uk(5.0), Sight(relay_v=Reading(-1.0, 0.1)), DOUBT),
        (uk(5.0), Sight(relay_v=Reading(1.0, 0.0)), DOUBT),
        (uk(5.0), Sight(relay_v=Reading(1.0, 0.1)), replace(DOUBT, emf=0.0)),
    ],
)
def test_what_cannot_be_fitted_is_refused(circuit: PlainCircuit, sight: Sight, doubt: Doubt) -> None:
    with pytest.raises(NonPhysicalError):
        fit(circuit, sight, doubt)


def test_a_feed_turned_up_in_the_wet_fails_dry() -> None:
    """Both pass on the day; the forecast tells them apart by the drop shunt."""
    register = with_feed_ohm(uk(6.0), 9.0)
    turned_up = with_feed_ohm(uk(3.0), 4.2)
    left_alone = with_feed_ohm(uk(12.0), 9.0)
    found = {}
    for name, true in (("up", turned_up), ("alone", left_alone)):
        sight = sight_of(true, 0.01)
        answer = forecast(register, sight, replace(DOUBT, feed_ohm=0.5), 2.5, math.inf)
        truth = float(shunt_limits(with_ballast(true, math.inf)).drop_shunt_ohm.worst.ohm)
        assert float(answer.dry_drop_shunt_ohm) == pytest.approx(
            truth, rel=3 * float(answer.dry_relative_u) + 0.02
        )
        wet = abs(complex(operating_point(with_ballast(true, 2.5)).relay_v))
        assert abs(float(answer.wet_pull_v) - wet) < 3 * float(answer.wet_u_v) + 0.05
        found[name] = float(answer.dry_drop_shunt_ohm)
    assert found["up"] < 0.6 < found["alone"]


def test_stated_forecast_uncertainty_covers_trials() -> None:
    chance = np.random.default_rng(3)
    true, count = uk(5.0), 2000
    exact = sight_of(true, 0.01)

    def noisy(reading: Reading | None) -> Reading:
        assert reading is not None
        return Reading(reading.value * (1 + 0.01 * chance.standard_normal(count)), reading.u)

    sight = Sight(relay_v=noisy(exact.relay_v), relay_drop_shunt_ohm=noisy(exact.relay_drop_shunt_ohm))
    feed = 7.2 * np.exp(0.1 * chance.standard_normal(count))
    emf = 10.0 * np.exp(0.02 * chance.standard_normal(count))
    # The register's values scatter about the truth as its doubts say.
    register = replace(uk(5.0), feed=Feed(emf, feed))
    found = forecast(register, sight, Doubt(0.8, 0.02, 0.1, 1e-3, 1e-3), 2.5, math.inf)
    truth = float(shunt_limits(with_ballast(true, math.inf)).drop_shunt_ohm.worst.ohm)
    assert found.settled.all()
    off = np.log(found.dry_drop_shunt_ohm / truth) / found.dry_relative_u
    assert 0.6 < float(off.std()) < 1.3


def test_a_circuit_down_even_when_dry_has_no_dry_drop_shunt() -> None:
    weak = with_emf(uk(5.0), np.array([1.2, 10.0]))
    sight = Sight(relay_v=Reading(np.abs(operating_point(weak).relay_v), 0.01))
    found = forecast(weak, sight, replace(DOUBT, emf=0.001, feed_ohm=0.01), 2.5, math.inf)
    assert found.released_dry.tolist() == [True, False]
    assert math.isinf(found.dry_drop_shunt_ohm[0])
    assert math.isinf(found.dry_relative_u[0])
    assert np.isfinite(found.dry_relative_u[1])


@pytest.mark.parametrize(("wet", "dry"), [(0.0, math.inf), (2.0, 0.0), (math.nan, 5.0)])
def test_a_forecast_to_no_ballast_is_refused(wet: float, dry: float) -> None:
    with pytest.raises(NonPhysicalError):
        forecast(uk(5.0), Sight(relay_v=Reading(1.0, 0.1)), DOUBT, wet, dry)
