"""Sentences about a finding and the verdict it rests on, for page and workbook.

They say what the audit stored and add nothing to it; a finding is told by its codes, which `words` spells.
"""

from __future__ import annotations

from collections.abc import Mapping

from service.reports import words
from service.reports.words import Shown
from service.rules.findings import LAPSING
from service.rules.quantities import QUANTITIES
from service.rules.words import FindingKind, FindingState, VerdictWord

KINDS: Mapping[str, str] = {
    FindingKind.OUTSIDE: "outside the limit",
    FindingKind.NOT_SHOWN: "not shown",
    FindingKind.OVERDUE: "overdue",
    FindingKind.CONFIGURATION: "configuration outside the limit",
    FindingKind.POOR_RAIL_CONTACT: "poor rail contact",
    FindingKind.CONCESSION_LAPSING: "concession about to lapse",
    FindingKind.DOUBTFUL: "doubtful reading",
}
RAIL_CONTACT = (
    "the rail was found rusty or contaminated; only clean rails, or a residual reading under a train inside "
    "the limits, clear this"
)


def unreported(finding: Shown) -> bool:
    """Whether it was found outside a wrong-side limit and no response says that it was reported."""
    response = finding["response"]
    return finding["kind"] == FindingKind.FOUND_OUTSIDE and (
        response is None or response["reported_at"] is None
    )


def kind(finding: Shown) -> str:
    """What kind of finding it is."""
    if finding["kind"] == FindingKind.FOUND_OUTSIDE:
        told = "not yet reported" if unreported(finding) else "reported, not closed"
        return f"found outside the limit, {told}"
    return words.spelt(KINDS, finding["kind"])


def unsure(finding: Shown) -> bool:
    """Whether nothing was found outside: it is only not known to be inside."""
    return finding["kind"] in (FindingKind.NOT_SHOWN, FindingKind.DOUBTFUL)


def hazard(finding: Shown) -> str:
    """What may come of it, as a condition where nothing was found outside; empty if no hazard is named."""
    text = words.spelt(words.HAZARDS, finding["hazard"])
    return f"if outside, {text}" if text and unsure(finding) else text


def subject(finding: Shown) -> str:
    """The quantity or the task that it is about; empty where it is about neither."""
    quantity = QUANTITIES.get(finding["quantity"])
    if quantity is not None:
        return quantity.title
    return words.plain(finding["quantity"] or finding["task"]).capitalize()


def standing(finding: Shown) -> str:
    """Whether it is new, for how long it has been open, and whether it came back."""
    weeks = finding["weeks_open"]
    if finding["state"] == FindingState.NEW:
        text = "new"
    elif finding["state"] == FindingState.OPEN:
        text = f"open {words.counted(weeks, 'week')}" if weeks else "open for less than a week"
    else:
        text = words.plain(finding["state"])
    return f"{text}, back after it was cleared" if finding["reopens"] else text


def why(finding: Shown, section: Shown) -> list[str]:
    """Why it is a finding, in sentences; empty where the figures say it all."""
    task = task_of(finding, section)
    sources = [one for one in (finding["verdict"], task) if one is not None]
    reasons = [reason["reason"] for one in sources for reason in one["reasons"]]
    code = finding["kind"]
    if code == FindingKind.POOR_RAIL_CONTACT:
        reasons.append(RAIL_CONTACT)
    elif code == FindingKind.CONCESSION_LAPSING:
        reasons.append(f"its last day is within {LAPSING.days} days")
    elif code == FindingKind.NOT_SHOWN and not sources:
        reasons.append(_nothing_judges(section))
    return reasons


def _nothing_judges(section: Shown) -> str:
    if section["book"] is None:
        return "the track circuit has no limit book"
    if section["edition"] is None:
        return "no edition of its limit book is in force"
    return "no limit of the edition in force applies to it"


def task_of(finding: Shown, section: Shown) -> Shown | None:
    """The state of the task that a finding is about, if it is about one that is due or overdue."""
    return next((task for task in section["tasks"] if task["task"] == finding["task"]), None)


def is_yes_or_no(verdict: Shown) -> bool:
    """Whether the quantity is a question to the register that is answered by 0 or 1."""
    quantity = QUANTITIES.get(verdict["quantity"])
    return quantity is not None and quantity.from_register and quantity.unit == "1" and quantity.highest == 1


def unit(verdict: Shown) -> str:
    """The sign of the unit of a verdict's numbers."""
    return "1 = yes" if is_yes_or_no(verdict) else words.unit(verdict["unit"])


def measured(verdict: Shown) -> str:
    """What was measured, or stands in the register, and at which end of it the limit was judged."""
    value, judged = verdict["measured"], verdict["judged"]
    if value is None:
        return "nothing" if verdict["verdict"] == VerdictWord.NOT_MEASURED else "no value"
    if is_yes_or_no(verdict):
        return "yes" if value else "no"
    compared = words.COMPARED.get(verdict["comparison"], "")
    text = f"{compared} {words.with_unit(value, verdict['unit'])}".lstrip()
    if judged in (None, value):
        return text
    return f"{text}, judged at {words.with_unit(judged, verdict['unit'])}"


def limit(verdict: Shown) -> str:
    """The limit as a person says it."""
    least, most, code = verdict["min"], verdict["max"], verdict["unit"]
    if least is None and most is None:
        return "not known"
    if is_yes_or_no(verdict):
        return "must be yes" if least else "must be no"
    if most is None:
        return f"at least {words.with_unit(least, code)}"
    if least is None:
        return f"at most {words.with_unit(most, code)}"
    return f"{words.number(least)} to {words.with_unit(most, code)}"


def margin(verdict: Shown) -> str:
    """How far inside or beyond the limit; empty where nothing was judged, or there is no more or less."""
    value = verdict["margin"]
    if value is None or is_yes_or_no(verdict):
        return ""
    if value == 0:
        return "none: on the limit"
    return f"{words.with_unit(abs(value), verdict['unit'])} {'inside' if value > 0 else 'beyond'}"


def clause(verdict: Shown) -> str:
    """The clause that was applied, its book and edition, and whether it was ever confirmed."""
    doubt = "" if verdict["confirmed"] else ", not confirmed"
    return f"{verdict['clause']} of {verdict['book']}, edition {verdict['edition']}{doubt}"
