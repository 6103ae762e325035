"""The weekly list as a page: read on a phone, printed on A4, no script, nothing fetched.

What is said is put together here and in `findings`; how it stands on the page is in `weekly.html.jinja` and
`weekly.css`. Colour never carries a meaning alone.
"""

from __future__ import annotations

import re
from base64 import b64encode
from functools import cache
from hashlib import sha256
from pathlib import Path

from jinja2 import Environment, FileSystemLoader, StrictUndefined, Template

from service.application.audits import WeeklyList
from service.reports import findings, head, words
from service.reports.words import Shown

HERE = Path(__file__).parent
STYLE = (HERE / "weekly.css").read_text(encoding="utf-8")

_HASH = b64encode(sha256(STYLE.encode()).digest()).decode()
_POLICY = f"default-src 'none'; style-src 'sha256-{_HASH}'; base-uri 'none'; form-action 'none'"
CONTENT_SECURITY_POLICY = f"{_POLICY}; frame-ancestors 'none'"
"""The header to send with the page: it needs its one style and nothing else. A saved one carries it too."""

_DATE = re.compile(r"(\b[0-9]{4}-[0-9]{2}-[0-9]{2}\b)")

Facts = list[tuple[str, str]]

RESPONSE = {
    "owner": "Owner",
    "action": "Action",
    "planned_on": "Planned",
    "reported_at": "Reported",
    "report_reference": "Reference",
    "reported_to": "Reported to",
    "protection": "Protection",
    "cause": "Cause",
    "restored_by": "Restored by",
}


def write(found: WeeklyList) -> str:
    """The page."""
    zone = found.time_zone
    caution = found.audit["caution"]
    listed = [section for section in found.sections if section["findings"]]
    tasks = [(section, task) for section in found.sections for task in section["tasks"]]
    return _template().render(
        found=found,
        day=words.long_day(found.audit["audit"]),
        caution=caution,
        head=[line for line in head.lines(found) if line[1] != caution],
        listed=listed,
        waiting=[one for section in listed for one in section["findings"] if findings.unreported(one)],
        tasks=sorted(tasks, key=lambda pair: -pair[1]["days_overdue"]),
        idle=[section for section in found.sections if section["compliance"] is None],
        finished=words.moment(found.audit["finished_at"], zone),
        zone=zone,
    )


@cache
def _template() -> Template:
    pages = Environment(
        loader=FileSystemLoader(HERE),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    pages.globals.update(style=STYLE, policy=_POLICY)
    pages.filters.update(
        plain=words.plain,
        moment=words.moment,
        where=where,
        named=named,
        mark=mark,
        kind=findings.kind,
        hazard=findings.hazard,
        figures=figures,
        facts=facts,
        answered=answered,
        lateness=lateness,
        dates=dates,
        rhythm=rhythm,
        dated=dated,
    )
    return pages.get_template("weekly.html.jinja")


def where(section: Shown) -> str:
    """Where a section lies and what it is, as one line."""
    parts = (
        section["line_name"],
        words.kilometres(section),
        words.spelt(words.CIRCUIT_KINDS, section["circuit_kind"]),
        words.spelt(words.TRACTIONS, section["traction"]),
        section["asset_reference"],
    )
    return " · ".join(part for part in parts if part)


def named(finding: Shown) -> str:
    """What a finding is about and where; empty for one about the track circuit as a whole."""
    point = words.at_point(finding["test_point"])
    return " at ".join(part for part in (findings.subject(finding), point) if part)


def mark(finding: Shown) -> str:
    """The style of a finding: by its hazard, and whether it was found outside or is not known."""
    if finding["hazard"] is None:
        return "no_hazard"
    return f"{finding['hazard']} unsure" if findings.unsure(finding) else str(finding["hazard"])


def figures(finding: Shown) -> Facts:
    """Measured, limit and margin as (label, text); empty for a finding without a verdict."""
    verdict = finding["verdict"]
    if verdict is None:
        return []
    source = "Measured" if verdict["visit"] or verdict["measured"] is None else "Register"
    found = [
        (source, findings.measured(verdict)),
        ("Limit", findings.limit(verdict)),
        ("Margin", findings.margin(verdict)),
    ]
    return [pair for pair in found if pair[1]]


def facts(finding: Shown, section: Shown, zone: str) -> Facts:
    """All else that is known of a finding but the response, as (label, text)."""
    verdict, task = finding["verdict"], findings.task_of(finding, section)
    found = [("Why", "; ".join(findings.why(finding, section)))]
    if verdict is not None:
        found += [("Clause", findings.clause(verdict)), ("Visit", _visit(verdict, zone))]
    if task is not None:
        found += [
            ("Overdue", lateness(task)),
            ("Dates", dates(task)),
            ("Interval", rhythm(task)),
            ("Last done", task["last_done_on"] or "never"),
        ]
    found += [
        ("Concession", finding["concession"] or ""),
        ("Since", f"{finding['opened_on']}, {findings.standing(finding)}"),
    ]
    return [pair for pair in found if pair[1]]


def _visit(verdict: Shown, zone: str) -> str:
    if verdict["visited_at"] is None:
        return ""
    when, stage = words.moment(verdict["visited_at"], zone), words.plain(verdict["stage"])
    return f"{when}, {stage}, {verdict['instrument'] or 'no instrument named'}"


def lateness(task: Shown) -> str:
    """By how much a task is overdue, or that it is due."""
    late = task["days_overdue"]
    return words.counted(late, "day") if late else words.plain(task["state"])


def dates(task: Shown) -> str:
    """When a task was due, and until when its grace runs or ran."""
    if task["due_on"] is None:
        return "since when it is due is not known"
    due, grace = f"due {task['due_on']}", task["grace_until_on"]
    return due if grace in (None, task["due_on"]) else f"{due}, grace until {grace}"


def rhythm(task: Shown) -> str:
    """How often a task is owed, and by which clause."""
    return ", ".join(part for part in (words.interval(task["interval"]), task["clause"]) if part)


def dated(text: str) -> list[str]:
    """The text in pieces: every second one is a day, which is kept on one line."""
    return _DATE.split(text)


def answered(finding: Shown, zone: str) -> Facts:
    """What the response says, as (label, text); empty where there is none."""
    response = finding["response"]
    if response is None:
        return []
    found = {**response, "reported_at": words.moment(response["reported_at"], zone)}
    return [(label, found[name]) for name, label in RESPONSE.items() if found[name]]
