"""Instruments and their calibrations, which move every section measured with them, on both databases."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta
from threading import Barrier, Thread
from typing import Any

import pytest

from service.api.schemas.instruments import instrument_answer
from service.application import instruments, status, visits
from service.application.instruments import Calibration, Content
from service.application.visit_content import Draft, ReadingDraft
from service.errors import NotAcceptableError, NotFoundError, StaleError
from service.records import journal
from service.rules.words import CalibrationResult
from support.register import Depot, in_a_book, kept_status, lines


def calibrated(on: date, **changes: Any) -> Calibration:
    """A calibration good for a year."""
    return replace(Calibration(on, on + timedelta(days=365), CalibrationResult.PASS), **changes)


def box(*calibrations: Calibration) -> Content:
    return Content("shunt_box", "Box 22", None, calibrations)


def codes(content: Content, depot: Depot, version: int | None = None) -> set[tuple[str, str | None]]:
    with pytest.raises(NotAcceptableError) as refused:
        depot.write(instruments.put, "SB-22", version, content)
    return {(fault.code, fault.pointer) for fault in refused.value.faults}


def test_an_instrument_is_read_as_it_was_recorded(depot: Depot) -> None:
    content = box(calibrated(date(2026, 2, 1), resolution=0.1, resolution_unit="Ohm", certificate="C-1"))
    made, new = depot.write(instruments.put, "SB-22", None, content)
    assert new
    assert depot.read(instruments.get, "SB-22") == made
    assert made.content == content
    line = lines(depot)[-1]
    assert (line["action"], line["subject_name"], line["sections"]) == ("instrument_created", "SB-22", "[]")
    assert line["content"] == journal.canonical(
        instrument_answer(made).model_dump(mode="json") | {"recorded_at": "2026-03-02T12:00:00.000000Z"}
    )


def test_resolutions_are_kept_in_the_base_unit(depot: Depot) -> None:
    given = box(calibrated(date(2026, 2, 1), resolution=100, resolution_unit="mOhm"))
    made, _ = depot.write(instruments.put, "SB-22", None, given)
    assert (made.content.calibrations[0].resolution, made.content.calibrations[0].resolution_unit) == (
        0.1,
        "Ohm",
    )
    assert depot.write(instruments.put, "SB-22", 1, given) == (made, False)


def test_calibrations_are_only_added(depot: Depot) -> None:
    first, second = calibrated(date(2025, 2, 1)), calibrated(date(2026, 2, 1))
    depot.write(instruments.put, "SB-22", None, box(first))
    edited, new = depot.write(instruments.put, "SB-22", 1, box(second, first))
    assert not new
    assert (edited.version, edited.content.calibrations) == (2, (first, second))
    changed = replace(first, result=CalibrationResult.OUT_OF_TOLERANCE)
    assert codes(box(changed, second), depot, 2) == {("calibration_changed", "/calibrations")}
    assert codes(box(second), depot, 2) == {("calibration_changed", "/calibrations")}
    assert depot.read(instruments.get, "SB-22") == edited


def test_creating_what_exists_is_stale_unless_it_says_the_same(depot: Depot) -> None:
    made, _ = depot.write(instruments.put, "SB-22", None, box())
    assert depot.write(instruments.put, "SB-22", None, box()) == (made, False)
    with pytest.raises(StaleError):
        depot.write(instruments.put, "SB-22", None, box(calibrated(date(2026, 2, 1))))


def test_editing_needs_the_newest_version(depot: Depot) -> None:
    with pytest.raises(NotFoundError):
        depot.write(instruments.put, "SB-22", 1, box())
    depot.write(instruments.put, "SB-22", None, box())
    with pytest.raises(StaleError):
        depot.write(instruments.put, "SB-22", 2, box())


IMPOSSIBLE: list[tuple[list[Calibration], tuple[str, str]]] = [
    ([calibrated(date(2026, 3, 3))], ("in_the_future", "/calibrations/0/calibrated_on")),
    ([calibrated(date(2026, 2, 1), due_on=date(2026, 1, 1))], ("out_of_order", "/calibrations/0/due_on")),
    ([calibrated(date(2026, 2, 1))] * 2, ("duplicate", "/calibrations/1/calibrated_on")),
    (
        [calibrated(date(2026, 2, 1), resolution=0.1)],
        ("unit_missing", "/calibrations/0/resolution_unit"),
    ),
    (
        [calibrated(date(2026, 2, 1), resolution=0.1, resolution_unit="ohm")],
        ("unknown_unit", "/calibrations/0/resolution_unit"),
    ),
]


def test_what_cannot_be_is_refused(depot: Depot) -> None:
    for calibrations, expected in IMPOSSIBLE:
        assert codes(box(*calibrations), depot) == {expected}
    with pytest.raises(NotFoundError):
        depot.read(instruments.get, "SB-22")


def test_an_instrument_does_not_change_its_kind(depot: Depot) -> None:
    depot.write(instruments.put, "SB-22", None, box())
    assert codes(replace(box(), kind="meter"), depot, 1) == {("fixed", "/kind")}


def test_lists_are_in_order_of_name_and_of_one_depot(depot: Depot) -> None:
    for name in ("b", "a", "B"):
        depot.write(instruments.put, name, None, box(calibrated(date(2026, 2, 1))))
    depot.depot = "birchfield"
    depot.write(instruments.put, "c", None, box())
    assert depot.read(instruments.page, after=None, most=9)[0].content == box()
    with pytest.raises(NotFoundError):
        depot.read(instruments.get, "a")
    depot.depot = "ashby"
    assert [one.instrument for one in depot.read(instruments.page, after=None, most=9)] == ["B", "a", "b"]
    page = depot.read(instruments.page, after="B", most=1)
    assert [(one.instrument, len(one.content.calibrations)) for one in page] == [("a", 1)]


def visit(depot: Depot, section: str, instrument: str) -> Draft:
    """A drop shunt of 0.7 ohm at both test points, dry."""
    readings = tuple(
        ReadingDraft("drop_shunt", point, "as_left", "eq", 0.7, "Ohm", instrument)
        for point in ("feed_end", "relay_end")
    )
    number = len(lines(depot))
    return Draft(
        f"00000000-0000-7000-8000-{number:012d}",
        section,
        depot.clock[0] - timedelta(hours=1),
        ballast="dry",
        rail="clean",
        readings=readings,
    )


def measured(depot: Depot, section: str, instrument: str) -> None:
    (outcome,) = depot.write(visits.post, [visit(depot, section, instrument)], None)
    assert outcome.outcome == "stored"


def test_a_calibration_judges_anew_what_was_measured_with_the_instrument(depot: Depot) -> None:
    """Found out of tolerance, it unproves every reading since it was last good."""
    book = in_a_book(depot)
    for section in ("A", "B", "C"):
        depot.section(section, book=book)
    good = calibrated(depot.today - timedelta(days=30))
    for name in ("SB-22", "SB-23"):
        depot.write(instruments.put, name, None, box(good))
    for section, instrument in (("A", "SB-22"), ("B", "SB-22"), ("C", "SB-23")):
        measured(depot, section, instrument)
    assert [kept_status(depot, name).compliance for name in "ABC"] == ["yes", "yes", "yes"]
    depot.later(days=20)
    found = calibrated(depot.today, result=CalibrationResult.OUT_OF_TOLERANCE)
    depot.write(instruments.put, "SB-22", 1, box(good, found))
    assert [kept_status(depot, name).compliance for name in "ABC"] == ["not_shown", "not_shown", "yes"]
    assert lines(depot)[-1]["sections"] == '["A","B"]'
    with depot.service.read() as connection:
        judged = status.of_section(connection, depot.depot, "A", depot.clock[0])
    reasons = {reason.code for verdict in judged.status.verdicts for reason in verdict.reasons}
    assert reasons == {"instrument_out_of_tolerance"}


def test_a_calibration_against_a_visit_leaves_what_either_order_would(depot: Depot) -> None:
    book = in_a_book(depot)
    depot.section("A", book=book)
    good = calibrated(depot.today - timedelta(days=30))
    bad = calibrated(depot.today, result=CalibrationResult.OUT_OF_TOLERANCE)
    depot.write(instruments.put, "SB-22", None, box(good))
    taken = visit(depot, "A", "SB-22")
    barrier = Barrier(2)

    def calibrate() -> None:
        barrier.wait(timeout=10)
        depot.write(instruments.put, "SB-22", 1, box(good, bad))

    def post() -> None:
        barrier.wait(timeout=10)
        depot.write(visits.post, [taken], None)

    both = [Thread(target=calibrate), Thread(target=post)]
    for one in both:
        one.start()
    for one in both:
        one.join()
    assert depot.read(instruments.get, "SB-22").version == 2
    kept = kept_status(depot, "A")
    assert kept.compliance == "not_shown"
    with depot.service.read() as connection:
        judged = status.of_section(connection, depot.depot, "A", depot.clock[0]).status
    assert (judged.compliance, judged.next_due_on) == (kept.compliance, kept.next_due_on)
    assert {reason.code for one in judged.verdicts for reason in one.reasons} == {
        "instrument_out_of_tolerance"
    }
