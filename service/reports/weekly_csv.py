"""The weekly list as CSV: a plain table for programs, under the names and codes of its JSON.

RFC 4180 asks for the same cells on every line, so the head is not lines above the table but the `audit.*`
columns of every row: a row that was filtered out still says who judged it, by what, and that it is advice.
One row a finding; one for each further task that is due; one for a track circuit with neither; and one with
the head alone where nothing is listed. So it is never empty, and nothing of the JSON but its counts is lost.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator, Mapping
from typing import Any

from service.application.audits import WeeklyList
from service.application.csv_cells import BOM, guarded

AUDIT = (
    *("audit", "started_by", "started_at", "finished_at", "known_at", "editions.book", "editions.edition"),
    *("editions.digest", "sections_judged", "sections_not_judged", "counts.compliance_no"),
    *("counts.compliance_not_shown", "counts.compliance_yes", "counts.overdue", "counts.findings_opened"),
    *("counts.findings_cleared", "sequence", "digest", "caution"),
)
SECTION = (
    *("section", "title", "line_name", "from_km", "to_km", "circuit_kind", "traction", "asset_reference"),
    *("state", "book", "edition", "compliance", "overdue", "worst_hazard", "next_due_on", "last_visited_at"),
)
VERDICT = (
    *("limit", "quantity", "test_point", "verdict", "hazard", "unit", "measured", "comparison", "judged"),
    *("min", "near_min", "near_max", "max", "margin", "book", "edition", "clause", "confirmed"),
    *("concession", "visit", "visited_at", "stage", "instrument", "doubtful", "reasons.code"),
    "reasons.reason",
)
RESPONSE = (
    *("owner", "action", "planned_on", "reported_at", "report_reference", "reported_to", "protection"),
    *("cause", "restored_by", "updated_at", "updated_by"),
)
FINDING = (
    *("finding", "kind", "hazard", "state", "quantity", "test_point", "task", "opened_on", "last_seen_on"),
    *("cleared_on", "weeks_open", "reopens", "concession", "visit", "version"),
    *(f"verdict.{name}" for name in VERDICT),
    *(f"response.{name}" for name in RESPONSE),
)
TASK = (
    *("task", "state", "interval", "clause", "last_done_on", "visit", "due_on", "grace_until_on"),
    *("days_overdue", "concession", "reasons.code", "reasons.reason"),
)
HEADER = (
    *("depot", "title", "time_zone"),
    *(f"audit.{name}" for name in AUDIT),
    *(f"sections.{name}" for name in SECTION),
    *(f"sections.findings.{name}" for name in FINDING),
    *(f"sections.tasks.{name}" for name in TASK),
)
"""Every column: the JSON path of its cells, joined by dots."""

Shown = Mapping[str, Any]


def write(found: WeeklyList) -> bytes:
    """The file, in UTF-8 with BOM. Times are UTC, as in JSON."""
    out = io.StringIO(newline="")
    lines = csv.writer(out, lineterminator="\r\n")
    lines.writerow(HEADER)
    head = [found.depot, found.title, found.time_zone, *(_at(found.audit, name) for name in AUDIT)]
    for section, finding, task in _rows(found):
        cells = [
            *head,
            *(_at(section, name) for name in SECTION),
            *(_at(finding, name) for name in FINDING),
            *(_at(task, name) for name in TASK),
        ]
        lines.writerow([_cell(value) for value in cells])
    return (BOM + out.getvalue()).encode()


def _rows(found: WeeklyList) -> Iterator[tuple[Shown | None, Shown | None, Shown | None]]:
    """Section, finding and task of each row; a finding about a task comes with that task."""
    if not found.sections:
        yield None, None, None
    for section in found.sections:
        tasks = {task["task"]: task for task in section["tasks"]}
        for finding in section["findings"]:
            yield section, finding, tasks.get(finding["task"])
        named = {finding["task"] for finding in section["findings"]}
        others = [task for name, task in tasks.items() if name not in named]
        for task in others:
            yield section, None, task
        if not section["findings"] and not others:
            yield section, None, None


def _at(document: Shown | None, path: str) -> Any:
    """What stands at a path; of a list, what stands there in each of its objects."""
    value: Any = document
    for name in path.split("."):
        if value is None:
            return None
        value = [one[name] for one in value] if isinstance(value, list) else value[name]
    return value


def _cell(value: Any) -> str:
    if isinstance(value, list):
        return guarded(";".join("" if one is None else str(one) for one in value))
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return guarded(value)
    return "" if value is None else str(value)
