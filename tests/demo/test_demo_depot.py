"""What the demo's depot shows: every planted fault as what it is, and of the rest nothing."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta
from itertools import pairwise
from pathlib import Path

import pytest
from demo.depot import Demo, built, opened

from service.application import access, audits, findings, section_lists, status, verification, visit_records
from service.demo import faults, summary
from service.demo.faults import PLANTED, Planted
from service.demo.lines import DEPOT
from service.rules.words import CircuitKind, FindingKind, Traction

PLANTED_IN = {section: fault for fault in PLANTED for section in fault.sections}


def kinds_shown(demo: Demo, section: str) -> set[tuple[str, str | None]]:
    """(kind, quantity or task) of a section's findings."""
    found = demo.listed.get(section, {"findings": []})["findings"]
    return {(one["kind"], one["quantity"] or one["task"]) for one in found}


@pytest.mark.parametrize("fault", PLANTED, ids=lambda fault: fault.fault)
def test_a_planted_fault_shows_as_what_it_is(demo: Demo, fault: Planted) -> None:
    for section in fault.sections:
        if fault.shows is None:
            assert section not in demo.listed
        else:
            assert (fault.shows.value, fault.where) in kinds_shown(demo, section)


def test_nothing_else_is_listed(demo: Demo) -> None:
    assert set(demo.listed) - PLANTED_IN.keys() == set(faults.NOT_IN_USE)
    for section, state in faults.NOT_IN_USE.items():
        assert (demo.listed[section]["state"], demo.listed[section]["findings"]) == (state.value, [])


def test_most_sections_are_shown_to_be_within_limits(demo: Demo) -> None:
    status.roll_due(demo.service, DEPOT)
    with demo.service.read(snapshot=True) as connection:
        counts = audits.wire(audits.get(connection, DEPOT, None))["counts"]
        overdue = list(section_lists.every(connection, DEPOT, section_lists.Filters(overdue=True)))
    judged = sum(counts[f"compliance_{word}"] for word in ("yes", "not_shown", "no"))
    assert judged == demo.counts["sections"] - len(faults.NOT_IN_USE)
    assert counts["compliance_yes"] >= 0.9 * judged
    late = {*faults.sections("leg_never_tested")}
    late |= {name for fault in PLANTED if fault.shows is FindingKind.OVERDUE for name in fault.sections}
    assert {one.section.section for one in overdue} == late


def test_what_is_not_yet_reported_stands_at_the_top(demo: Demo) -> None:
    assert next(iter(demo.listed)) == faults.sections("found_outside_not_reported")[0]


def test_what_was_reported_is_answered_for_and_gone(demo: Demo) -> None:
    section = faults.REPORTED[0]
    with demo.service.read() as connection:
        rows = findings.page(
            connection, DEPOT, state=None, section=section, kind="found_outside", after=None, most=10
        )
    assert rows
    assert {row.state for row in rows} == {"cleared"}
    assert section not in demo.listed


def test_findings_have_ages_and_some_are_new(demo: Demo) -> None:
    with demo.service.read() as connection:
        held = [row.audit for row in audits.page(connection, DEPOT, None, 100)]
    assert {later - earlier for earlier, later in pairwise(held)} == {timedelta(days=7)}
    assert len(held) >= 4
    shown = [finding for section in demo.listed.values() for finding in section["findings"]]
    assert max(finding["weeks_open"] for finding in shown) >= 3
    assert {finding["state"] for finding in shown} == {"new", "open"}
    assert any(finding["response"] for finding in shown)


def test_the_weather_faults_pass_as_measured(demo: Demo) -> None:
    for fault in ("turned_up_in_the_wet", "set_up_in_the_dry"):
        (section,) = faults.sections(fault)
        with demo.service.read(snapshot=True) as connection:
            now = status.of_section(connection, DEPOT, section, demo.service.clock()).status
        assert (now.compliance, now.overdue) == ("yes", False)


def test_the_handheld_with_a_wrong_clock_is_known_by_its_offset(demo: Demo) -> None:
    (section,) = faults.sections("clock_an_hour_out")
    with demo.service.read() as connection:
        found = visit_records.page(
            connection, DEPOT, section=section, received_after=None, after=None, most=100
        )
    offsets = [visit["clock_offset_s"] for visit in sorted(found, key=lambda visit: visit["visited_at"])]
    assert offsets[-1] == 3600
    assert offsets[0] == 0


def test_the_depot_is_of_every_kind_and_size_that_was_asked_for(demo: Demo) -> None:
    with demo.service.read(snapshot=True) as connection:
        records = [
            one.section.content for one in section_lists.every(connection, DEPOT, section_lists.Filters())
        ]
    assert len(records) == 240
    assert {record.circuit_kind for record in records} == set(CircuitKind)
    assert {record.traction for record in records} == set(Traction)
    assert sum(record.layout is not None for record in records) >= 10
    assert demo.counts["visits"] > 3500


def test_every_scope_has_a_key_that_opens_it(demo: Demo) -> None:
    assert set(demo.keys) == set(access.SCOPES)
    with demo.service.read() as connection:
        for scope, text in demo.keys.items():
            assert access.authenticate(connection, text, demo.service.clock()).scopes == {scope}


def test_journal_and_records_agree(demo: Demo) -> None:
    with demo.service.read(snapshot=True) as connection:
        assert list(verification.broken_chains(connection)) == []
        assert list(verification.mismatched_visits(connection)) == []


def test_it_is_built_in_under_a_minute_and_says_how_far_it_is(demo: Demo) -> None:
    assert demo.seconds < 60
    assert len(demo.told) > 10


def test_the_first_lines_name_the_gravest(demo: Demo) -> None:
    head, counts, first, *_ = summary.first_lines(demo.service)
    assert "2026-12-01" in head
    assert f"{demo.counts['sections'] - len(faults.NOT_IN_USE)} track circuits judged" in counts
    assert "CB145" in first
    assert "found outside" in first


@pytest.mark.slow
@pytest.mark.parametrize(
    "now",
    [
        datetime(2026, 7, 5, 23, 45, tzinfo=UTC),
        datetime(2028, 2, 29, 4, tzinfo=UTC),
        datetime(2026, 10, 1, 12, tzinfo=UTC),
    ],
    ids=str,
)
def test_on_other_days_it_shows_the_same(tmp_path: Path, now: datetime) -> None:
    demo = opened(tmp_path, now, built(tmp_path, now))
    for fault in PLANTED:
        test_a_planted_fault_shows_as_what_it_is(demo, fault)
    test_nothing_else_is_listed(demo)
    test_the_weather_faults_pass_as_measured(demo)
    demo.service.database.close()
    assert date.fromisoformat(demo.listed["CB145"]["findings"][0]["opened_on"]) < now.date()
