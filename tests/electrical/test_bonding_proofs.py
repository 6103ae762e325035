"""Bonding proofs: series and parallel bonding, duplicated bonds, plain line, second faults."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest

from service.electrical.bonding import Stretch, bonding_proof, second_faults
from service.electrical.hiding import Ranges
from service.electrical.layout import Bond, Joint, Leg, with_break
from service.electrical.network import Leakage, network
from service.errors import NonPhysicalError
from support.electrical import plain_line, points

DRY = Ranges((4.0, 20.0), None)


def test_series_bonding_reveals_every_open_bond_and_rail() -> None:
    """Preferred because a broken bond or rail then releases the relay (common practice, no source)."""
    proof = bonding_proof(points(series=True), Ranges((20.0, 60.0), None), 0.5)
    hung_on = {name: proof.opened.pop(name) for name in ("k4", "c/rail1")}
    assert all(fault.revealed for fault in proof.opened.values())
    assert all(fault.undetected_stretches == () for fault in proof.opened.values())
    # Rail 1 of the diverging leg carries nothing: it hangs on one bond, as in parallel bonding.
    assert not any(fault.revealed for fault in hung_on.values())
    assert hung_on["k4"].undetected_stretches == (Stretch("c", 0.0, 40.0),)


def test_parallel_bonding_does_not() -> None:
    """In a parallel-bonded leg a broken bond or rail releases nothing (common practice, no source)."""
    proof = bonding_proof(points(series=False), DRY, 0.5)
    for name in ("k3", "k4"):
        fault = proof.opened[name]
        assert not fault.revealed
        assert fault.undetected_stretches == (Stretch("c", 0.0, 40.0),)
    for name in ("c/rail1", "c/rail2"):
        fault = proof.opened[name]
        assert not fault.revealed
        assert fault.worst_position_m is not None
        assert fault.undetected_stretches[-1].to_m == 40.0
    for name in ("k1", "k2", "a/rail1", "b/rail2"):
        assert proof.opened[name].revealed


def test_a_duplicated_bond_is_not_missed_by_relay_or_train() -> None:
    proof = bonding_proof(points(series=False, duplicated=True), DRY, 0.5)
    for name in ("k3", "k3'"):
        assert not proof.opened[name].revealed
        assert proof.opened[name].undetected_stretches == ()
    both = second_faults(points(series=False, duplicated=True), DRY, 0.5, "k3")
    assert both.opened["k3'"].undetected_stretches == (Stretch("c", 0.0, 40.0),)
    assert "k3" not in both.opened


def test_a_joint_shorted_in_series_bonding_is_revealed() -> None:
    """The joint at the end of the leg through which rail 2 runs."""
    proof = bonding_proof(points(series=True), DRY, 0.5)
    assert proof.shorted["ij"].revealed
    assert proof.shorted["ij"].worst_position_m is None


def test_a_joint_between_rails_of_the_same_side_is_not_revealed() -> None:
    layout = points(series=False, joints=(Joint("j", ("b1", "c1")),))
    fault = bonding_proof(layout, DRY, 0.5).shorted["j"]
    assert not fault.revealed
    assert fault.undetected_stretches == ()
    assert second_faults(layout, DRY, 0.5, "j").shorted == {}


def test_a_break_in_plain_line_is_not_revealed_through_earth() -> None:
    """10 V, 7.2 ohm, 20 ohm relay, 1 km, 0.2 S/km each rail to earth: 1.33 V in the middle (computed)."""
    layout = plain_line(ballast_ohm_km=math.inf, rail_to_earth_ohm_km=5.0)
    proof = bonding_proof(layout, Ranges((math.inf, math.inf), (5.0, 5.0)), 0.5)
    fault = proof.opened["a/rail1"]
    assert fault.relay_v.real == pytest.approx(1.33, abs=0.005)
    assert not fault.revealed
    assert fault.undetected_stretches == ()
    unknown = bonding_proof(plain_line(), Ranges((10.0, 10.0), None), 0.5)
    assert unknown.opened["a/rail1"].worst_relay_v.real == pytest.approx(fault.worst_relay_v.real, rel=1e-6)
    assert unknown.relay_v.real == pytest.approx(proof.relay_v.real, rel=1e-6)


@pytest.mark.parametrize("ranges", [Ranges((2.0, 60.0), None), Ranges((4.0, 60.0), (2.0, 40.0))])
def test_the_worst_is_the_worst_of_everything(ranges: Ranges) -> None:
    """Against a search over leakages and places, none of them better; and the place named has it."""
    layout = plain_line()
    fault = bonding_proof(layout, ranges, 0.5).opened["a/rail2"]
    ballast = 1 / np.geomspace(*ranges.ballast_ohm_km, 60)
    if ranges.rail_to_earth_ohm_km is None:
        leakage = Leakage(np.zeros(60), 2 * ballast)
    else:
        earth = 1 / np.geomspace(*ranges.rail_to_earth_ohm_km, 60)
        pairs = np.array(list(itertools.product(ballast, earth)))
        leakage = Leakage(pairs[:, 0], pairs[:, 1])
    volts = np.abs(network(layout, leakage).broken_v(layout.legs[0], 1, np.linspace(0.0, 1000.0, 201)))
    assert abs(fault.worst_relay_v) >= volts.max() * (1 - 1e-9)
    assert abs(fault.worst_relay_v) <= volts.max() * (1 + 1e-3)
    assert fault.worst_position_m is not None
    cut = with_break(layout, layout.legs[0], 1, fault.worst_position_m)
    assert np.abs(network(cut, leakage).relay_v()).max() == pytest.approx(abs(fault.worst_relay_v), rel=1e-3)


def test_second_faults_after_a_broken_rail_answer_for_the_whole_leg() -> None:
    layout = points(series=False)
    first = bonding_proof(layout, DRY, 0.5).opened["c/rail1"]
    assert not first.revealed
    after = second_faults(layout, DRY, 0.5, "c/rail1")
    assert set(after.opened) == {
        "k1",
        "k2",
        "k3",
        "k4",
        *(f"{leg}/rail{rail}" for leg in "abc" for rail in (1, 2)),
    }
    assert after.opened["a/rail1"].revealed
    assert not after.opened["c/rail2"].revealed


def test_plain_line_cut_inside_keeps_its_stretches_in_metres_of_the_leg() -> None:
    """A break in one leg of two in parallel is not revealed; the train behind it is not either."""
    layout = plain_line(
        legs=(
            Leg("a", ("f1", "f2"), ("r1", "r2"), 1000.0),
            Leg("c", ("f1", "f2"), ("g1", "g2"), 200.0),
        )
    )
    fault = bonding_proof(layout, Ranges((3.0, 60.0), None), 0.5).opened["c/rail1"]
    assert not fault.revealed
    assert fault.worst_position_m == 0.0
    assert fault.undetected_stretches == (Stretch("c", 0.0, 200.0),)
    inside = second_faults(layout, Ranges((3.0, 60.0), None), 0.5, "a/rail1").opened
    assert {"a/rail1", "a/rail2", "c/rail1"} <= set(inside)


def test_stretches_that_meet_at_the_break_are_one() -> None:
    """A train of 100 ohm goes undetected everywhere, also on both sides of where the rail is cut."""
    fault = bonding_proof(plain_line(), Ranges((10.0, 10.0), None), 100.0).opened["a/rail1"]
    assert fault.worst_position_m == pytest.approx(569.0, abs=0.5)
    assert fault.undetected_stretches == (Stretch("a", 0.0, 1000.0),)


def test_ac_layouts_are_proved_as_well() -> None:
    layout = replace(points(series=False), frequency_hz=50.0, loop_ohm_per_km=0.3 + 0.6j)
    proof = bonding_proof(layout, DRY, 0.3)
    assert proof.opened["k1"].revealed
    assert not proof.opened["k3"].revealed


def test_a_layout_that_does_not_hang_together_is_not_proved() -> None:
    wrong = points(series=True, bonds=(Bond("k", ("b1", "b2"), 0.0015),))
    for ask in (bonding_proof, lambda *args: second_faults(*args, "k")):
        with pytest.raises(NonPhysicalError):
            ask(wrong, DRY, 0.5)


def test_only_a_fault_that_there_is_can_be_the_first() -> None:
    with pytest.raises(NonPhysicalError) as caught:
        second_faults(points(series=True), DRY, 0.5, "k9")
    assert caught.value.field == ("first",)


@pytest.mark.parametrize(
    ("ballast", "earth", "field"),
    [
        ((5.0, 2.0), None, "ballast_ohm_km"),
        ((0.0, 2.0), None, "ballast_ohm_km"),
        ((2.0, 5.0), (5.0, 2.0), "rail_to_earth_ohm_km"),
        ((2.0, 5.0), (-1.0, 2.0), "rail_to_earth_ohm_km"),
    ],
)
def test_ranges_upside_down_are_refused(
    ballast: tuple[float, float], earth: tuple[float, float] | None, field: str
) -> None:
    with pytest.raises(NonPhysicalError) as caught:
        Ranges(ballast, earth)
    assert caught.value.field == (field,)


def test_a_shunt_of_nothing_is_refused() -> None:
    with pytest.raises(NonPhysicalError):
        bonding_proof(points(series=True), DRY, 0.0)
