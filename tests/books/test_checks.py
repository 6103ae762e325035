"""Verdicts on what is not stored: the same as for what is, and nothing is kept."""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from typing import Any

import pytest
import sqlalchemy as sa

from service.application import checks
from service.application.checks import CalibrationGiven, Check, Checked, InstrumentGiven
from service.application.section_content import Content
from service.application.visit_content import ReadingDraft
from service.errors import NotAcceptableError
from service.records.tables import metadata
from service.rules.verdicts import Verdict
from service.rules.words import (
    Ballast,
    CalibrationResult,
    CircuitKind,
    Compliance,
    Rail,
    SectionState,
    Traction,
    VerdictWord,
    Work,
)
from support.limit_books import Shelf, limit

DAY = date(2026, 4, 1)
SECTION = Content(
    state=SectionState.IN_USE,
    circuit_kind=CircuitKind.DC,
    traction=Traction.NONE,
    required_test_points=("relay_end",),
)
BOX = InstrumentGiven(
    "SB-1",
    (CalibrationGiven(date(2026, 1, 5), date(2027, 1, 4), CalibrationResult.PASS, 100.0, "mOhm"),),
)


def reading(value: float, **changes: Any) -> ReadingDraft:
    plain = ReadingDraft("drop_shunt", "relay_end", "as_left", "eq", value, "Ohm", "SB-1")
    return replace(plain, **changes)


def asked(*readings: ReadingDraft, **changes: Any) -> Check:
    plain = Check(
        book="house",
        edition=None,
        visited_on=DAY,
        section="X1",
        content=SECTION,
        readings=readings or (reading(0.7),),
        ballast=Ballast.DRY,
        instruments=(BOX,),
    )
    return replace(plain, **changes)


@pytest.fixture
def issued(shelf: Shelf) -> Shelf:
    shelf.draft()
    shelf.issue(DAY)
    return shelf


def made(shelf: Shelf, check: Check) -> Checked:
    found: Checked = shelf.read(checks.check, check)
    return found


def only(shelf: Shelf, check: Check) -> Verdict:
    [verdict] = made(shelf, check).status.verdicts
    return verdict


def test_a_reading_is_judged_by_the_edition_in_force(issued: Shelf) -> None:
    found = made(issued, asked())
    [verdict] = found.status.verdicts
    assert (verdict.verdict, verdict.margin, verdict.clause) == (VerdictWord.WITHIN, 0.2, "1.1")
    assert (verdict.visit, verdict.visited_at) == (None, None)
    assert found.status.compliance is Compliance.YES
    assert found.status.edition == "1"


@pytest.mark.parametrize(
    ("value", "word"), [(0.4, VerdictWord.OUTSIDE), (0.5, VerdictWord.NEAR), (0.6, VerdictWord.WITHIN)]
)
def test_on_and_about_the_bound(issued: Shelf, value: float, word: VerdictWord) -> None:
    assert only(issued, asked(reading(value))).verdict is word


def test_the_steps_of_a_box_are_taken_in_its_own_unit(issued: Shelf) -> None:
    """A pick-up shunt of 0.5 on 0.1 Ω steps may be anything above 0.4: common practice, no source."""
    pick_up = limit(
        limit="pick_up", quantity="pick_up_shunt", minimum={"value": 0.45, "hazard": "right_side"}
    )
    issued.draft(edition="2", limits=[pick_up])
    shunt = reading(0.5, quantity="pick_up_shunt")
    assert only(issued, asked(shunt, edition="2")).verdict is VerdictWord.OUTSIDE
    meter = InstrumentGiven("SB-1", (replace(BOX.calibrations[0], resolution=None, resolution_unit=None),))
    assert only(issued, asked(shunt, edition="2", instruments=(meter,))).verdict is VerdictWord.WITHIN


def test_an_instrument_that_does_not_come_along_is_unknown(issued: Shelf) -> None:
    assert only(issued, asked(instruments=())).verdict is VerdictWord.UNPROVEN
    assert only(issued, asked(reading(0.4), instruments=())).verdict is VerdictWord.OUTSIDE


