"""Seasons, windows of settings, longest circuits, and the search under them."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from service.electrical.changes import with_ballast, with_emf, with_feed_ohm, with_length
from service.electrical.circuit import Feed, PlainCircuit, operating_point
from service.electrical.longest import longest
from service.electrical.presets import RailEnd, ac_single_rail
from service.electrical.relay import Relay
from service.electrical.season import season
from service.electrical.setting import Requirements, setting, stepped
from service.electrical.shunt import residual_voltage, shunt_limits
from service.electrical.spans import peak, spans
from service.errors import NoAnswerError, NonPhysicalError
from support.electrical import ac, circuits, uk, vane

NEEDS = Requirements(
    least_pick_up=1.1,
    minimum_shunt_ohm=0.5,
    residual_share=0.85,
    most_pick_up=math.inf,
    wet_ohm_km=3.0,
    dry_ohm_km=math.inf,
)


def test_spans_find_every_interval() -> None:
    grid = np.linspace(0.0, 3 * math.pi, 40)
    found = spans(np.sin, grid)
    assert [end for span in found for end in span] == pytest.approx([0, math.pi, 2 * math.pi, 3 * math.pi])
    assert spans(lambda x: -1 - x, grid) == ()


@pytest.mark.parametrize("top", [-0.5, 0.2, 0.75, 2.0])
def test_peak_is_found_inside_and_at_the_ends(top: float) -> None:
    found = peak(lambda x: -np.abs(x - top), np.linspace(0.0, 1.0, 9))
    assert found == pytest.approx(min(max(top, 0.0), 1.0), abs=1e-6)


def test_season_curve_and_intervals_agree() -> None:
    found = season(uk(), 0.8, math.inf, 1.0)
    assert math.isinf(found.ballast_ohm_km[-1])
    assert found.ballast_ohm_km[0] == pytest.approx(0.8)
    pull = np.abs(found.relay_v)
    (up,), (held,), (shunts,) = found.picks_up, found.holds, found.shunts
    assert held[0] < up[0]
    for span, level in ((up, 1.62), (held, 1.10)):
        inside = found.ballast_ohm_km > span[0]
        assert (pull[inside] >= level).all()
        assert (pull[~inside] < level * 1.001).all()
        edge = operating_point(with_ballast(uk(), span[0]))
        assert float(edge.relay_v.real) == pytest.approx(level, rel=1e-9)
    assert math.isinf(up[1])
    assert shunts[0] == pytest.approx(0.8)
    at_edge = shunt_limits(with_ballast(uk(), shunts[1])).drop_shunt_ohm.worst.ohm
    assert float(at_edge) == pytest.approx(1.0, rel=1e-9)


def test_a_season_may_have_no_good_interval() -> None:
    found = season(uk(), 0.8, math.inf, 0.5)
    assert found.shunts == ((pytest.approx(0.8), math.inf),)
    assert season(with_emf(uk(), 0.1), 0.8, math.inf, 0.5).picks_up == ()


def test_a_vane_season_need_not_be_monotone() -> None:
    """Wetter ballast turns the control voltage, here towards the ideal angle at first and then past it."""
    circuit = replace(vane(-1.4), feed=Feed(6.0, 0.3 + 2.0j))
    circuit = with_length(circuit, 1500.0)
    level = float(np.max(circuit.relay.pull_v(season(circuit, 0.5, math.inf, 0.1).relay_v))) * 0.99
    tight = replace(circuit, relay=replace(circuit.relay, pick_up_v=level))
    (span,) = season(tight, 0.5, math.inf, 0.1).picks_up
    assert 0.5 < span[0] < span[1] < math.inf


@given(circuits(dc=False), st.floats(0.5, 60), st.floats(0.5, 60))
def test_wetter_ballast_never_raises_a_relay_by_voltage(
    circuit: PlainCircuit, one: float, other: float
) -> None:
    """In AC too: a resistance across the rails never raises a voltage of a passive circuit with one feed."""
    wet, dry = sorted((one, other))
    volts = [abs(complex(operating_point(with_ballast(circuit, rho)).relay_v)) for rho in (wet, dry)]
    assert volts[0] <= volts[1] * (1 + 1e-9)


@pytest.mark.parametrize(("wet", "dry"), [(5.0, 2.0), (0.0, 2.0), (math.nan, 2.0), (1.0, -1.0)])
def test_a_season_upside_down_is_refused(wet: float, dry: float) -> None:
    with pytest.raises(NonPhysicalError):
        season(uk(), wet, dry, 0.5)


def meets(circuit: PlainCircuit, needs: Requirements) -> bool:
    """All requirements at both ends of the ballast, by residual voltages at a hundred places."""
    for ballast in (needs.wet_ohm_km, needs.dry_ohm_km):
        there = with_ballast(circuit, ballast)
        pull = float(operating_point(there).relay_v.real) / float(there.relay.pick_up_v)
        places = np.linspace(0.0, float(there.line.length_m), 101)
        left = residual_voltage(there, places, needs.minimum_shunt_ohm).real.max()
        if not needs.least_pick_up <= pull <= needs.most_pick_up:
            return False
        if left > needs.residual_share * float(there.relay.drop_away_v):
            return False
    return True


def test_a_window_is_where_the_requirements_are_met() -> None:
    """Against trying them out, by other functions."""
    for needs in (NEEDS, replace(NEEDS, most_pick_up=4.0)):
        found = setting(uk(), needs, "feed_ohm", 1.0, 30.0)
        assert found.window is not None
        low, high = found.window
        for ohm, good in (
            (low * 0.999, False),
            (low * 1.001, True),
            (high * 0.999, True),
            (high * 1.001, False),
        ):
            assert meets(with_feed_ohm(uk(), ohm), needs) is good
        assert low < found.best < high
        assert min(found.margins.values()) > 0
        assert found.opens == {}


def test_excitation_binds_when_it_is_the_tightest() -> None:
    found = setting(uk(), replace(NEEDS, most_pick_up=2.5), "feed_ohm", 1.0, 60.0)
    assert found.binds is None or found.binds[0] == "excitation"


def test_the_window_of_the_emf() -> None:
    found = setting(uk(), NEEDS, "emf_v", 1.0, 40.0)
    assert found.window is not None
    assert found.binds == ("pick_up", "shunt")
    assert meets(with_emf(uk(), found.best), NEEDS)


def test_a_window_may_end_with_the_adjustment() -> None:
    found = setting(uk(), NEEDS, "feed_ohm", 6.0, 9.0)
    assert found.window == (6.0, 9.0)
    assert found.binds == ("range", "range")


def test_a_feed_without_resistance_is_the_worst_setting_and_no_fault() -> None:
    """Nothing shunts an ideal source at its own terminals: the adjustment may begin there all the same."""
    found = setting(uk(), NEEDS, "feed_ohm", 0.0, 30.0)
    assert found.window == pytest.approx(setting(uk(), NEEDS, "feed_ohm", 1.0, 30.0).window)
    assert season(with_feed_ohm(uk(), 0.0), 3.0, math.inf, 0.5).shunts == ()


def test_conflict_names_both_and_what_would_open_it() -> None:
    needs = replace(NEEDS, minimum_shunt_ohm=2.5)
    found = setting(uk(), needs, "feed_ohm", 1.0, 60.0)
    assert found.window is None
    assert found.binds is None
    assert found.margins["pick_up"] == pytest.approx(found.margins["shunt"], abs=1e-6)
    assert found.margins["pick_up"] < 0
    assert {name for name, margin in found.opens.items() if math.isfinite(margin)} >= {"pick_up", "shunt"}
    eased = replace(needs, least_pick_up=needs.least_pick_up * (1 + found.opens["pick_up"]) * 0.999)
    assert setting(uk(), eased, "feed_ohm", 1.0, 60.0).window is not None


def test_three_in_conflict_cannot_be_opened_by_the_third() -> None:
    needs = replace(NEEDS, minimum_shunt_ohm=2.5, most_pick_up=1.2)
    opens = setting(uk(), needs, "feed_ohm", 1.0, 60.0).opens
    assert opens["excitation"] == -math.inf


def test_steps_and_taps() -> None:
    found = stepped(uk(), NEEDS, "feed_ohm", (2.0, 7.2, 25.0))
    assert [min(margins.values()) >= 0 for margins in found] == [False, True, False]
    circuit = ac_single_rail(
        50.0,
        Feed(220.0, 0.0),
        RailEnd(20.0, 1.5),
        ac().line,
        RailEnd(10.0, 0.05),
        Relay(120 + 200j, 0.0, 10.0, 6.0),
    )
    wide = replace(NEEDS, minimum_shunt_ohm=0.06, residual_share=1.0)
    taps = stepped(circuit, wide, "feed_ratio", (5.0, 20.0, 400.0))
    assert taps[0]["pick_up"] > taps[1]["pick_up"] > 0 > taps[2]["pick_up"]
    with pytest.raises(NonPhysicalError):
        stepped(uk(), NEEDS, "feed_ohm", ())
    with pytest.raises(NonPhysicalError):
        stepped(uk(), NEEDS, "feed_ratio", (5.0,))


@settings(max_examples=25)
@given(st.floats(100, 1400), st.floats(0.05, 0.95))
def test_a_shorter_dc_circuit_never_narrows_the_window(length_m: float, share: float) -> None:
    """As the ratio of the window's edges."""
    ratios = []
    for metres in (length_m, share * length_m):
        found = setting(with_length(uk(), metres), NEEDS, "emf_v", 1.0, 60.0)
        assume(found.window is not None)
        assert found.window is not None
        ratios.append(found.window[1] / found.window[0])
    assert ratios[1] >= ratios[0] * (1 - 1e-9)


