"""One visit a request over HTTP: what is stored, what is refused and where it is wrong."""

from __future__ import annotations

import json
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from email.utils import format_datetime
from typing import Any

import pytest
from visits.field import NOW, SECOND, Handheld, draft_of, drops, places, reading, visit, visit_id

from service.application import sections
from service.application.visit_content import digest
from service.records import journal
from service.rules.words import SectionState

MAY = datetime(2026, 5, 3, 9, tzinfo=UTC)


def plain(number: int = 1, **changes: Any) -> dict[str, Any]:
    return visit(number, MAY, *drops(0.7), reading("relay_voltage", 2130, unit="mV"), **changes)


def sequence(handheld: Handheld) -> int:
    with handheld.field.service.read() as connection:
        return journal.head(connection, "ashby")[0]


def test_a_visit_is_stored_once_and_shows_what_it_proves(handheld: Handheld) -> None:
    first = handheld.post(plain())
    assert first.status_code == 201
    assert first.headers["location"] == f"/v1/depots/ashby/visits/{visit_id(1)}"
    answer = first.json()
    assert (answer["outcome"], answer["visit"], answer["section"]) == ("stored", visit_id(1), "TV114")
    assert answer["received_at"] == "2026-06-15T09:00:00.000000Z"
    assert answer["problem"] is None
    assert {(one["quantity"], one["test_point"], one["verdict"]) for one in answer["verdicts"]} == {
        ("drop_shunt", "feed_end", "within"),
        ("drop_shunt", "relay_end", "within"),
        ("relay_voltage", "relay_end", "within"),
    }
    (volts,) = [one for one in answer["verdicts"] if one["quantity"] == "relay_voltage"]
    assert (volts["measured"], volts["unit"], volts["visit"]) == (2.13, "V", visit_id(1))
    assert answer["status"]["compliance"] == "yes"
    assert answer["status"]["sequence"] == sequence(handheld)


def test_the_same_again_is_stored_already_and_writes_nothing(handheld: Handheld) -> None:
    first, before = handheld.post(plain()).json(), sequence(handheld)
    handheld.api.clock.move(days=1)
    again = handheld.post(
        plain() | {"visited_at": "2026-05-03T11:00:00+02:00", "readings": plain()["readings"][::-1]}
    )
    assert again.status_code == 200
    assert "location" not in again.headers
    assert again.json() == first | {"outcome": "already_stored"} | {
        "status": first["status"] | {"holds_until": again.json()["status"]["holds_until"]}
    }
    assert sequence(handheld) == before


def test_the_same_again_is_warned_again(handheld: Handheld) -> None:
    """The first answer may never have arrived."""
    body = visit(1, MAY, *drops(0.3, stage="as_found"))
    first, again = handheld.post(body), handheld.post(body)
    assert (first.status_code, again.status_code) == (201, 200)
    assert again.json()["cautions"] == first.json()["cautions"]
    assert again.json()["cautions"][0]["code"] == "protect_and_report"


def test_an_id_is_not_used_for_other_content(handheld: Handheld) -> None:
    handheld.post(plain())
    before = sequence(handheld)
    answer = handheld.post(plain(remarks="another"))
    assert answer.status_code == 409
    problem = answer.json()
    assert problem["type"] == "/problems/id-reused"
    assert problem["stored_digest"] == digest(draft_of(plain()))
    assert handheld.get(f"visits/{visit_id(1)}").json()["digest"] == problem["stored_digest"]
    assert sequence(handheld) == before


def test_a_refused_id_may_be_used_again(handheld: Handheld) -> None:
    assert handheld.post(plain(section="TV999")).status_code == 422
    assert handheld.post(plain()).status_code == 201


