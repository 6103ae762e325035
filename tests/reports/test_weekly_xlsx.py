"""The workbook opened with another library than wrote it: types, panes, filters, widths, print set-up."""

from __future__ import annotations

import io
import re
import zipfile
from dataclasses import replace
from datetime import datetime
from typing import Any

import pytest
from openpyxl import Workbook, load_workbook
from openpyxl.worksheet.worksheet import Worksheet

from service.application.audits import WeeklyList
from service.reports import head, weekly_xlsx

moment = datetime.fromisoformat

TABLES = ("Findings", "Overdue and due", "Not judged")


@pytest.fixture
def book(found: WeeklyList) -> Workbook:
    return load_workbook(io.BytesIO(weekly_xlsx.write(found)))


def rows(sheet: Worksheet) -> list[dict[str, Any]]:
    """Each row by its headers, which are unique."""
    names = [cell.value for cell in sheet[1]]
    assert len(set(names)) == len(names)
    return [dict(zip(names, row, strict=True)) for row in sheet.iter_rows(min_row=2)]


def test_it_opens_with_the_head(book: Workbook, found: WeeklyList) -> None:
    assert book.sheetnames == ["About this list", *TABLES]
    assert book.active.title == "About this list"
    lines = [(row[0].value, row[1].value) for row in book.active.iter_rows(min_row=2)]
    assert lines == head.lines(found)
    assert all(row[1].alignment.wrap_text for row in book.active.iter_rows(min_row=2))


@pytest.mark.parametrize("name", TABLES)
def test_headers_are_frozen_filtered_and_repeated_on_a4(book: Workbook, name: str) -> None:
    sheet = book[name]
    assert sheet.freeze_panes == "B2"
    assert sheet.auto_filter.ref == sheet.dimensions
    assert sheet.print_title_rows == "$1:$1"
    # 9 is A4 in ECMA-376 part 1, 18.3.1.63 (from memory).
    assert (int(sheet.page_setup.paperSize), sheet.page_setup.orientation) == (9, "landscape")
    assert sheet.sheet_properties.pageSetUpPr.fitToPage
    assert "advice" in sheet.oddFooter.left.text.lower()


@pytest.mark.parametrize("name", TABLES)
def test_every_column_has_a_width_that_holds_its_numbers_and_days(book: Workbook, name: str) -> None:
    """A number or a day that is too wide shows as hashes; text wraps."""
    sheet = book[name]
    spans = [(one.min, one.max, one.width) for one in sheet.column_dimensions.values()]
    for place, column in enumerate(sheet.iter_cols(), start=1):
        width = next(width for first, last, width in spans if first <= place <= last)
        assert 6 <= width <= 41
        for cell in column[1:]:
            if cell.is_date:
                assert width >= (16 if "hh" in cell.number_format else 10)
            elif cell.data_type == "n" and cell.value is not None:
                assert width > len(str(cell.value))
            elif cell.value is not None:
                assert cell.alignment.wrap_text


def test_cells_have_their_own_types(book: Workbook) -> None:
    first, second = rows(book["Findings"])[:2]
    assert (first["Measured"].value, first["At least"].value, first["Margin"].value) == (0.3, 0.5, -0.2)
    assert first["At most"].value is None
    assert first["Unit"].value == "Ω"
    opened = first["Opened"]
    assert (opened.value, opened.number_format) == (moment("2026-11-24"), "yyyy-mm-dd")
    visited = first["Visited (Europe/Athens)"]
    # 23:40 UTC is 01:40 on the next day in Athens; seconds are left out.
    assert (visited.value, visited.number_format) == (moment("2026-11-24 01:40"), "yyyy-mm-dd hh:mm")
    assert second["Weeks open"].value == 3
    assert second["Planned"].value == moment("2026-12-04")
    assert second["Reported (Europe/Athens)"].value == moment("2026-11-24 10:20")


