"""A weekly list with every kind of finding, as an audit would store it. All names in it are invented."""

from __future__ import annotations

from dataclasses import replace
from datetime import datetime
from typing import Any

import pytest

from service.application.answers import task_json, verdict_json
from service.application.audits import CAUTION, WeeklyList
from service.rules.intervals import TaskStatus
from service.rules.verdicts import Verdict
from service.rules.words import Comparison, Hazard, Reason, Stage, TaskState, VerdictWord

HOSTILE = '=1+1 "quoted", <script>alert(1)</script> & more'
TWO_LINES = "@first\nsecond; third"

VERDICT = Verdict(
    limit="drop_shunt",
    quantity="drop_shunt",
    test_point="relay_end",
    verdict=VerdictWord.OUTSIDE,
    hazard=Hazard.WRONG_SIDE,
    unit="Ohm",
    measured=0.3,
    comparison=Comparison.EQ,
    judged=0.3,
    min=0.5,
    near_min=0.6,
    near_max=None,
    max=None,
    margin=-0.2,
    book="tarn-house",
    edition="3",
    clause="T 2.1",
    confirmed=True,
    concession=None,
    visit="0197c0de-7b1a-7c3d-9e4f-5a6b7c8d9e0f",
    visited_at=datetime.fromisoformat("2026-11-23T23:40:31Z"),
    stage=Stage.AS_FOUND,
    instrument="SB-22",
    doubtful=None,
)
REGISTER = replace(
    VERDICT,
    test_point=None,
    comparison=None,
    near_min=None,
    visit=None,
    visited_at=None,
    stage=None,
    instrument=None,
)
CONCESSION = "0197c0de-0000-7000-8000-0000000000c1"
ANSWERED = {
    "owner": "M. Quill",
    "action": "Feed turned down; ballast between 11.4 and 11.6 km to be cleaned",
    "planned_on": "2026-12-04",
    "reported_at": "2026-11-24T08:20:00.000000Z",
    "report_reference": "WSF-118",
    "reported_to": "Control, duty officer",
    "protection": "Circuit disconnected, trains hand-signalled",
    "cause": None,
    "restored_by": None,
    "updated_at": "2026-11-24T09:00:00.000000Z",
    "updated_by": "M. Quill",
}


class _Names:
    """Names of findings, one after the other."""

    def __init__(self) -> None:
        self.made = 0

    def __call__(self) -> str:
        self.made += 1
        return f"0197c0de-0000-7000-8000-{self.made:012d}"


def section(name: str, *findings: dict[str, Any], **changes: Any) -> dict[str, Any]:
    """A listed track circuit as an audit row keeps it."""
    shown = {
        "section": name,
        "title": f"Up Main, {name}",
        "line_name": "Tarn Valley",
        "from_km": 11.4,
        "to_km": 12.3,
        "circuit_kind": "dc",
        "traction": "none",
        "asset_reference": None,
        "state": "in_use",
        "book": "tarn-house",
        "edition": "3",
        "compliance": "no",
        "overdue": False,
        "worst_hazard": None,
        "next_due_on": "2027-02-28",
        "last_visited_at": "2026-11-23T23:40:31.000000Z",
        "tasks": [],
        "findings": [{**finding, "section": name} for finding in findings],
    }
    return {**shown, **changes}


def finding(kind: str, verdict: Verdict | None = None, **changes: Any) -> dict[str, Any]:
    """A finding as the wire shows it; what the verdict says is taken from it."""
    shown = {
        "depot": "tarn-valley",
        "finding": "0197c0de-0000-7000-8000-000000000000",
        "section": "",
        "kind": kind,
        "hazard": None if verdict is None else verdict.hazard,
        "state": "new",
        "quantity": None if verdict is None else verdict.quantity,
        "test_point": None if verdict is None else verdict.test_point,
        "task": None,
        "opened_on": "2026-11-30",
        "last_seen_on": "2026-11-30",
        "cleared_on": None,
        "weeks_open": 0,
        "reopens": None,
        "concession": None if verdict is None else verdict.concession,
        "visit": None,
        "verdict": None if verdict is None else verdict_json(verdict),
        "response": None,
        "version": 1,
    }
    return {**shown, **changes}