def test_calibrations_may_come_in_any_order(issued: Shelf) -> None:
    older = CalibrationGiven(date(2025, 1, 5), date(2026, 1, 4), CalibrationResult.PASS)
    two = InstrumentGiven("SB-1", (*BOX.calibrations, older))
    assert only(issued, asked(instruments=(two,))).verdict is VerdictWord.WITHIN


def test_a_draft_can_be_tried_by_name(issued: Shelf) -> None:
    stricter = limit(minimum={"value": 0.8, "hazard": "wrong_side"})
    issued.draft(edition="2", limits=[stricter])
    assert only(issued, asked()).verdict is VerdictWord.WITHIN
    verdict = only(issued, asked(edition="2"))
    assert (verdict.verdict, verdict.edition) == (VerdictWord.OUTSIDE, "2")


def test_on_a_day_without_an_edition_in_force_nothing_is_shown(issued: Shelf) -> None:
    found = made(issued, asked(visited_on=date(2026, 3, 31)))
    assert found.status.compliance is Compliance.NOT_SHOWN
    assert "no_edition_in_force" in {caution.code for caution in found.status.cautions}


def test_a_reading_that_contradicts_another_is_doubtful(issued: Shelf) -> None:
    pair = (
        reading(3.1, quantity="relay_voltage", unit="V"),
        reading(2.9, quantity="supply_voltage", unit="V", test_point="feed_end"),
    )
    assert made(issued, asked(*pair)).doubts == ((0, "relay_above_supply"), (1, "relay_above_supply"))


def test_rail_surface_and_work_are_looked_at(issued: Shelf) -> None:
    rusty = made(issued, asked(rail=Rail.RUSTY))
    assert "poor_rail_contact" in {caution.code for caution in rusty.status.cautions}
    found_only = reading(0.7, stage="as_found")
    verdict = only(issued, asked(found_only, work_done=(Work.ADJUSTED,)))
    assert verdict.verdict is VerdictWord.UNPROVEN


@pytest.mark.parametrize(
    ("changes", "pointer"),
    [
        ({"book": "nothing"}, "/book"),
        ({"edition": "9"}, "/edition"),
        ({"readings": (reading(0.7, unit="furlong"),)}, "/readings/0/unit"),
        ({"readings": (reading(0.7), reading(0.8))}, "/readings/1"),
        ({"readings": (reading(0.7, quantity="mood"),)}, "/readings/0/quantity"),
        ({"readings": (reading(-1),)}, "/readings/0/value"),
        ({"content": replace(SECTION, required_test_points=())}, "/section/required_test_points"),
        ({"instruments": (BOX, BOX)}, "/instruments/1/instrument"),
        (
            {
                "instruments": (
                    replace(BOX, calibrations=(replace(BOX.calibrations[0], due_on=date(2025, 1, 1)),)),
                )
            },
            "/instruments/0/calibrations/0/due_on",
        ),
        (
            {
                "instruments": (
                    replace(BOX, calibrations=(replace(BOX.calibrations[0], resolution_unit=None),)),
                )
            },
            "/instruments/0/calibrations/0/resolution_unit",
        ),
        (
            {
                "instruments": (
                    replace(BOX, calibrations=(replace(BOX.calibrations[0], resolution_unit="furlong"),)),
                )
            },
            "/instruments/0/calibrations/0/resolution_unit",
        ),
    ],
)
def test_what_cannot_be_judged_is_refused_with_its_place(
    issued: Shelf, changes: dict[str, Any], pointer: str
) -> None:
    with pytest.raises(NotAcceptableError) as refused:
        made(issued, asked(**changes))
    assert pointer in {fault.pointer for fault in refused.value.faults}


def test_nothing_is_kept(issued: Shelf) -> None:
    def rows(connection: sa.Connection) -> dict[str, int]:
        count = sa.func.count()
        return {
            name: connection.execute(sa.select(count).select_from(table)).scalar_one()
            for name, table in metadata.tables.items()
        }

    before = issued.read(rows)
    made(issued, asked())
    assert issued.read(rows) == before
