"""The bundled book against the Indian Railways Signal Engineering Manual, version 3.0, June 2021, chapter 17.

Each figure stands beside its clause and standing: read, quoted second hand, or recalled from memory.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from service.application import books, editions
from service.rules.facts import SectionRecord
from service.rules.limits import Edition, Limit, applying
from service.rules.words import (
    CircuitKind,
    EditionState,
    Hazard,
    Place,
    RelativeTo,
    SectionState,
    Sleepers,
    Traction,
)


def bundled() -> Edition:
    [found] = [new for new in editions.bundled() if new.book == "in-sem-2021"]
    text = editions.checked(found.book, found.edition, found.content())
    return books.edition_of(found.book, found.edition, EditionState.DRAFT.value, None, None, "", text)


MANUAL = bundled()
WRONG, RIGHT = Hazard.WRONG_SIDE, Hazard.RIGHT_SIDE

PLAIN = SectionRecord(
    section="M1",
    version=1,
    state=SectionState.IN_USE,
    commissioned_on=None,
    circuit_kind=CircuitKind.DC,
    traction=Traction.NONE,
    place=Place.BLOCK,
    sleepers=Sleepers.CONCRETE,
    length_m=300.0,
    relay_type="dc_neutral_9_ohm",
    choke=False,
)
ELECTRIFIED = replace(
    PLAIN,
    circuit_kind=CircuitKind.DC_AC_IMMUNE,
    traction=Traction.AC_OVERHEAD,
    return_rails=1,
    relay_type="ac_immune_9_ohm",
)


def by_name(name: str) -> Limit:
    [found] = [limit for limit in MANUAL.limits if limit.limit == name]
    return found


def applied(record: SectionRecord, quantity: str) -> list[Limit]:
    return [limit for limit, missing in applying(MANUAL, record).limits if limit.quantity == quantity]


@pytest.mark.parametrize("sleepers", list(Sleepers))
def test_17_3_1_f_half_an_ohm_whatever_the_sleepers(sleepers: Sleepers) -> None:
    """Clause 17.3.1(f): minimum train shunt 0.5 Ω, all sleepers (read)."""
    [found] = applied(replace(PLAIN, sleepers=sleepers), "drop_shunt")
    assert found.minimum is not None
    assert (found.minimum.value, found.minimum.hazard) == (0.5, WRONG)
    assert (found.clause, found.standing, found.confirmed) == ("17.3.1(f)", "read", True)
    assert not found.ballast_dry


@pytest.mark.parametrize(("place", "least"), [(Place.BLOCK, 4), (Place.YARD, 2)])
def test_minimum_ballast(place: Place, least: float) -> None:
    """Table before 17.2.10: 4 Ω·km in block section, 2 Ω·km in yard (read)."""
    [found] = applied(replace(PLAIN, place=place), "ballast_resistance")
    assert found.minimum is not None
    assert found.minimum.value == least
    assert found.confirmed


def test_17_1_1_c_minimum_length() -> None:
    """Clause 17.1.1(c): 26 m (read)."""
    found = by_name("minimum_length")
    assert found.minimum is not None
    assert (found.minimum.value, found.quantity, found.confirmed) == (26, "length", True)


def test_17_3_1_g_relay_leads_swapped() -> None:
    """Clause 17.3.1(g): DC relay leads swapped every 3 months (read)."""
    [found] = MANUAL.tasks
    assert (found.task, found.interval, found.clause) == ("relay_leads_swapped", "P3M", "17.3.1(g)")
    assert found.confirmed


@pytest.mark.parametrize(
    ("relay_type", "low", "high"), [("ac_immune_9_ohm", 1.25, 3.0), ("ac_immune_biased", 1.22, 2.35)]
)
def test_excitation(relay_type: str, low: float, high: float) -> None:
    """Chapter 17, relay working: 125 to 300 %, biased 122 to 235 % of rated pick-up (second hand)."""
    [found] = applied(replace(ELECTRIFIED, relay_type=relay_type), "relay_voltage")
    assert found.relative_to is RelativeTo.RELAY_PICK_UP
    assert found.minimum is not None
    assert found.maximum is not None
    assert (found.minimum.value, found.minimum.hazard) == (low, RIGHT)
    assert (found.maximum.value, found.maximum.hazard) == (high, WRONG)
    assert (found.standing, found.confirmed) == ("second_hand", False)


def test_residual_at_most_85_percent_of_drop_away_with_half_an_ohm() -> None:
    """Older edition, part II: 85 % of the drop-away voltage with the 0.5 Ω shunt (from memory)."""
    found = by_name("residual")
    assert found.maximum is not None
    assert (found.maximum.value, found.maximum.hazard) == (0.85, WRONG)
    assert (found.relative_to, found.shunt_ohm) == (RelativeTo.RELAY_DROP_AWAY, 0.5)
    assert (found.standing, found.confirmed) == ("memory", False)


def test_release_at_least_68_percent() -> None:
    """Chapter 17: drop-away over pick-up at least 68 % (second hand)."""
    found = by_name("release")
    assert found.minimum is not None
    assert (found.minimum.value, found.quantity) == (0.68, "relay_drop_away_voltage")
    assert (found.relative_to, found.confirmed) == (RelativeTo.RELAY_PICK_UP, False)


@pytest.mark.parametrize(
    ("quantity", "length_m", "most"),
    [
        ("stray_voltage", 99.9, 0.010),
        ("stray_voltage", 100.0, 0.010),  # up to 100 m
        ("stray_voltage", 100.1, 0.100),  # above
        ("stray_current", 99.9, 0.010),  # under 100 m
        ("stray_current", 100.0, 0.100),  # from 100 m
        ("stray_current", 100.1, 0.100),
    ],
)
def test_stray(quantity: str, length_m: float, most: float) -> None:
    """Chapter 17: 10 mV up to 100 m, 100 mV above; 10 mA under 100 m, 100 mA from 100 m (second hand)."""
    [found] = applied(replace(PLAIN, length_m=length_m), quantity)
    assert found.maximum is not None
    assert (found.maximum.value, found.maximum.hazard, found.confirmed) == (most, WRONG, False)


def test_rail_to_earth() -> None:
    """Training notes: 0.1 V across 9, 4 or 2.25 Ω (read)."""
    found = by_name("rail_to_earth")
    assert found.maximum is not None
    assert (found.maximum.value, found.confirmed) == (0.1, True)


def case(record: SectionRecord, longest: float, hazard: Hazard, **changes: Any) -> tuple[Any, ...]:
    return replace(record, **changes), longest, hazard


@pytest.mark.parametrize(
    ("record", "longest", "hazard"),
    [
        case(PLAIN, 1000, RIGHT),  # no traction, block, 4 Ω·km
        case(PLAIN, 670, RIGHT, place=Place.YARD),  # no traction, yard, 2 Ω·km
        case(ELECTRIFIED, 450, WRONG, sleepers=Sleepers.WOOD),
        case(ELECTRIFIED, 450, WRONG, sleepers=Sleepers.WOOD, place=Place.YARD),
        case(ELECTRIFIED, 450, WRONG),  # concrete, block, 4 Ω·km
        case(ELECTRIFIED, 350, WRONG, place=Place.YARD),  # concrete, yard, 2 Ω·km
        case(ELECTRIFIED, 750, WRONG, place=Place.YARD, relay_type="ac_immune_biased", choke=True),
    ],
)
def test_the_length_table(record: SectionRecord, longest: float, hazard: Hazard) -> None:
    """Length table of chapter 17, for a catenary of up to 300 or 600 A (read)."""
    [found] = [limit for limit in applied(record, "length") if limit.maximum is not None]
    assert found.maximum is not None
    assert (found.maximum.value, found.maximum.hazard) == (longest, hazard)
    assert (found.standing, found.confirmed) == ("read", True)


def test_the_table_says_for_which_catenary_current_it_holds() -> None:
    """Section 5: up to 300 A on single and 600 A on double track (read)."""
    [found] = [new for new in editions.bundled() if new.book == "in-sem-2021"]
    [note] = [note for note in found.notes if note.clause == "section 5"]
    assert "300 A on single and 600 A on double track" in note.note
    assert note.confirmed


def test_relay_data() -> None:
    """Pick-up 1.40 V, immunity 50 V AC; biased 1.75 V, 80 V AC (second hand)."""
    [found] = [new for new in editions.bundled() if new.book == "in-sem-2021"]
    [note] = [note for note in found.notes if note.clause == "chapter 17, relay data"]
    assert all(figure in note.note for figure in ("1.40 V", "50 V AC", "1.75 V", "80 V AC"))
    assert not note.confirmed
