"""The weekly list as a workbook: typed cells under frozen, filtered headers, made to be printed on A4.

Sheets: what this list is (the head), the findings, the tasks overdue or due, and what was not judged. Text is
written as text, never as a formula or a link. Equal lists give equal bytes.
"""

from __future__ import annotations

import io
from collections.abc import Sequence
from datetime import date, datetime
from textwrap import wrap
from typing import TYPE_CHECKING

from service.application.audits import WeeklyList
from service.reports import head
from service.reports.xlsx_columns import FINDINGS, NOT_JUDGED, PRINTED, TASKS, Column, Entry, Value
from service.rules.words import Hazard

if TYPE_CHECKING:
    from xlsxwriter import Workbook  # type: ignore[import-untyped]
    from xlsxwriter.format import Format  # type: ignore[import-untyped]
    from xlsxwriter.worksheet import Worksheet  # type: ignore[import-untyped]

A4 = 9
"""The paper's number in the file format."""

LINE = 15
"""Points a line of text takes."""

TALLEST = 409
"""The most points a row may have in the file format."""

BOLDER = 3
"""Characters fewer a line when bold and indented."""

HEAD_WIDTHS = (22, 100)
SHAPES = {"text": "General", "number": "General", "day": "yyyy-mm-dd", "time": "yyyy-mm-dd hh:mm"}


def write(found: WeeklyList) -> bytes:
    """The workbook. Times are the depot's, days are days, numbers are numbers."""
    from xlsxwriter import Workbook

    out = io.BytesIO()
    finished_at = datetime.fromisoformat(found.audit["finished_at"]).replace(microsecond=0, tzinfo=None)
    title = f"Weekly list, {found.title}, {found.audit['audit']}"
    with Workbook(out, {"in_memory": True}) as workbook:
        workbook.set_properties({"title": title, "comments": found.audit["caution"], "created": finished_at})
        _about(workbook, found)
        zone = found.time_zone
        entries = [Entry(s, finding, {}, zone) for s in found.sections for finding in s["findings"]]
        _table(workbook, "Findings", FINDINGS, entries, found)
        tasks = [Entry(s, {}, task, zone) for s in found.sections for task in s["tasks"]]
        tasks.sort(key=lambda entry: -entry.task["days_overdue"])
        _table(workbook, "Overdue and due", TASKS, tasks, found)
        idle = [Entry(s, {}, {}, zone) for s in found.sections if s["compliance"] is None]
        _table(workbook, "Not judged", NOT_JUDGED, idle, found)
    return out.getvalue()


def _about(workbook: Workbook, found: WeeklyList) -> None:
    """The sheet that opens the workbook: the head, as two columns."""
    sheet = workbook.add_worksheet("About this list")
    label = workbook.add_format({"bold": True, "valign": "top"})
    text = workbook.add_format({"text_wrap": True, "valign": "top"})
    for place, width in enumerate(HEAD_WIDTHS):
        sheet.set_column(place, place, width)
    sheet.write_string(0, 0, "Weekly list", workbook.add_format({"bold": True, "font_size": 16}))
    for row, line in enumerate(head.lines(found), start=1):
        sheet.write_string(row, 0, line[0], label)
        sheet.write_string(row, 1, line[1], text)
        sheet.set_row(row, _height(line, HEAD_WIDTHS))
    _paper(sheet, found)
    sheet.fit_to_pages(1, 0)


def _table(
    workbook: Workbook, name: str, columns: Sequence[Column], entries: Sequence[Entry], found: WeeklyList
) -> None:
    """A sheet with one row an entry, its header frozen, filtered and repeated on each printed page."""
    sheet = workbook.add_worksheet(name)
    widths = [column.width for column in columns]
    headers = [_header(column, found.time_zone) for column in columns]
    header = {"bold": True, "text_wrap": True, "valign": "top", "bottom": 2, "bg_color": "#E7E7E7"}
    beside = workbook.add_format({**header, "align": "left", "indent": 1})
    above = workbook.add_format({**header, "align": "right"})
    for place, (column, text) in enumerate(zip(columns, headers, strict=True)):
        sheet.set_column(place, place, column.width)
        sheet.write_string(0, place, text, above if column.cell == "number" else beside)
    sheet.set_row(0, _height(headers, widths))
    shapes = {bold: _shapes(workbook, bold) for bold in (False, True)}
    for row, entry in enumerate(entries, start=1):
        grave = entry.finding.get("hazard") == Hazard.WRONG_SIDE
        values = [column.value(entry) for column in columns]
        for place, (column, value) in enumerate(zip(columns, values, strict=True)):
            _write(sheet, row, place, value, shapes[grave][column.cell])
        sheet.set_row(row, _height(values, widths))
    last = len(entries)
    sheet.freeze_panes(1, 1)
    sheet.autofilter(0, 0, last, len(columns) - 1)
    sheet.repeat_rows(0)
    sheet.repeat_columns(0)
    _paper(sheet, found)
    if columns is FINDINGS:
        sheet.print_area(0, 0, last, PRINTED - 1)
        sheet.fit_to_pages(2, 0)
    else:
        sheet.fit_to_pages(1, 0)


def _header(column: Column, time_zone: str) -> str:
    return f"{column.header} ({time_zone})" if column.cell == "time" else column.header


def _height(values: Sequence[Value], widths: Sequence[int]) -> float:
    """The height of a row in points: not every program fits rows to wrapped text when it opens a file."""
    lines = 1
    for value, width in zip(values, widths, strict=True):
        if isinstance(value, str) and (len(value) > width - BOLDER or "\n" in value):
            parts = (wrap(part, max(width - BOLDER, 1)) for part in value.split("\n"))
            lines = max(lines, sum(len(part) or 1 for part in parts))
    return min(lines * LINE, TALLEST)


def _shapes(workbook: Workbook, bold: bool) -> dict[str, Format]:
    """A format a kind of cell; the rows of wrong-side findings are bold, so that they stand out in grey."""
    common = {"valign": "top", "bottom": 1, "bottom_color": "#B4BAC0", "bold": bold}
    beside = {"align": "left", "indent": 1}
    return {
        cell: workbook.add_format(
            {
                **common,
                **(beside if cell != "number" else {}),
                "num_format": shape,
                "text_wrap": cell == "text",
            }
        )
        for cell, shape in SHAPES.items()
    }


def _write(sheet: Worksheet, row: int, place: int, value: Value, shape: Format) -> None:
    """A cell of its own type; text is never looked at for formulas, links or numbers."""
    if value is None or value == "":
        sheet.write_blank(row, place, None, shape)
    elif isinstance(value, str):
        sheet.write_string(row, place, value, shape)
    elif isinstance(value, date):
        sheet.write_datetime(row, place, value, shape)
    else:
        sheet.write_number(row, place, value, shape)


def _paper(sheet: Worksheet, found: WeeklyList) -> None:
    """A4 landscape; every page says whose list it is, as of when, and at which line of the journal."""
    sheet.set_paper(A4)
    sheet.set_landscape()
    sheet.set_margins(left=0.4, right=0.4, top=0.6, bottom=0.6)
    audit = found.audit
    sheet.set_header(f"&L{_shown(found.title)}&RWeekly list as of {audit['audit']}")
    sheet.set_footer(
        f"&LAdvice, not an authority. Journal {audit['sequence']}, {audit['digest'][:16]}…&R&P of &N"
    )


def _shown(text: str) -> str:
    """Text for a page's header, where `&` begins a command and 255 characters are the most."""
    return text[:80].replace("&", "&&")
