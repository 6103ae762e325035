"""A follower that upserts each line's content has the records as the service answers them."""

from __future__ import annotations

import json
from dataclasses import replace
from datetime import timedelta
from typing import Any

from service.application import concessions, findings, instruments, sections, visit_records
from service.application.feed import line_text
from service.records import journal
from service.rules.words import SectionState
from support.world import BOX, World, visit_id

Records = dict[str, dict[str, dict[str, Any]]]


def replayed(world: World) -> Records:
    """By the lines as the feed sends them; an audit says which findings it saw standing."""
    kept: Records = {}
    for row in world.read(lambda *at: list(journal.lines(*at))):
        line = json.loads(line_text(row))
        kind, name, content = line["subject"]["kind"], line["subject"]["name"], line["content"]
        kept.setdefault(kind, {})[name] = content
        if line["action"] == "audit_finished":
            for finding in content["seen"]:
                seen = kept["finding"][finding]
                seen["last_seen_on"] = max(content["audit"], seen["opened_on"])
    return kept


def as_json(value: Any) -> Any:
    return json.loads(journal.canonical(value))


def without_weeks(finding: dict[str, Any]) -> dict[str, Any]:
    """How many weeks it is open is counted to the day of asking."""
    return {name: value for name, value in finding.items() if name != "weeks_open"}


def test_visits_with_voids_and_replacements(lived: World) -> None:
    stored = lived.read(visit_records.page, section=None, received_after=None, after=None, most=100)
    assert len(stored) == 4
    assert replayed(lived)["visit"] == {one["visit"]: as_json(one) for one in stored}


def test_findings(lived: World) -> None:
    lived.visit("A2", 0.4, "as_found")
    lived.week()
    lived.audit()
    lived.visit("A2", 0.2, "as_found")
    lived.section("A3")
    finding = lived.read(findings.page, state="new", section=None, kind=None, after=None, most=1)[0]
    response = dict.fromkeys(findings.RESPONSE) | {"owner": "R. Ashdown"}
    lived.write(findings.respond, finding.finding, response, finding.version)
    lived.week()
    lived.audit()
    stored = lived.read(findings.page, state=None, section=None, kind=None, after=None, most=100)
    shown = {row.finding: without_weeks(findings.wire(row, lived.clock.now.date())) for row in stored}
    assert {one["state"] for one in shown.values()} == {"new", "open", "cleared"}
    found = replayed(lived)["finding"]
    assert {name: without_weeks(one) for name, one in found.items()} == shown


def test_sections(lived: World) -> None:
    recorded = lived.read(sections.get, "A2")
    changed = replace(
        recorded.content,
        state=SectionState.OUT_OF_USE,
        title="Down Main",
        valid_from_on=lived.clock.now.date(),
    )
    lived.write(sections.edit, "A2", recorded.version, changed)
    found = replayed(lived)["section"]
    for name in ("A1", "A2"):
        assert found[name] == as_json(lived.read(sections.get, name).document())


def test_instruments_and_concessions(lived: World) -> None:
    lived.write(instruments.put, "SB", 1, replace(BOX, title="Shunt box"))
    content = concessions.Content(
        section="A1",
        limit="drop_shunt",
        task=None,
        test_point=None,
        allowed_min=0.3,
        allowed_max=None,
        conditions="speed",
        protection="hand signals",
        asked_by="T. Marlow",
        approved_by=None,
        from_on=lived.clock.now.date(),
        until_on=lived.clock.now.date() + timedelta(days=9),
    )
    lived.write(concessions.grant, visit_id(99), content)
    lived.write(concessions.end, visit_id(99), "put right")
    found = replayed(lived)
    box, conceded = lived.read(instruments.get, "SB"), lived.read(concessions.get, visit_id(99))
    assert found["instrument"] == {"SB": as_json(box.document())}
    assert found["concession"] == {visit_id(99): as_json(conceded.document())}