def task(name: str, state: TaskState, due: str | None, grace: str | None, *reasons: Reason) -> dict[str, Any]:
    """A task that is due or overdue, as of the list's day."""
    as_of, *days = (None if day is None else datetime.fromisoformat(day).date() for day in (DAY, due, grace))
    status = TaskStatus(name, state, "P3M", "T 6.1", None, None, *days, None, reasons)
    return task_json(status, as_of)


DAY = "2026-11-30"


def _found_outside() -> list[dict[str, Any]]:
    waiting = finding("found_outside", VERDICT, opened_on="2026-11-24", visit=VERDICT.visit)
    told = finding(
        "found_outside",
        replace(VERDICT, test_point="leg:b", comparison=Comparison.LT, measured=0.06, judged=0.06),
        state="open",
        opened_on="2026-11-09",
        weeks_open=3,
        response=ANSWERED,
    )
    hostile = section("TV114", waiting, title=HOSTILE, line_name=TWO_LINES, worst_hazard="wrong_side")
    return [hostile, section("TV120(a)", told, worst_hazard="wrong_side", circuit_kind="audio_frequency")]


def _outside() -> list[dict[str, Any]]:
    wet = Reason(
        "not_repeated_dry",
        "outside on 2026-09-02 in dry ballast, and not since shown inside in ballast as dry",
    )
    hidden = replace(VERDICT, measured=0.6, judged=0.6, margin=0.1, stage=Stage.AS_LEFT, reasons=(wet,))
    conceded = replace(VERDICT, measured=0.4, judged=0.4, margin=-0.1, concession=CONCESSION)
    excitation = replace(
        VERDICT,
        limit="excitation",
        quantity="relay_voltage",
        unit="V",
        measured=1.74,
        judged=1.74,
        min=1.75,
        near_min=1.85,
        near_max=4.1,
        max=4.2,
        margin=-0.01,
        confirmed=False,
        hazard=Hazard.RIGHT_SIDE,
    )
    insulation = replace(
        VERDICT,
        limit="insulation",
        quantity="insulation_resistance",
        margin=-50000.0,
        measured=150000.0,
        judged=150000.0,
        min=200000.0,
        near_min=500000.0,
    )
    return [
        section("TV131", finding("outside", hidden, reopens="0197c0de-0000-7000-8000-0000000000aa")),
        section(
            "TV132",
            finding("outside", conceded, state="open", weeks_open=1),
            finding("outside", insulation),
            finding("outside", excitation),
            circuit_kind="dc_ac_immune",
            traction="ac_overhead",
        ),
    ]


def _configuration() -> list[dict[str, Any]]:
    kind = replace(
        REGISTER,
        limit="circuit_kind_permitted",
        quantity="circuit_kind_permitted",
        unit="1",
        measured=0.0,
        judged=0.0,
        min=1.0,
        margin=-1.0,
        clause="T 5.1; T 5.2",
        reasons=(Reason("combination_not_permitted", "dc under dc_third_rail is not among those permitted"),),
    )
    length = replace(
        REGISTER,
        limit="length",
        quantity="length",
        unit="m",
        measured=1510.0,
        judged=1510.0,
        min=None,
        max=1500.0,
        margin=-10.0,
        hazard=Hazard.RIGHT_SIDE,
    )
    rusty = finding("poor_rail_contact", hazard="wrong_side")
    return [
        section("TV140", finding("configuration", kind), traction="dc_third_rail"),
        section("TV141", finding("configuration", length), title=None, line_name=None, from_km=None),
        section("TV142", rusty, compliance="yes"),
    ]