WRONG: list[tuple[dict[str, Any], tuple[str, str]]] = [
    ({"section": "TV999"}, ("unknown_section", "/section")),
    ({"section": "tv114"}, ("unknown_section", "/section")),
    ({"readings": [reading("drop_shant", 0.7)]}, ("unknown_quantity", "/readings/0/quantity")),
    ({"readings": [*drops(0.7), reading("length", 3, unit="m")]}, ("not_a_reading", "/readings/2/quantity")),
    ({"readings": [reading("drop_shunt", 0.7, unit="ohm")]}, ("unknown_unit", "/readings/0/unit")),
    ({"readings": [reading("drop_shunt", 0.7, unit="V")]}, ("wrong_unit", "/readings/0/unit")),
    ({"readings": [reading("drop_shunt", -0.1)]}, ("absurd_value", "/readings/0/value")),
    ({"readings": [reading("drop_shunt", 1e308, unit="MOhm")]}, ("absurd_value", "/readings/0/value")),
    ({"readings": [reading("drop_shunt", 0.7, "leg:")]}, ("unknown_test_point", "/readings/0/test_point")),
    ({"readings": [reading("drop_shunt", 0.7, source="shunt")]}, ("not_a_residual", "/readings/0/source")),
    ({"readings": [reading("residual_voltage", 0.3)]}, ("missing", "/readings/0/source")),
    (
        {"readings": [reading("residual_voltage", 0.3, source="shunt")]},
        ("missing", "/readings/0/shunt_ohm"),
    ),
    (
        {"readings": [reading("residual_voltage", 0.3, source="train", shunt_ohm=0.5)]},
        ("not_a_shunt", "/readings/0/shunt_ohm"),
    ),
    (
        {"readings": [reading("residual_voltage", 0.3, source="shunt", shunt_ohm=-0.5)]},
        ("absurd_value", "/readings/0/shunt_ohm"),
    ),
    ({"readings": [*drops(0.7), *drops(0.8, "feed_end")]}, ("repeated", "/readings/2")),
    ({"tasks": [{"task": "shunt_test", "done": "done"}] * 2}, ("repeated", "/tasks/1")),
    ({"work_done": ["tamped", "tamped"]}, ("repeated", "/work_done/1")),
    ({"visited_at": "2026-06-15T09:05:00.000001Z"}, ("in_the_future", "/visited_at")),
    ({"visited_at": "9999-12-31T23:59:59Z"}, ("in_the_future", "/visited_at")),
    ({"visited_at": "0001-01-01T00:00:00Z"}, ("before_any_record", "/visited_at")),
]


def test_what_cannot_be_is_named_with_its_place_and_nothing_is_written(handheld: Handheld) -> None:
    before = sequence(handheld)
    for changes, expected in WRONG:
        answer = handheld.post(plain(**changes))
        assert answer.status_code == 422, changes
        assert places(answer.json()) == [expected]
    assert handheld.get("visits").json()["items"] == []
    assert sequence(handheld) == before


MALFORMED: list[tuple[str, int, tuple[str, str] | None]] = [
    ('"value": true', 422, ("float_type", "/readings/0/value")),
    ('"value": "1.5"', 422, ("float_type", "/readings/0/value")),
    ('"value": null', 422, ("float_type", "/readings/0/value")),
    ('"value": NaN', 422, ("finite_number", "/readings/0/value")),
    ('"value": Infinity', 422, ("finite_number", "/readings/0/value")),
    ('"value": 1e999', 422, ("finite_number", "/readings/0/value")),
    ('"value": 0.7, "valeu": 1', 422, ("unknown_member", "/readings/0/valeu")),
    ('"value": .7', 400, None),
    ('"value": 0,7', 400, None),
]


def test_what_is_no_number_or_no_member_is_refused(handheld: Handheld, subtests: pytest.Subtests) -> None:
    for text, status, place in MALFORMED:
        body = json.dumps(plain(readings=drops(0.7, "feed_end"))).replace('"value": 0.7', text, 1)
        with subtests.test(text=text):
            answer = handheld.client.post(
                "/v1/depots/ashby/visits", content=body, headers={"Content-Type": "application/json"}
            )
            assert answer.status_code == status, answer.text
            assert places(answer.json()) == ([] if place is None else [place])
            assert answer.headers["content-type"] == "application/problem+json"


MISSHAPEN: list[tuple[dict[str, Any], str]] = [
    ({"visit": visit_id(1).upper()}, "/visit"),
    ({"visited_at": "2026-05-03T09:00:00"}, "/visited_at"),
    ({"visited_at": 1777798800}, "/visited_at"),
    ({"visited_at": "0001-01-01T00:00:00+14:00"}, "/visited_at"),
    ({"visited_at": "9999-12-31T23:59:59-12:00"}, "/visited_at"),
    ({"readings": [reading("drop_shunt", 0.7, stage="left")]}, "/readings/0/stage"),
    ({"readings": [reading("drop_shunt", 0.7, instrument="SB 22")]}, "/readings/0/instrument"),
    ({"readings": [*drops(0.7), reading("drop_shunt", 0.7, comparison="le")]}, "/readings/2/comparison"),
    ({"conditions": {"balast": "dry"}}, "/conditions/balast"),
    ({"conditions": {"air_temperature_c": 900}}, "/conditions/air_temperature_c"),
    ({"remarks": "x" * 2001}, "/remarks"),
    ({"remarks": "nul \0"}, "/remarks"),
    ({"readings": [reading("drop_shunt", 0.7)] * 201}, "/readings"),
    ({"tasks": [{"task": "shunt_test"}]}, "/tasks/0/done"),
    ({"work_done": ["painted"]}, "/work_done/0"),
]


