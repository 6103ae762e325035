"""The head of a weekly list: who judged what, when, by which editions, how much, and what that is worth.

Page and workbook open with these lines; CSV has the same in its `audit.*` columns.
"""

from __future__ import annotations

from collections import Counter

from service.application.audits import WeeklyList
from service.reports import findings, words
from service.rules.words import Hazard, SectionState


def lines(found: WeeklyList) -> list[tuple[str, str]]:
    """The head as (label, text), the caution last."""
    audit, zone = found.audit, found.time_zone
    started, finished = (words.local(audit[name], zone) for name in ("started_at", "finished_at"))
    return [
        ("Depot", f"{found.title} ({found.depot})"),
        ("As of", words.long_day(audit["audit"])),
        ("Run by", audit["started_by"]),
        ("Run at", f"{started:%Y-%m-%d %H:%M}, finished {finished:%H:%M} ({zone})"),
        ("Records as known at", f"{words.moment(audit['known_at'], zone)} ({zone})"),
        ("Judged by", "\n".join(_editions(found)) or "no edition of any limit book"),
        ("Judged", words.counted(audit["sections_judged"], "track circuit")),
        ("Not judged", _not_judged(found)),
        ("Of those judged", _compliance(found)),
        ("Findings", _findings(found)),
        ("Journal", f"sequence {audit['sequence']}, digest {audit['digest']}"),
        ("Caution", audit["caution"]),
    ]


def _editions(found: WeeklyList) -> list[str]:
    return [
        f"{one['book']}, edition {one['edition']}, digest {one['digest']}" for one in found.audit["editions"]
    ]


def _not_judged(found: WeeklyList) -> str:
    """How many were not judged, by why; the recovered are counted by the audit and not listed."""
    count = found.audit["sections_not_judged"]
    why = Counter(section["state"] for section in found.sections if section["compliance"] is None)
    if count > why.total():
        why[SectionState.RECOVERED] += count - why.total()
    reasons = ", ".join(f"{why[state]} {words.plain(state)}" for state in sorted(why))
    return words.counted(count, "track circuit") + (f": {reasons}" if reasons else "")


def _compliance(found: WeeklyList) -> str:
    counts = found.audit["counts"]
    return (
        f"{counts['compliance_no']} outside a limit, {counts['compliance_not_shown']} not shown, "
        f"{counts['compliance_yes']} inside every limit that applies; {counts['overdue']} with a task overdue"
    )


def _findings(found: WeeklyList) -> str:
    """How many findings are listed, and how many of them bear on the detection of trains."""
    listed = [finding for section in found.sections for finding in section["findings"]]
    wrong_side = sum(finding["hazard"] == Hazard.WRONG_SIDE for finding in listed)
    waiting = sum(findings.unreported(finding) for finding in listed)
    counts = found.audit["counts"]
    places = words.counted(len({finding["section"] for finding in listed}), "track circuit")
    return (
        f"{len(listed)} on {places}, "
        f"{wrong_side} wrong side ({words.HAZARDS[Hazard.WRONG_SIDE]}), "
        f"{waiting} found outside and not yet reported; "
        f"{counts['findings_opened']} opened by this audit, {counts['findings_cleared']} cleared by it"
    )
