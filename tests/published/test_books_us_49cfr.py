"""The bundled US books against 49 CFR Parts 234 and 236 (public domain).

Each figure stands beside its clause and standing: read in the source, or recalled from memory.
"""

from __future__ import annotations

from datetime import date
from typing import Any, get_type_hints

import pytest

from service.api.schemas.visits import VisitAnswer
from service.application import books, editions
from service.rules.facts import SectionRecord
from service.rules.intervals import add
from service.rules.limits import Edition, Limit, Task, applying
from service.rules.words import CircuitKind, ConditionLeft, EditionState, Hazard, SectionState, Traction


def bundled(book: str) -> Edition:
    [found] = [new for new in editions.bundled() if new.book == book]
    text = editions.checked(found.book, found.edition, found.content())
    return books.edition_of(book, found.edition, EditionState.DRAFT.value, None, None, "", text)


SIGNALS, CROSSINGS = bundled("us-49cfr"), bundled("us-49cfr-234")


def limit(edition: Edition, name: str) -> Limit:
    [found] = [one for one in edition.limits if one.limit == name]
    return found


def task(edition: Edition, name: str) -> Task:
    [found] = [one for one in edition.tasks if one.task == name]
    return found


def notes(book: str) -> dict[str, tuple[str, str, bool]]:
    [found] = [new for new in editions.bundled() if new.book == book]
    return {note.clause: (note.note, note.standing, note.confirmed) for note in found.notes}


def section(relay_type: str | None) -> SectionRecord:
    return SectionRecord(
        section="M1",
        version=1,
        state=SectionState.IN_USE,
        commissioned_on=None,
        circuit_kind=CircuitKind.DC,
        traction=Traction.NONE,
        points_ends=0,
        relay_type=relay_type,
    )


def test_236_56_a_shunt_of_0_06_ohm_with_the_circuit_dry() -> None:
    """49 CFR 236.56: 0.06 Ω, the circuit dry, fouling sections too (from memory)."""
    found = limit(SIGNALS, "drop_shunt")
    assert (found.clause, found.standing, found.confirmed) == ("236.56", "memory", False)
    assert found.minimum is not None
    assert (found.minimum.value, found.minimum.hazard) == (0.06, Hazard.WRONG_SIDE)
    assert found.maximum is None
    assert found.ballast_dry
    assert found.test_points is None  # every required test point, ends of fouling sections among them


def test_234_229_the_same_figure_without_a_dry_condition() -> None:
    """49 CFR 234.229: 0.06 Ω for crossing train-detection circuits, no "dry" (from memory)."""
    found = limit(CROSSINGS, "drop_shunt")
    assert (found.clause, found.standing, found.confirmed) == ("234.229", "memory", False)
    assert found.minimum is not None
    assert found.minimum.value == 0.06
    assert not found.ballast_dry


def test_236_108_insulation_under_200_and_under_500_kilohm() -> None:
    """49 CFR 236.108: unusable under 200 kΩ, repaired and tested yearly under 500 kΩ (from memory)."""
    found = limit(SIGNALS, "insulation")
    assert (found.clause, found.confirmed) == ("236.108", False)
    assert found.minimum is not None
    assert found.minimum.value == 200_000
    assert found.minimum.value + (found.minimum.near_margin or 0) == 500_000
    assert found.minimum.hazard is Hazard.WRONG_SIDE


@pytest.mark.parametrize(
    ("edition", "clause", "confirmed"), [(SIGNALS, "236.57", False), (CROSSINGS, "234.231", True)]
)
def test_fouling_wires_of_two_conductors(edition: Edition, clause: str, confirmed: bool) -> None:
    """49 CFR 236.57 (from memory) and 234.231 (read): at least two discrete conductors."""
    found = limit(edition, "fouling_wires_duplicated")
    assert (found.clause, found.confirmed, found.quantity) == (clause, confirmed, "bonds_duplicated")
    assert found.applies.points is True