def test_what_is_misshapen_is_named_with_its_place(handheld: Handheld) -> None:
    for changes, pointer in MISSHAPEN:
        answer = handheld.post(plain(**changes))
        assert answer.status_code == 422, changes
        assert [place for _, place in places(answer.json())] == [pointer]


def test_a_visit_from_the_future_is_told_the_servers_time(handheld: Handheld) -> None:
    late = NOW + timedelta(seconds=300)
    assert handheld.post(plain(1, visited_at=late.isoformat())).status_code == 201
    answer = handheld.post(plain(2, visited_at=(late + timedelta(milliseconds=1)).isoformat()))
    assert (answer.status_code, answer.json()["server_time"]) == (422, "2026-06-15T09:00:00Z")


def test_the_clients_clock_is_kept_and_cautioned(handheld: Handheld) -> None:
    """The client's clock comes in `Date` (RFC 9110, 6.6.1)."""
    for number, by in enumerate((0, -120, 120, 121, -3600)):
        date = format_datetime(NOW + timedelta(seconds=by), usegmt=True)
        answer = handheld.post(plain(number), headers={"Date": date}).json()
        assert answer["clock_offset_s"] == by
        assert ("clock_offset" in {one["code"] for one in answer["cautions"]}) == (abs(by) > 120)
        stored = handheld.get(f"visits/{visit_id(number)}").json()
        assert (stored["clock_offset_s"], stored["visited_at"]) == (by, "2026-05-03T09:00:00.000000Z")


def test_a_clock_generations_off_is_taken_all_the_same(handheld: Handheld) -> None:
    for number, date in enumerate(("Fri, 31 Dec 9999 23:59:59 GMT", "Mon, 01 Jan 0001 00:00:00 GMT")):
        answer = handheld.post(plain(number), headers={"Date": date})
        assert answer.status_code == 201, date
        assert "clock_offset" in {one["code"] for one in answer.json()["cautions"]}


def test_a_date_that_cannot_be_read_says_nothing(handheld: Handheld) -> None:
    unreadable = ("yesterday", "Mon, 99 Jun 2026 09:00:00 GMT", "Mon, 15 Jun 2026 09:00:00")
    for number, date in enumerate(unreadable):
        answer = handheld.post(plain(number), headers={"Date": date})
        assert (answer.status_code, answer.json()["clock_offset_s"]) == (201, None)


def test_a_devices_key_posts_as_that_device_only(handheld: Handheld) -> None:
    bound = handheld.api.client("readings", device="HH-07")
    for device in (None, "HH-08"):
        answer = handheld.post(plain(device=device), bound)
        assert answer.status_code == 403
        assert places(answer.json()) == [("other_device", "/device")]
    assert handheld.post(plain(device="HH-07"), bound).status_code == 201
    (outcome,) = handheld.batch([plain(2, device="HH-08")], bound).json()
    assert (outcome["outcome"], outcome["problem"]["status"]) == ("refused", 403)


def test_posting_needs_the_scope_for_it(handheld: Handheld) -> None:
    handheld.api.depot("elsewhere")
    reader = handheld.api.client("read", "register", "limits", "audit", "admin")
    assert handheld.post(plain(), reader).status_code == 403
    assert handheld.batch([plain()], reader).status_code == 403
    assert handheld.post(plain(), handheld.api.client("readings", depot="elsewhere")).status_code == 404
    assert handheld.post(plain(), handheld.api.client()).status_code == 401


def test_an_unknown_instrument_is_stored_and_proves_nothing(handheld: Handheld) -> None:
    answer = handheld.post(
        plain(readings=[*drops(0.7, instrument="SB-99"), reading("relay_voltage", 2.1)])
    ).json()
    assert answer["outcome"] == "stored"
    told = [(one["verdict"], [reason["code"] for reason in one["reasons"]]) for one in answer["verdicts"][:2]]
    assert told == [("unproven", ["unknown_instrument"])] * 2
    assert ("unknown_instrument", "/readings/1/instrument") in {
        (one["code"], one["pointer"]) for one in answer["cautions"]
    }
    answer = handheld.post(plain(2, readings=drops(0.7, instrument=None))).json()
    assert {reason["code"] for one in answer["verdicts"][:2] for reason in one["reasons"]} == {
        "no_instrument"
    }


