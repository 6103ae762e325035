"""Words for the codes of the weekly list, and how its numbers, days and instants are written for people.

Shared by page and workbook; CSV keeps the codes. A code that has no words here is shown as it is, never as
good. Sentences about findings are in `findings`.
"""

from __future__ import annotations

from collections.abc import Mapping
from datetime import date, datetime
from typing import Any
from zoneinfo import ZoneInfo

from service.rules.intervals import DURATION
from service.rules.quantities import exact
from service.rules.words import Hazard, VerdictWord

Shown = Mapping[str, Any]
"""A finding, verdict, task or section as the wire shows it."""

HAZARDS: Mapping[str, str] = {
    Hazard.WRONG_SIDE: "a train may not be detected",
    Hazard.RIGHT_SIDE: "clear track shows occupied",
}
VERDICTS: Mapping[str, str] = {
    VerdictWord.OUTSIDE: "outside the limit",
    VerdictWord.UNPROVEN: "unproven",
    VerdictWord.NOT_MEASURED: "not measured",
    VerdictWord.NEAR: "inside, near the limit",
    VerdictWord.WITHIN: "inside",
}
CIRCUIT_KINDS: Mapping[str, str] = {
    "dc": "DC",
    "dc_ac_immune": "DC, AC-immune",
    "ac_single_rail": "AC single rail",
    "ac_double_rail": "AC double rail",
}
TRACTIONS: Mapping[str, str] = {
    "none": "no traction",
    "dc_third_rail": "DC third rail",
    "dc_fourth_rail": "DC fourth rail",
    "dc_overhead": "DC overhead",
    "ac_overhead": "AC overhead",
}
UNITS: Mapping[str, str] = {"Ohm": "Ω", "Ohm.km": "Ω·km", "deg": "°", "Cel": "°C", "1": ""}
COMPARED: Mapping[str, str] = {"eq": "", "ge": "at least", "lt": "under"}
_NAMED_POINTS = ("feed_end", "relay_end", "middle")


def plain(code: str | None) -> str:
    """A code as words: underscores become spaces."""
    return "" if code is None else code.replace("_", " ")


def spelt(names: Mapping[str, str], code: str | None) -> str:
    """The words for a code, or the code itself where there are none; empty for None."""
    return "" if code is None else names.get(code, plain(code))


def at_point(name: str | None) -> str:
    """A test point; a leg or a boundary under its own name.

    >>> at_point("relay_end"), at_point("leg:b_2"), at_point("boundary:T1-T2")
    ('relay end', 'leg b_2', 'boundary T1-T2')
    """
    if name is None:
        return ""
    return plain(name) if name in _NAMED_POINTS else name.replace(":", " ", 1)


def number(value: float) -> str:
    """A number in the shortest form that reads back as it, thousands apart.

    >>> number(0.1), number(5.0), number(-0.2), number(400000.0)
    ('0.1', '5', '−0.2', '400\\u202f000')
    """
    text = f"{exact(value).normalize():,f}"
    return text.replace(",", "\u202f").replace("-", "\u2212")


def unit(code: str) -> str:
    """The sign of a unit; empty for a plain number."""
    return UNITS.get(code, code)


def with_unit(value: float, code: str) -> str:
    """A number and its unit.

    >>> with_unit(0.5, "Ohm"), with_unit(90.0, "deg"), with_unit(4.0, "1")
    ('0.5\\xa0Ω', '90°', '4')
    """
    apart = "" if code in ("deg", "1") else "\u00a0"
    return f"{number(value)}{apart}{unit(code)}"


def interval(duration: str | None) -> str:
    """An ISO 8601 duration in words; empty for None.

    >>> interval("P3M"), interval("P1Y6M"), interval("P1D")
    ('3 months', '1 year 6 months', '1 day')
    """
    found = DURATION.fullmatch(duration or "")
    if found is None:
        return duration or ""
    named = zip(found.groups(), ("year", "month", "week", "day"), strict=True)
    return " ".join(counted(int(part), word) for part, word in named if part)


def counted(count: int, word: str) -> str:
    """A count with its noun.

    >>> counted(1, "week"), counted(236, "track circuit")
    ('1 week', '236 track circuits')
    """
    return f"{count} {word}{'' if count == 1 else 's'}"


def local(instant: str, time_zone: str) -> datetime:
    """An instant as the depot's clock shows it, to the minute."""
    return datetime.fromisoformat(instant).astimezone(ZoneInfo(time_zone)).replace(second=0, microsecond=0)


def moment(instant: str | None, time_zone: str) -> str:
    """An instant in the depot's time, to the minute; empty for None."""
    return "" if instant is None else f"{local(instant, time_zone):%Y-%m-%d %H:%M}"


def long_day(day: str) -> str:
    """A day with its weekday.

    >>> long_day("2026-11-30")
    'Monday 30 November 2026'
    """
    found = date.fromisoformat(day)
    return f"{found:%A} {found.day} {found:%B %Y}"


def kilometres(section: Shown) -> str:
    """Where on its line a section lies; empty where the register does not say."""
    ends = [number(end) for end in (section["from_km"], section["to_km"]) if end is not None]
    return f"km {' to '.join(ends)}" if ends else ""