def test_findings_stand_in_order_and_say_all(book: Workbook, found: WeeklyList) -> None:
    shown = rows(book["Findings"])
    listed = [finding for section in found.sections for finding in section["findings"]]
    assert [row["Finding's name"].value for row in shown] == [finding["finding"] for finding in listed]
    assert shown[0]["Finding"].value == "found outside the limit, not yet reported"
    assert shown[0]["Hazard"].value == "a train may not be detected"
    assert shown[2]["Why"].value.startswith("outside on 2026-09-02 in dry ballast")
    assert shown[2]["Came back"].value == "yes"
    excitation = next(row for row in shown if row["Limit"].value == "excitation")
    assert excitation["Clause"].value == "T 2.1 of tarn-house, edition 3, not confirmed"
    assert excitation["Hazard"].value == "clear track shows occupied"
    permitted = next(row for row in shown if row["Quantity or task"].value == "Circuit kind permitted")
    assert (permitted["Measured"].value, permitted["Unit"].value) == (0, "1 = yes")
    assert shown[1]["Protection"].value == "Circuit disconnected, trains hand-signalled"


def test_wrong_side_is_bold_so_that_it_stands_out_without_colour(book: Workbook) -> None:
    for row in rows(book["Findings"]):
        wrong_side = "a train may not be detected" in (row["Hazard"].value or "")
        assert row["Hazard"].font.bold == wrong_side


def test_tasks_and_what_was_not_judged(book: Workbook) -> None:
    tasks = rows(book["Overdue and due"])
    assert [(row["Task"].value, row["Days overdue"].value) for row in tasks] == [
        ("Shunt test", 15),
        ("Bond inspection", 0),
        ("Relay bench test", 0),
    ]
    assert (tasks[0]["Due"].value, tasks[0]["Interval"].value) == (moment("2026-11-01"), "3 months")
    idle = rows(book["Not judged"])
    assert [(row["Track circuit"].value, row["Why"].value) for row in idle] == [
        ("TV170", "out of use"),
        ("TV171", "out of use"),
        ("TV172", "planned"),
    ]


def test_text_is_never_a_formula_or_a_link(book: Workbook, found: WeeklyList) -> None:
    row = rows(book["Findings"])[0]
    assert (row["Title"].value, row["Title"].data_type) == (found.sections[0]["title"], "s")
    assert (row["Line"].value, row["Line"].data_type) == (found.sections[0]["line_name"], "s")
    content = weekly_xlsx.write(found)
    with zipfile.ZipFile(io.BytesIO(content)) as parts:
        for name in parts.namelist():
            text = parts.read(name).decode()
            assert not re.search(r"<f[ >]|<hyperlink", text), name


def test_an_empty_list_is_a_sound_workbook(nothing_found: WeeklyList) -> None:
    book = load_workbook(io.BytesIO(weekly_xlsx.write(nothing_found)))
    for name in TABLES:
        assert book[name].max_row == 1
        assert book[name]["A1"].value == "Track circuit"


def test_equal_lists_give_equal_bytes(found: WeeklyList) -> None:
    first, second = weekly_xlsx.write(found), weekly_xlsx.write(found)
    assert first == second
    assert load_workbook(io.BytesIO(first)).properties.created == moment("2026-11-30 04:01:02")


def test_rows_are_as_tall_as_their_text(book: Workbook, found: WeeklyList) -> None:
    """Not every program fits rows to wrapped text when it opens a file."""
    sheet = book["Findings"]
    why = next(cell for cell in sheet[1] if cell.value == "Why").column
    rusty = next(row for row in sheet.iter_rows() if row[2].value == "poor rail contact")
    lines = len(rusty[why - 1].value) / 34
    assert sheet.row_dimensions[rusty[0].row].height >= 15 * lines
    found.sections[1]["findings"][0]["response"]["action"] = "very long " * 200
    tall = load_workbook(io.BytesIO(weekly_xlsx.write(found)))["Findings"]
    assert tall.row_dimensions[3].height == pytest.approx(
        409, abs=1
    )  # the format allows no more (from memory)


def test_a_depot_named_with_codes_of_page_headers_keeps_its_name(found: WeeklyList) -> None:
    named = load_workbook(io.BytesIO(weekly_xlsx.write(replace(found, title="A&B &D"))))
    assert named["Findings"].oddHeader.left.text == "A&&B &&D"
