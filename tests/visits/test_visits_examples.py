"""Worked verdicts once through the database: what is stored decides, whatever arrives first.

The cases are the rule tests' own; here they pass posting, `latest` and reading again.
"""

from __future__ import annotations

from datetime import UTC, date, datetime
from itertools import permutations
from typing import Any

import pytest
from visits.field import SECOND, TECHNICIAN, Field, drops, reading, visit, visit_id, wetness

from service.application import concessions, findings
from service.rules.words import Compliance, VerdictWord
from support.rule_cases import codes

MAY_3, MAY_10 = datetime(2026, 5, 3, 9, tzinfo=UTC), datetime(2026, 5, 10, 9, tzinfo=UTC)


def open_findings(field: Field) -> list[tuple[str, str, str, str | None]]:
    rows = field.read(findings.page, state=None, section="TV114", kind=None, after=None, most=100)
    return [(row.kind, row.test_point, row.state, row.visit) for row in rows]


def test_found_outside_and_adjusted_is_within_and_waits_for_its_answer(field: Field) -> None:
    found = drops(0.3, stage="as_found")
    (outcome,) = field.post(visit(1, MAY_3, *found, *drops(0.7), work_done=["adjusted"]))
    assert outcome.cautions[0].code == "protect_and_report"
    verdict = field.verdict()
    assert (verdict.verdict, verdict.measured, verdict.stage) == (VerdictWord.WITHIN, 0.7, "as_left")
    expected = [("found_outside", point, "new", visit_id(1)) for point in ("feed_end", "relay_end")]
    assert sorted(open_findings(field)) == expected


def test_wetter_ballast_does_not_clear_a_failure(field: Field) -> None:
    field.store(visit(1, MAY_3, *drops(0.4)))
    (outcome,) = field.post(visit(2, MAY_10, *drops(0.6), **wetness("wet")))
    verdict = field.verdict()
    assert (verdict.verdict, codes(verdict)) == (VerdictWord.OUTSIDE, ["not_repeated_dry"])
    assert outcome.status is not None
    assert outcome.status.compliance == Compliance.NO
    assert outcome.cautions[0].code == "protect_and_report"


@pytest.mark.parametrize("newest_first", [False, True])
@pytest.mark.parametrize(("ballast", "word"), [("dry", "within"), ("wet", "outside")])
def test_a_late_visit_is_judged_in_its_place(
    field: Field, ballast: str, word: str, *, newest_first: bool
) -> None:
    bodies = [visit(1, MAY_3, *drops(0.4)), visit(2, MAY_10, *drops(0.7), **wetness(ballast))]
    field.store(*(reversed(bodies) if newest_first else bodies))
    verdict = field.verdict()
    assert (verdict.verdict, verdict.visit) == (word, visit_id(2))
    assert codes(verdict) == ([] if word == "within" else ["not_repeated_dry"])


def test_a_late_visit_says_that_a_newer_one_decides(field: Field) -> None:
    field.store(visit(2, MAY_10, *drops(0.7)))
    (outcome,) = field.post(visit(1, MAY_3, *drops(0.4)))
    assert [caution.code for caution in outcome.cautions] == [
        "protect_and_report",
        "rail_surface_not_shown",
        "newer_visit",
    ]


def test_a_voided_failure_counts_no_longer_but_its_finding_stays(field: Field) -> None:
    field.store(visit(1, MAY_3, *drops(0.7)), visit(2, MAY_10, *drops(0.4, stage="as_found")))
    assert field.verdict().verdict == VerdictWord.OUTSIDE
    field.void(2)
    verdict = field.verdict()
    assert (verdict.verdict, verdict.visit) == (VerdictWord.WITHIN, visit_id(1))
    assert [row[0] for row in open_findings(field)] == ["found_outside"] * 2


def test_a_concession_shows_outside_until_it_lapses(field: Field) -> None:
    terms: dict[str, Any] = {
        "section": "TV114",
        "limit": "drop_shunt",
        "task": None,
        "test_point": None,
        "allowed_min": 0.4,
        "allowed_max": None,
        "conditions": "until the feed is renewed",
        "protection": "the section is swept before every train",
        "asked_by": "T. Okafor",
        "approved_by": "R. Ashdown",
        "from_on": date(2026, 6, 15),
        "until_on": date(2026, 6, 30),
    }
    permission = visit_id(900)
    field.store(visit(1, MAY_3, *drops(0.4)))
    field.write(concessions.grant, permission, concessions.Content(**terms))
    now = field.judged().status
    assert {verdict.concession for verdict in now.verdicts if verdict.quantity == "drop_shunt"} == {
        permission
    }
    assert (now.compliance, now.holds_until) == (Compliance.NO, date(2026, 6, 30))
    field.clock.move(days=16)
    later = field.judged().status
    assert {verdict.concession for verdict in later.verdicts} == {None}
    assert (later.as_of, later.compliance) == (date(2026, 7, 1), Compliance.NO)


def test_of_two_at_one_instant_the_higher_id_decides(field: Field) -> None:
    bodies = {
        number: visit(number, MAY_3, reading("relay_voltage", volts), *drops(0.7))
        for number, volts in ((1, 2.0), (2, 2.2), (3, 2.4))
    }
    for offset, order in enumerate(permutations(bodies)):
        numbers = [10 * offset + number for number in order]
        field.store(*(bodies[n % 10] | {"visit": visit_id(n)} for n in numbers))
        assert field.verdict("relay_voltage").measured == 2.4
        assert field.latest() == sorted(field.latest())
        assert {row[3] for row in field.latest()} == {visit_id(10 * offset + 3)}


def test_both_stages_of_the_deciding_visit_are_kept(field: Field) -> None:
    volts = [reading("relay_voltage", 1.6, stage="as_found"), reading("relay_voltage", 2.2)]
    field.store(visit(2, MAY_10, *volts))
    field.store(visit(1, MAY_3, reading("relay_voltage", 3.0)), actor=SECOND)
    assert [row[2:7] for row in field.latest()] == [
        ("relay_end", visit_id(2), MAY_10, 1.6, 2.2),
    ]
    assert field.verdict("relay_voltage").measured == 2.2
    assert TECHNICIAN.holder != SECOND.holder