def test_a_lapsed_instrument_condemns_and_does_not_clear(handheld: Handheld) -> None:
    body = plain(readings=[reading("relay_voltage", 2.1, instrument="VM-OLD")])
    answer = handheld.post(body).json()
    assert [v["verdict"] for v in answer["verdicts"] if v["quantity"] == "relay_voltage"] == ["unproven"]
    after = visit(2, MAY + timedelta(days=1), reading("relay_voltage", 4.3, instrument="VM-OLD"))
    answer = handheld.post(after).json()
    assert [v["verdict"] for v in answer["verdicts"] if v["quantity"] == "relay_voltage"] == ["outside"]


def test_what_contradicts_itself_is_doubtful(handheld: Handheld) -> None:
    contradiction = [reading("relay_voltage", 3.1), reading("supply_voltage", 2.9, "feed_end")]
    answer = handheld.post(plain(readings=contradiction)).json()
    (volts,) = [one for one in answer["verdicts"] if one["quantity"] == "relay_voltage"]
    assert (volts["verdict"], volts["doubtful"]) == ("unproven", "relay_above_supply")
    told = {(one["code"], one["pointer"]) for one in answer["cautions"]}
    assert {("relay_above_supply", "/readings/0"), ("relay_above_supply", "/readings/1")} <= told


def test_a_task_said_to_be_done_without_its_readings_is_cautioned(handheld: Handheld) -> None:
    tasks = [{"task": "shunt_test", "done": "done"}, {"task": "polishing", "done": "done"}]
    answer = handheld.post(plain(readings=drops(0.7, "relay_end"), tasks=tasks)).json()
    told = {(one["code"], one["pointer"]) for one in answer["cautions"]}
    assert {("not_measured", "/tasks/0"), ("unknown_task", "/tasks/1/task")} <= told


def test_a_visit_is_not_cautioned_for_what_a_newer_one_lacks(handheld: Handheld) -> None:
    done = [{"task": "shunt_test", "done": "done"}]
    newer = visit(2, MAY + timedelta(days=1), *drops(0.7, "relay_end"), tasks=done)
    told = [
        {(one["code"], one["pointer"]) for one in answer["cautions"]}
        for answer in handheld.batch([plain(1, tasks=done), newer]).json()
    ]
    assert [("not_measured", "/tasks/0") in each for each in told] == [False, True]


def test_a_recovered_section_takes_visits_of_the_days_before_only(handheld: Handheld) -> None:
    field = handheld.field
    recorded = field.read(sections.get, "TV114")
    gone = replace(recorded.content, state=SectionState.RECOVERED, valid_from_on=None)
    field.write(sections.edit, "TV114", 1, gone)
    answer = handheld.post(plain(1, visited_at=NOW.isoformat()))
    assert places(answer.json()) == [("recovered_section", "/section")]
    assert handheld.post(plain(2)).status_code == 201


def test_a_void_over_http(handheld: Handheld) -> None:
    handheld.post(visit(1, MAY, *drops(0.3, stage="as_found")))
    at = f"/v1/depots/ashby/visits/{visit_id(1)}/void"
    own = handheld.client.post(at, json={"why": "wrong place"})
    assert (own.status_code, own.json()["type"]) == (409, "/problems/second-holder")
    second = handheld.api.client("readings", holder=SECOND.holder)
    answer = second.post(at, json={"why": "wrong place"})
    assert answer.status_code == 200
    assert answer.json()["voided"] == {
        "voided_at": "2026-06-15T09:00:00.000000Z",
        "voided_by": SECOND.holder,
        "why": "wrong place",
    }
    again = second.post(at, json={"why": "wrong place"})
    assert (again.status_code, again.json()["type"]) == (409, "/problems/already-void")
    assert second.post(at, json={"why": ""}).status_code == 422
    assert second.post(at.replace(visit_id(1), visit_id(2)), json={"why": "x"}).status_code == 404
    reader = handheld.api.client("read")
    assert reader.post(at, json={"why": "x"}).status_code == 403