def test_longest_with_the_feed_kept_and_adjusted() -> None:
    kept = longest(uk(), NEEDS, 5000.0, None)
    assert kept.binds == "pick_up"
    assert meets(with_length(uk(), kept.length_m * 0.9999), NEEDS)
    assert not meets(with_length(uk(), kept.length_m * 1.0001), NEEDS)
    adjusted = longest(uk(), NEEDS, 5000.0, ("feed_ohm", 1.0, 30.0))
    assert adjusted.length_m > kept.length_m
    at_end = setting(with_length(uk(), adjusted.length_m), NEEDS, "feed_ohm", 1.0, 30.0)
    assert min(at_end.margins.values()) == pytest.approx(0.0, abs=1e-3)


def test_longest_may_be_as_long_as_asked_or_nothing() -> None:
    assert longest(uk(), NEEDS, 500.0, None).binds == "range"
    assert longest(uk(), NEEDS, 500.0, None).length_m == 500.0
    with pytest.raises(NoAnswerError) as caught:
        longest(uk(), replace(NEEDS, minimum_shunt_ohm=20.0), 500.0, None)
    assert caught.value.code == "no_length"


def test_an_ac_window_holds_over_all_ballast() -> None:
    needs = Requirements(1.05, 0.06, 0.85, math.inf, 2.0, math.inf)
    found = setting(ac(length_m=600.0), needs, "feed_ohm", 0.2, 12.0)
    assert found.window is not None
    inside = with_feed_ohm(ac(length_m=600.0), found.best + 0.5j)
    for ballast in (2.0, 3.0, 7.0, 30.0, math.inf):
        there = with_ballast(inside, ballast)
        assert abs(complex(operating_point(there).relay_v)) >= 1.05 * there.relay.pick_up_v
        assert float(shunt_limits(there).drop_shunt_ohm.worst.ohm) >= 0.06


@pytest.mark.parametrize(
    "changes",
    [
        {"least_pick_up": 0.0},
        {"minimum_shunt_ohm": math.nan},
        {"residual_share": 1.1},
        {"most_pick_up": 1.0},
        {"wet_ohm_km": 20.0, "dry_ohm_km": 10.0},
    ],
)
def test_requirements_that_nothing_meets_are_refused(changes: dict[str, float]) -> None:
    with pytest.raises(NonPhysicalError):
        replace(NEEDS, **changes)


def test_an_adjustment_upside_down_is_refused() -> None:
    with pytest.raises(NonPhysicalError):
        setting(uk(), NEEDS, "feed_ohm", 5.0, 5.0)