def _not_shown() -> list[dict[str, Any]]:
    lapsed = Reason("calibration_lapsed", "the calibration of SB-22 was due on 2026-11-01")
    blank = dict.fromkeys(("measured", "judged", "margin", "comparison"))
    unread = replace(VERDICT, verdict=VerdictWord.NOT_MEASURED, hazard=None, test_point="feed_end", **blank)
    unread = replace(unread, visit=None, visited_at=None, stage=None, instrument=None)
    unproven = replace(
        VERDICT,
        verdict=VerdictWord.UNPROVEN,
        comparison=Comparison.GE,
        measured=0.3,
        judged=None,
        margin=None,
        instrument=None,
        reasons=(lapsed,),
    )
    unrated = replace(
        unproven,
        quantity="relay_voltage",
        unit="V",
        min=None,
        near_min=None,
        reasons=(Reason("no_rated_value", "the fitted relay has no pick-up voltage"),),
    )
    swapped = Reason("doubtful", "rail volts higher at the relay end than at the feed end")
    doubtful = replace(
        unproven, quantity="rail_voltage", unit="V", doubtful="ends_swapped", reasons=(swapped,)
    )
    found = [finding("not_shown", one) for one in (unread, unproven, unrated)]
    silent = Reason("attribute_missing", "the register does not say: commissioned_on")
    undated = task("bond_inspection", TaskState.DUE, None, None, silent)
    return [
        section("TV150", *found, finding("doubtful", doubtful), compliance="not_shown"),
        section("TV151", finding("not_shown"), compliance="not_shown", book=None, edition=None),
        section("TV152", finding("not_shown", task="bond_inspection"), tasks=[undated]),
    ]


def _owed() -> list[dict[str, Any]]:
    late = task("shunt_test", TaskState.OVERDUE, "2026-11-01", "2026-11-15")
    due = task("relay_bench_test", TaskState.DUE, "2026-11-20", "2027-02-20")
    lapsing = finding("concession_lapsing", concession=CONCESSION, quantity="drop_shunt")
    return [
        section("TV160", finding("overdue", task="shunt_test"), tasks=[due, late], overdue=True),
        section("TV161", lapsing, compliance="yes"),
        section("TV162", finding("will_not_hold", VERDICT)),
    ]


def sample() -> WeeklyList:
    """A list with every kind of finding, one of a kind not known here, and sections that were not judged."""
    idle = {"compliance": None, "next_due_on": None}
    listed = [*_found_outside(), *_outside(), *_configuration(), *_not_shown(), *_owed()]
    listed += [
        section("TV170", state="out_of_use", title="Goods loop", **idle),
        section("TV171", state="out_of_use", title="Old dock", last_visited_at=None, **idle),
        section("TV172", state="planned", title=None, **idle),
    ]
    names = _Names()
    for one in listed:
        for found in one["findings"]:
            found["finding"] = names()
    audit = {
        "depot": "tarn-valley",
        "audit": DAY,
        "state": "finished",
        "started_at": "2026-11-30T04:00:59.000000Z",
        "finished_at": "2026-11-30T04:01:02.500000Z",
        "started_by": "clock",
        "known_at": "2026-11-30T04:00:59.000000Z",
        "sequence": 4711,
        "digest": "5d41402abc4b2a76b9719d911017c592ae6f0b1c2d3e4f5061728394a5b6c7d8",
        "editions": [{"book": "tarn-house", "edition": "3", "digest": "7d79" * 16}],
        "sections_judged": 236,
        "sections_not_judged": 4,
        "counts": {
            "compliance_yes": 170,
            "compliance_not_shown": 41,
            "compliance_no": 25,
            "overdue": 17,
            "compliance_not_judged": 4,
            "findings_opened": 12,
            "findings_cleared": 5,
        },
        "caution": CAUTION,
    }
    return WeeklyList("tarn-valley", "Tarn Valley & Fell depot", "Europe/Athens", audit, listed)


@pytest.fixture
def found() -> WeeklyList:
    return sample()


@pytest.fixture
def nothing_found(found: WeeklyList) -> WeeklyList:
    return replace(found, sections=[])
