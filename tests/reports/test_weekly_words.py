"""What the list says in words: the head, and each finding. Expected texts are written out by hand."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from service.api.schemas.audits import AuditAnswer, WeeklyListAnswer
from service.application.audits import WeeklyList
from service.reports import findings, head, words
from service.rules import words as codes


def finding_of(found: WeeklyList, section: str, place: int = 0) -> tuple[dict[str, Any], dict[str, Any]]:
    listed = next(one for one in found.sections if one["section"] == section)
    return listed["findings"][place], listed


def test_the_sample_is_what_the_service_answers(found: WeeklyList) -> None:
    """So the sample cannot drift from the wire; one of its kinds is of a later version."""
    audit = AuditAnswer.model_validate(found.audit)
    answer = WeeklyListAnswer(
        depot=found.depot, title=found.title, time_zone=found.time_zone, audit=audit, sections=found.sections
    )
    assert answer.model_dump(mode="json")["sections"] == found.sections
    kinds = {finding["kind"] for section in found.sections for finding in section["findings"]}
    assert kinds == {*codes.FindingKind, "will_not_hold"}


def test_the_head_says_who_when_by_what_how_much_and_that_it_is_advice(found: WeeklyList) -> None:
    said = dict(head.lines(found))
    assert said["Run by"] == "clock"
    assert said["As of"] == "Monday 30 November 2026"
    # 04:00:59 UTC is 06:00 in Athens in November (UTC+2).
    assert said["Run at"] == "2026-11-30 06:00, finished 06:01 (Europe/Athens)"
    assert said["Judged by"] == f"tarn-house, edition 3, digest {'7d79' * 16}"
    assert said["Judged"] == "236 track circuits"
    assert said["Not judged"] == "4 track circuits: 2 out of use, 1 planned, 1 recovered"
    assert said["Of those judged"].startswith("25 outside a limit, 41 not shown, 170 inside every limit")
    assert said["Findings"].startswith("18 on 13 track circuits, 11 wrong side (a train may not be detected)")
    assert "1 found outside and not yet reported" in said["Findings"]
    assert said["Journal"] == f"sequence 4711, digest {found.audit['digest']}"
    assert head.lines(found)[-1] == ("Caution", found.audit["caution"])


def test_the_head_names_no_edition_it_did_not_use(found: WeeklyList) -> None:
    bare = replace(found, sections=[], audit={**found.audit, "editions": [], "sections_not_judged": 0})
    said = dict(head.lines(bare))
    assert said["Judged by"] == "no edition of any limit book"
    assert said["Not judged"] == "0 track circuits"
    assert said["Findings"].startswith("0 on 0 track circuits")


@pytest.mark.parametrize(
    ("section", "place", "said"),
    [
        ("TV114", 0, ("0.3 Ω", "at least 0.5 Ω", "0.2 Ω beyond")),
        ("TV120(a)", 0, ("under 0.06 Ω", "at least 0.5 Ω", "0.2 Ω beyond")),
        ("TV131", 0, ("0.6 Ω", "at least 0.5 Ω", "0.1 Ω inside")),
        ("TV132", 1, ("150 000 Ω", "at least 200 000 Ω", "50 000 Ω beyond")),
        ("TV132", 2, ("1.74 V", "1.75 to 4.2 V", "0.01 V beyond")),
        ("TV140", 0, ("no", "must be yes", "")),
        ("TV141", 0, ("1 510 m", "at most 1 500 m", "10 m beyond")),
        ("TV150", 0, ("nothing", "at least 0.5 Ω", "")),
        ("TV150", 1, ("at least 0.3 Ω", "at least 0.5 Ω", "")),
        ("TV150", 2, ("at least 0.3 V", "not known", "")),
    ],
)
def test_measured_limit_and_margin(
    found: WeeklyList, section: str, place: int, said: tuple[str, str, str]
) -> None:
    verdict = finding_of(found, section, place)[0]["verdict"]
    texts = (findings.measured(verdict), findings.limit(verdict), findings.margin(verdict))
    assert tuple(text.replace("\u00a0", " ").replace("\u202f", " ") for text in texts) == said


def test_the_end_that_was_judged_is_named_where_it_is_not_the_reading(found: WeeklyList) -> None:
    """A pick-up shunt of 0.5 on 0.1 Ω steps means (0.4, 0.5]: the lower end is judged."""
    verdict = {**finding_of(found, "TV114")[0]["verdict"], "measured": 0.5, "judged": 0.4}
    assert findings.measured(verdict) == "0.5\u00a0Ω, judged at 0.4\u00a0Ω"


def test_on_the_limit_and_without_a_value(found: WeeklyList) -> None:
    verdict = finding_of(found, "TV114")[0]["verdict"]
    assert findings.margin({**verdict, "margin": 0.0}) == "none: on the limit"
    unproven = {**verdict, "measured": None, "judged": None, "verdict": "unproven"}
    assert findings.measured(unproven) == "no value"


@pytest.mark.parametrize(
    ("section", "place", "kind", "hazard"),
    [
        ("TV114", 0, "found outside the limit, not yet reported", "a train may not be detected"),
        ("TV120(a)", 0, "found outside the limit, reported, not closed", "a train may not be detected"),
        ("TV131", 0, "outside the limit", "a train may not be detected"),
        ("TV132", 2, "outside the limit", "clear track shows occupied"),
        ("TV140", 0, "configuration outside the limit", "a train may not be detected"),
        ("TV142", 0, "poor rail contact", "a train may not be detected"),
        ("TV150", 0, "not shown", ""),
        ("TV150", 1, "not shown", "if outside, a train may not be detected"),
        ("TV150", 3, "doubtful reading", "if outside, a train may not be detected"),
        ("TV160", 0, "overdue", ""),
        ("TV161", 0, "concession about to lapse", ""),
        ("TV162", 0, "will not hold", "a train may not be detected"),
    ],
)
def test_kind_and_hazard(found: WeeklyList, section: str, place: int, kind: str, hazard: str) -> None:
    finding = finding_of(found, section, place)[0]
    assert (findings.kind(finding), findings.hazard(finding)) == (kind, hazard)


@pytest.mark.parametrize(
    ("changes", "why"),
    [
        ({"book": None, "edition": None}, "the track circuit has no limit book"),
        ({"edition": None}, "no edition of its limit book is in force"),
        ({}, "no limit of the edition in force applies to it"),
    ],
)
def test_why_nothing_judges_it(found: WeeklyList, changes: dict[str, None], why: str) -> None:
    finding, section = finding_of(found, "TV151")
    assert findings.why(finding, {**section, "book": "b", "edition": "1", **changes}) == [why]


def test_standing(found: WeeklyList) -> None:
    finding = finding_of(found, "TV120(a)")[0]
    assert findings.standing(finding) == "open 3 weeks"
    assert findings.standing({**finding, "weeks_open": 1}) == "open 1 week"
    assert findings.standing({**finding, "weeks_open": 0}) == "open for less than a week"
    assert findings.standing({**finding, "state": "dormant"}) == "dormant"
    assert findings.standing(finding_of(found, "TV131")[0]) == "new, back after it was cleared"


def test_an_unknown_code_is_shown_as_it_is() -> None:
    assert words.spelt(words.HAZARDS, "odd_side") == "odd side"
    assert words.unit("lx") == "lx"
    assert words.interval("P1Q") == "P1Q"
    assert words.interval(None) == ""
    assert words.at_point("up_to_TV115") == "up_to_TV115"
    assert findings.subject({"quantity": "new_quantity", "task": None}) == "New quantity"


def test_local_time_follows_the_zone_over_its_change() -> None:
    """Athens is UTC+3 until 01:00 UTC on 25 October 2026, UTC+2 from then on (EU Directive 2000/84/EC)."""
    assert words.moment("2026-10-25T00:59:00Z", "Europe/Athens") == "2026-10-25 03:59"
    assert words.moment("2026-10-25T01:00:00Z", "Europe/Athens") == "2026-10-25 03:00"


def test_kilometres_say_only_what_is_known() -> None:
    assert words.kilometres({"from_km": 11.4, "to_km": 12.25}) == "km 11.4 to 12.25"
    assert words.kilometres({"from_km": None, "to_km": 12.0}) == "km 12"
    assert words.kilometres({"from_km": None, "to_km": None}) == ""
