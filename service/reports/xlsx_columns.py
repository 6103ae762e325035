"""What the workbook's columns are: header, width, kind of cell, and the value of each.

What a reader needs on paper comes first; `PRINTED` columns are printed, those after them are for the screen.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import date, datetime
from typing import Literal

from service.reports import findings, words
from service.reports.words import Shown

Value = str | float | date | datetime | None


@dataclass(frozen=True, slots=True)
class Entry:
    """What one row shows. `verdict` and `response` are the finding's, empty where it has none."""

    section: Shown
    finding: Shown
    task: Shown
    time_zone: str

    @property
    def verdict(self) -> Shown:
        return self.finding.get("verdict") or {}

    @property
    def response(self) -> Shown:
        return self.finding.get("response") or {}


@dataclass(frozen=True, slots=True)
class Column:
    """A column; `width` in characters. A `time` is in the depot's zone, without seconds."""

    header: str
    width: int
    cell: Literal["text", "number", "day", "time"]
    value: Callable[[Entry], Value]


def _text(header: str, width: int, value: Callable[[Entry], str | None]) -> Column:
    return Column(header, width, "text", value)


def _number(header: str, width: int, value: Callable[[Entry], float | None]) -> Column:
    return Column(header, width, "number", value)


def _day(header: str, value: Callable[[Entry], str | None]) -> Column:
    def found(entry: Entry) -> date | None:
        day = value(entry)
        return None if day is None else date.fromisoformat(day)

    return Column(header, 12, "day", found)


def _time(header: str, value: Callable[[Entry], str | None]) -> Column:
    def found(entry: Entry) -> datetime | None:
        instant = value(entry)
        return None if instant is None else words.local(instant, entry.time_zone).replace(tzinfo=None)

    return Column(header, 18, "time", found)


def _yes(value: object) -> str:
    return "yes" if value else "no"


def _judged(say: Callable[[Shown], str | None]) -> Callable[[Entry], str | None]:
    """What to say of a verdict; nothing where there is none."""
    return lambda entry: say(entry.verdict) if entry.verdict else None


SECTION = _text("Track circuit", 13, lambda entry: entry.section["section"])
TITLE = _text("Title", 22, lambda entry: entry.section["title"])
WHERE = (
    _text("Line", 24, lambda entry: entry.section["line_name"]),
    _number("From km", 9, lambda entry: entry.section["from_km"]),
    _number("To km", 9, lambda entry: entry.section["to_km"]),
    _text("Circuit kind", 16, lambda entry: words.spelt(words.CIRCUIT_KINDS, entry.section["circuit_kind"])),
    _text("Traction", 16, lambda entry: words.spelt(words.TRACTIONS, entry.section["traction"])),
    _text("Asset reference", 16, lambda entry: entry.section["asset_reference"]),
)

WRONG = (
    SECTION,
    TITLE,
    _text("Finding", 20, lambda entry: findings.kind(entry.finding)),
    _text("Hazard", 17, lambda entry: findings.hazard(entry.finding)),
    _text("Quantity or task", 18, lambda entry: findings.subject(entry.finding)),
    _text("Test point", 11, lambda entry: words.at_point(entry.finding["test_point"])),
    _text("Compared", 10, _judged(lambda verdict: words.COMPARED.get(verdict["comparison"]))),
    _number("Measured", 9, lambda entry: entry.verdict.get("measured")),
    _number("At least", 9, lambda entry: entry.verdict.get("min")),
    _number("At most", 9, lambda entry: entry.verdict.get("max")),
    _number("Margin", 9, lambda entry: entry.verdict.get("margin")),
    _text("Unit", 8, _judged(findings.unit)),
    _text("Clause", 18, _judged(findings.clause)),
    _text("Why", 34, lambda entry: "\n".join(findings.why(entry.finding, entry.section))),
)
SINCE = (
    _time("Visited", lambda entry: entry.verdict.get("visited_at")),
    _text("Stage", 10, lambda entry: words.plain(entry.verdict.get("stage"))),
    _text("Instrument", 12, lambda entry: entry.verdict.get("instrument")),
    _text("State", 9, lambda entry: words.plain(entry.finding["state"])),
    _number("Weeks open", 8, lambda entry: entry.finding["weeks_open"]),
    _text("Came back", 8, lambda entry: _yes(entry.finding["reopens"])),
    _day("Opened", lambda entry: entry.finding["opened_on"]),
)
ANSWERED = (
    _text("Owner", 14, lambda entry: entry.response.get("owner")),
    _text("Action", 32, lambda entry: entry.response.get("action")),
    _day("Planned", lambda entry: entry.response.get("planned_on")),
    _time("Reported", lambda entry: entry.response.get("reported_at")),
    _text("Report reference", 14, lambda entry: entry.response.get("report_reference")),
    _text("Reported to", 18, lambda entry: entry.response.get("reported_to")),
)
CLOSING = (
    _text("Protection", 28, lambda entry: entry.response.get("protection")),
    _text("Cause", 28, lambda entry: entry.response.get("cause")),
    _text("Restored by", 12, lambda entry: entry.response.get("restored_by")),
)
FINDINGS = (
    *WRONG,
    *SINCE,
    *ANSWERED,
    *CLOSING,
    *WHERE,
    _text("Verdict", 13, _judged(lambda v: words.spelt(words.VERDICTS, v["verdict"]))),
    _number("Judged at", 9, lambda entry: entry.verdict.get("judged")),
    _number("Near up to", 9, lambda entry: entry.verdict.get("near_min")),
    _number("Near from", 9, lambda entry: entry.verdict.get("near_max")),
    _text("Limit", 22, lambda entry: entry.verdict.get("limit")),
    _text("Confirmed", 9, _judged(lambda verdict: _yes(verdict["confirmed"]))),
    _text("Doubt", 20, lambda entry: words.plain(entry.verdict.get("doubtful"))),
    _text("Concession", 38, lambda entry: entry.finding["concession"]),
    _text("Visit", 38, lambda entry: entry.verdict.get("visit") or entry.finding["visit"]),
    _text("Finding's name", 38, lambda entry: entry.finding["finding"]),
    _text("Answered by", 14, lambda entry: entry.response.get("updated_by")),
    _time("Answered", lambda entry: entry.response.get("updated_at")),
)
PRINTED = len(WRONG) + len(SINCE) + len(ANSWERED)

TASKS = (
    SECTION,
    TITLE,
    _text("Task", 28, lambda entry: words.plain(entry.task["task"]).capitalize()),
    _text("State", 10, lambda entry: words.plain(entry.task["state"])),
    _number("Days overdue", 9, lambda entry: entry.task["days_overdue"]),
    _day("Due", lambda entry: entry.task["due_on"]),
    _day("Grace until", lambda entry: entry.task["grace_until_on"]),
    _text("Interval", 16, lambda entry: words.interval(entry.task["interval"])),
    _day("Last done", lambda entry: entry.task["last_done_on"]),
    _text("Clause", 10, lambda entry: entry.task["clause"]),
    _text("Why", 40, lambda entry: "\n".join(reason["reason"] for reason in entry.task["reasons"])),
    _text("Concession", 38, lambda entry: entry.task["concession"]),
)
NOT_JUDGED = (
    SECTION,
    TITLE,
    _text("Why", 28, lambda entry: words.plain(entry.section["state"])),
    *WHERE,
    _time("Last visited", lambda entry: entry.section["last_visited_at"]),
)
