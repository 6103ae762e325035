"""Which edition is in force, and what of it applies to a section."""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.rules.facts import SectionRecord
from service.rules.limits import Applicability, Edition, applying, in_force, next_change
from service.rules.words import CircuitKind, EditionState, Place, Sleepers, Traction
from support.rule_cases import combination, edition, limit, record, task

FIRST = edition(edition="1", effective_on=date(2026, 1, 1))
SECOND = edition(edition="2", effective_on=date(2026, 3, 1))
DRAFT = edition(edition="3", state=EditionState.DRAFT, effective_on=None)
WITHDRAWN = replace(SECOND, state=EditionState.WITHDRAWN, withdrawn_on=date(2026, 5, 1))


def name(found: Edition | None) -> str | None:
    return None if found is None else found.edition


@pytest.mark.parametrize(
    ("editions", "day", "expected", "changes"),
    [
        ((), date(2026, 1, 1), None, None),
        ((FIRST,), date(2025, 12, 31), None, date(2026, 1, 1)),
        ((FIRST,), date(2026, 1, 1), "1", None),
        ((SECOND, FIRST), date(2026, 2, 28), "1", date(2026, 3, 1)),
        ((FIRST, SECOND), date(2026, 3, 1), "2", None),
        ((FIRST, DRAFT), date(2026, 9, 1), "1", None),
        ((FIRST, WITHDRAWN), date(2026, 2, 1), "1", date(2026, 3, 1)),
        ((FIRST, WITHDRAWN), date(2026, 4, 30), "2", date(2026, 5, 1)),
        ((FIRST, WITHDRAWN), date(2026, 5, 1), None, None),
        ((FIRST, replace(WITHDRAWN, withdrawn_on=date(2026, 3, 1))), date(2026, 4, 1), "1", None),
        ((FIRST, replace(WITHDRAWN, withdrawn_on=None)), date(2026, 4, 1), "1", None),
    ],
)
def test_the_edition_in_force(
    editions: tuple[Edition, ...], day: date, expected: str | None, changes: date | None
) -> None:
    """A withdrawal leaves none in force; withdrawn before its day, an edition never was."""
    assert name(in_force(editions, day)) == expected
    assert next_change(editions, day) == changes


def test_of_two_editions_of_one_day_the_later_name_counts() -> None:
    same = replace(FIRST, edition="2")
    assert name(in_force((same, FIRST), date(2026, 1, 1))) == "2"


ASKED: list[tuple[dict[str, Any], str, Any, Any]] = [
    ({"circuit_kinds": frozenset({CircuitKind.DC})}, "circuit_kind", CircuitKind.DC, CircuitKind.CODED),
    ({"tractions": frozenset({Traction.NONE})}, "traction", Traction.NONE, Traction.AC_OVERHEAD),
    ({"return_rails": frozenset({1})}, "return_rails", 1, 2),
    ({"places": frozenset({Place.YARD})}, "place", Place.YARD, Place.BLOCK),
    ({"sleepers": frozenset({Sleepers.WOOD})}, "sleepers", Sleepers.WOOD, Sleepers.SLAB),
    ({"relay_types": frozenset({"ac_vane"})}, "relay_type", "ac_vane", "other"),
    ({"receivers": frozenset({2})}, "receivers", 2, 1),
    ({"choke": False}, "choke", False, True),
    ({"points": True}, "points_ends", 1, 0),
    ({"points": False}, "points_ends", 0, 2),
    ({"length_from_m": 100.0}, "length_m", 100.0, 99.9),
    ({"length_below_m": 100.0}, "length_m", 99.9, 100.0),
    ({"length_from_m": 100.0, "length_below_m": 200.0}, "length_m", 150.0, 200.0),
    ({"catenary_from_a": 300.0}, "catenary_current_a", 300.0, 299.0),
    ({"catenary_below_a": 300.0}, "catenary_current_a", 0.0, 300.0),
]


@pytest.mark.parametrize(("asks", "attribute", "fits", "misfit"), ASKED)
def test_each_attribute(asks: dict[str, Any], attribute: str, fits: Any, misfit: Any) -> None:
    made = edition(limit(applies=Applicability(**asks)), task(applies=Applicability(**asks)))
    fitting = applying(made, record(**{attribute: fits}))
    assert [missing for _, missing in (*fitting.limits, *fitting.tasks)] == [None, None]
    unfitting = applying(made, record(**{attribute: misfit}))
    assert (unfitting.limits, unfitting.tasks) == ((), ())


@pytest.mark.parametrize(("asks", "attribute"), [(row[0], row[1]) for row in ASKED[2:]])
def test_a_silent_register_keeps_the_limit_and_names_what_it_lacks(
    asks: dict[str, Any], attribute: str
) -> None:
    made = edition(limit(applies=Applicability(**asks)))
    ((_, missing),) = applying(made, record(**{attribute: None})).limits
    assert missing == attribute


def test_what_rules_a_limit_out_outweighs_what_is_lacking() -> None:
    asks = Applicability(sleepers=frozenset({Sleepers.WOOD}), places=frozenset({Place.YARD}))
    made = edition(limit(applies=asks))
    assert applying(made, record(sleepers=None, place=Place.BLOCK)).limits == ()


def test_what_is_permitted_comes_along() -> None:
    permission = applying(edition(combination("dc", "none")), record()).permission
    assert permission is not None
    assert (permission.permitted, permission.limit.clause) == (True, "3.1")
    assert applying(edition(), record()).permission is None


def test_an_edition_remembers_profiles_not_sections() -> None:
    made = edition(limit(applies=Applicability(length_from_m=100.0, catenary_below_a=50.0)))
    for length in range(1, 99):
        applying(made, record(section=f"S{length}", length_m=float(length)))
    assert len(made.profiles) == 1
    assert replace(made).profiles == {}


records = st.builds(
    record,
    circuit_kind=st.sampled_from(CircuitKind),
    traction=st.sampled_from(Traction),
    return_rails=st.sampled_from([None, 0, 1, 2]),
    place=st.sampled_from([None, *Place]),
    sleepers=st.sampled_from([None, *Sleepers]),
    relay_type=st.sampled_from([None, "ac_vane", "other"]),
    receivers=st.sampled_from([None, 1, 2]),
    choke=st.sampled_from([None, True, False]),
    points_ends=st.sampled_from([None, 0, 1, 2]),
    length_m=st.sampled_from([None, 99.9, 100.0, 150.0, 200.0]),
    catenary_current_a=st.sampled_from([None, 0.0, 299.0, 300.0]),
)
EVERY = edition(
    *(limit(limit=f"l{index}", applies=Applicability(**row[0])) for index, row in enumerate(ASKED))
)


@given(records)
def test_what_is_remembered_is_what_would_be_worked_out(one: SectionRecord) -> None:
    assert applying(EVERY, one) == applying(replace(EVERY), one)