@pytest.mark.parametrize("edition", [SIGNALS, CROSSINGS], ids=["signals", "crossings"])
@pytest.mark.parametrize(
    ("relay_type", "shortest"),
    [
        ("plain", "P4Y"),  # general: 4 years
        (None, "P12M"),  # the register is silent: nothing is left out
        ("ac_vane", "P2Y"),  # AC vane: 2 years
        ("dc_polar", "P2Y"),  # DC polar: 2 years
        ("soft_iron", "P2Y"),  # soft-iron magnetic structure: 2 years
        ("ac_centrifugal", "P12M"),  # AC centrifugal: 12 months
    ],
)
def test_234_263_relay_tests(edition: Edition, relay_type: str | None, shortest: str) -> None:
    """49 CFR 234.263 (read); 236.106 has the same figures (from memory)."""
    found = [
        one for one, _ in applying(edition, section(relay_type)).tasks if one.task.startswith("relay_test")
    ]
    day = date(2025, 1, 1)
    assert min(add(day, one.interval or "") for one in found) == add(day, shortest)
    assert {(one.clause, one.standing, one.confirmed, one.item) for one in found} == {
        ("234.263", "read", True, "relay")
    }


@pytest.mark.parametrize(
    ("edition", "name", "clause", "interval", "standing"),
    [
        (CROSSINGS, "ground_test", "234.249", "P1M", "read"),
        (SIGNALS, "ground_test", "236.107", "P3M", "memory"),
        (SIGNALS, "shunt_fouling_test", "236.104", "P3M", "memory"),
        (CROSSINGS, "joint_and_bond_inspection", "234.271", "P3M", "memory"),
        (CROSSINGS, "cut_out_circuit_test", "234.269", "P3M", "read"),
        (SIGNALS, "insulation_test", "236.108", "P10Y", "memory"),
        (CROSSINGS, "insulation_test", "234.267", "P10Y", "memory"),
    ],
)
def test_intervals(edition: Edition, name: str, clause: str, interval: str, standing: str) -> None:
    """49 CFR Parts 234 and 236: the clause named, each with its standing."""
    found = task(edition, name)
    assert (found.clause, found.interval, found.standing) == (clause, interval, standing)
    assert found.confirmed is (standing == "read")


@pytest.mark.parametrize("edition", [SIGNALS, CROSSINGS], ids=["signals", "crossings"])
def test_insulation_under_500_kilohm_is_tested_yearly(edition: Edition) -> None:
    """49 CFR 236.108 / 234.267: 1 year while under 500 kΩ (from memory)."""
    shortened = task(edition, "insulation_test").shortened
    assert shortened is not None
    assert (shortened.under, shortened.interval) == (500_000, "P1Y")


@pytest.mark.parametrize("edition", [SIGNALS, CROSSINGS], ids=["signals", "crossings"])
def test_no_section_sets_an_interval_for_the_shunt_test(edition: Edition) -> None:
    """49 CFR leaves it to the railroad (from memory)."""
    found = task(edition, "shunt_test")
    assert (found.interval, found.window, found.after_work) == (None, None, frozenset())
    assert found.needs == ("drop_shunt",)


@pytest.mark.parametrize(
    ("book", "clause", "says", "standing"),
    [
        ("us-49cfr", "236.51", "rail is broken", "read"),
        ("us-49cfr", "236.55", "35 ft (10.668 m)", "memory"),
        ("us-49cfr", "236.59", "Leakage of insulated joints", "read"),
        ("us-49cfr", "236.2", "75 %", "memory"),
        ("us-49cfr", "236.110", "at least one year", "memory"),
        ("us-49cfr-234", "234.213", "75 %", "read"),
        ("us-49cfr-234", "234.273", "at least one year", "memory"),
    ],
)
def test_rules_in_words_are_notes(book: str, clause: str, says: str, standing: str) -> None:
    """49 CFR: what no limit can carry, by clause."""
    note, noted, confirmed = notes(book)[clause]
    assert says in note
    assert (noted, confirmed) == (standing, standing == "read")


RECORD_236_110: dict[str, tuple[str, ...]] = {
    # 49 CFR 236.110, what the record of a test holds (from memory) → members of a kept visit.
    "place": ("section",),
    "date": ("visited_at",),
    "equipment tested": ("section", "tasks"),
    "result": ("readings",),
    "repairs or adjustments": ("work_done", "remarks"),
    "condition left": ("condition_left",),
    "signature or code of the tester": ("tester", "received_by"),
}
"""The railroad itself is whoever runs the service; the depot stands in the address of the visit."""


@pytest.mark.parametrize("field", RECORD_236_110)
def test_236_110_every_field_of_the_record_is_kept_with_a_visit(field: str) -> None:
    kept: dict[str, Any] = get_type_hints(VisitAnswer)
    assert [name for name in RECORD_236_110[field] if name not in kept] == []


def test_236_110_the_condition_left_can_be_stated() -> None:
    assert {word.value for word in ConditionLeft} >= {"fit", "restricted", "disconnected"}
