"""Batches over HTTP: one outcome a visit, in order, whatever the others are."""

from __future__ import annotations

import json
from datetime import UTC, datetime, timedelta
from typing import Any

import httpx
import pytest
from visits.field import Handheld, drops, places, reading, visit, visit_id

from service.api import bounds
from service.records import journal
from support.register import lines

MAY = datetime(2026, 5, 3, 9, tzinfo=UTC)


def plain(number: int = 1, **changes: Any) -> dict[str, Any]:
    return visit(number, MAY + timedelta(minutes=number), reading("relay_voltage", 2.1), **changes)


def outcomes(answer: httpx.Response) -> list[tuple[int, str]]:
    assert answer.status_code == 200, answer.text
    return [(one["index"], one["outcome"]) for one in answer.json()]


def of_lines(answer: httpx.Response) -> list[dict[str, Any]]:
    assert answer.status_code == 200, answer.text
    assert answer.headers["content-type"] == "application/x-ndjson"
    return [json.loads(line) for line in answer.text.splitlines()]


def dumped(*bodies: dict[str, Any]) -> list[bytes]:
    return [json.dumps(body).encode() for body in bodies]


MIXED = [
    (plain(1), "stored"),
    (plain(2, section="TV999"), "refused"),
    (plain(3, section="TV115"), "stored"),
    (plain(1), "already_stored"),
    (plain(1, remarks="other"), "refused"),
    (plain(2), "stored"),  # the id was refused, so it may be used again
    ({"visit": "no id"}, "refused"),
    (plain(4, readings=[reading("relay_voltage", 2.1, unit="volt")]), "refused"),
]


@pytest.mark.parametrize("as_lines", [False, True])
def test_one_outcome_a_visit_in_order(handheld: Handheld, *, as_lines: bool) -> None:
    bodies = [body for body, _ in MIXED]
    answer = handheld.lines(*dumped(*bodies)) if as_lines else handheld.batch(bodies)
    found = of_lines(answer) if as_lines else answer.json()
    assert [(one["index"], one["outcome"]) for one in found] == [
        (index, expected) for index, (_, expected) in enumerate(MIXED)
    ]
    for one in found:
        assert (one["problem"] is None) == (one["outcome"] != "refused")
        assert (one["received_at"] is None) == (one["outcome"] == "refused")
    assert places(found[1]["problem"]) == [("unknown_section", "/section")]
    assert (found[4]["problem"]["status"], found[4]["problem"]["type"]) == (409, "/problems/id-reused")
    assert {place for _, place in places(found[6]["problem"])} == {"/visit", "/section", "/visited_at"}
    assert places(found[7]["problem"]) == [("unknown_unit", "/readings/0/unit")]
    kept = {one["visit"] for one in handheld.get("visits").json()["items"]}
    assert kept == {visit_id(number) for number in (1, 2, 3)}


def test_statuses_are_those_after_the_batch(handheld: Handheld) -> None:
    bodies = [visit(1, MAY, *drops(0.4)), visit(2, MAY + timedelta(days=1), *drops(0.7))]
    first, second = handheld.batch(bodies).json()
    assert first["status"] == second["status"]
    assert first["verdicts"] == second["verdicts"]
    assert {one["verdict"] for one in first["verdicts"] if one["quantity"] == "drop_shunt"} == {"within"}
    assert "newer_visit" in {one["code"] for one in first["cautions"]}
    assert "newer_visit" not in {one["code"] for one in second["cautions"]}


def test_a_line_that_is_no_json_refuses_that_line(handheld: Handheld) -> None:
    first, last = dumped(plain(1), plain(2))
    found = of_lines(handheld.lines(first, b"{", b'"text"', b"[1]", b"\xff\xfe", b"", b"  ", last))
    assert [one["outcome"] for one in found] == ["stored", *["refused"] * 4, "stored"]
    assert [one["problem"]["status"] for one in found[1:5]] == [400, 422, 422, 400]
    assert [one["index"] for one in found] == list(range(6))


ODD_LINES = [
    b'{"visit": NaN}',
    b'{"visit": 1e999, "section": -Infinity}',
    b'{"visit": ' + b"9" * 5000 + b"}",
    b"[" * 3000 + b"]" * 3000,
    b'{"visit": "\\ud800"}',
    b"null",
    b"true",
]


def test_an_odd_line_refuses_that_line(handheld: Handheld, subtests: pytest.Subtests) -> None:
    for number, line in enumerate(ODD_LINES):
        (good,) = dumped(plain(number))
        with subtests.test(line=line[:40]):
            odd, stored = of_lines(handheld.lines(line, good))
            assert (odd["outcome"], stored["outcome"]) == ("refused", "stored")
            assert odd["problem"]["status"] in (400, 422)


ODD_ITEMS = [
    b"1e999",
    b"9" * 5000,
    b'"\\u0000"',
    b'{"remarks": "\\ud83d"}',  # half a surrogate pair
    b"null",
    b"[[[]]]",
]


def test_an_odd_item_of_an_array_refuses_that_item(handheld: Handheld, subtests: pytest.Subtests) -> None:
    for number, item in enumerate(ODD_ITEMS):
        (good,) = dumped(plain(number))
        with subtests.test(item=item[:40]):
            answer = as_json(handheld, b"[" + item + b"," + good + b"]")
            assert outcomes(answer) == [(0, "refused"), (1, "stored")]


def as_json(handheld: Handheld, content: bytes) -> httpx.Response:
    headers = {"Content-Type": "application/json"}
    return handheld.client.post("/v1/depots/ashby/visits/batch", content=content, headers=headers)


def test_a_body_that_is_no_array_is_refused_as_a_whole(handheld: Handheld, subtests: pytest.Subtests) -> None:
    for content in (b"", b"[", b"{}", b"7", b"[NaN]", b"[-Infinity]", b"\xff", b"[1,]", b"[" * 10**5):
        with subtests.test(content=content[:40]):
            answer = as_json(handheld, content)
            assert (answer.status_code, answer.json()["type"]) == (400, "/problems/unparsable")


def test_a_body_of_another_kind_or_too_large_is_refused_as_a_whole(handheld: Handheld) -> None:
    answer = handheld.client.post(
        "/v1/depots/ashby/visits/batch", content=b"[]", headers={"Content-Type": "text/csv"}
    )
    assert answer.status_code == 415
    too_large = b"[" + b" " * bounds.BODY_BYTES + b"]"
    assert as_json(handheld, too_large).status_code == 413


def test_none_stored_is_answered_too(handheld: Handheld) -> None:
    before = lines(handheld.field)  # type: ignore[arg-type]
    assert outcomes(handheld.batch([])) == []
    assert outcomes(handheld.batch([plain(section="TV999"), 3])) == [(0, "refused"), (1, "refused")]
    assert of_lines(handheld.lines(b"")) == []
    assert [one["outcome"] for one in of_lines(handheld.lines(b"{"))] == ["refused"]
    assert lines(handheld.field) == before  # type: ignore[arg-type]
    assert handheld.post(plain(), handheld.api.client("readings"), headers={}).status_code == 201
    assert outcomes(handheld.batch([plain()])) == [(0, "already_stored")]


def test_five_hundred_visits_and_not_one_more(handheld: Handheld) -> None:
    bodies = [plain(number) for number in range(bounds.BATCH_VISITS + 1)]
    answer = handheld.batch(bodies)
    assert (answer.status_code, answer.json()["type"]) == (413, "/problems/too-large")
    assert handheld.lines(*dumped(*bodies)).status_code == 413
    assert handheld.get("visits").json()["items"] == []
    answer = handheld.batch(bodies[:-1], headers={"Prefer": "return=minimal"})
    assert outcomes(answer) == [(index, "stored") for index in range(bounds.BATCH_VISITS)]
    with handheld.field.service.read(snapshot=True) as connection:
        kept = list(journal.lines(connection, "ashby", subject_kind="visit"))
    assert [line["subject_name"] for line in kept] == [body["visit"] for body in bodies[:-1]]


def test_minimal_answers_leave_verdicts_out(handheld: Handheld) -> None:
    """RFC 7240: several preferences in one field, a value as token or quoted."""
    for prefer in ("return=minimal", "respond-async, return=minimal", 'Return="minimal"; x=1'):
        (minimal,) = handheld.batch([visit(1, MAY, *drops(0.4))], headers={"Prefer": prefer}).json()
        assert minimal["verdicts"] == []
        assert minimal["status"]["compliance"] == "no"
        assert minimal["cautions"][0]["code"] == "protect_and_report"
        single = handheld.post(visit(2, MAY, *drops(0.4)), headers={"Prefer": prefer}).json()
        assert single["verdicts"] == []


def test_other_preferences_change_nothing(handheld: Handheld) -> None:
    for prefer in ("return=representation", "handling=strict", "return=minimalist"):
        (full,) = handheld.batch([plain()], headers={"Prefer": prefer}).json()
        assert len(full["verdicts"]) == 3


@pytest.mark.parametrize("correction_first", [False, True])
def test_a_correction_inside_a_batch(handheld: Handheld, *, correction_first: bool) -> None:
    wrong = visit(1, MAY, reading("relay_voltage", 4.5))
    right = visit(2, MAY, reading("relay_voltage", 2.1), replaces=visit_id(1))
    handheld.batch([right, wrong] if correction_first else [wrong, right])
    assert [row[3] for row in handheld.field.latest()] == [visit_id(2)]
    assert handheld.field.verdict("relay_voltage").measured == 2.1


def test_a_correction_at_one_section_leaves_the_others_of_its_batch_as_they_are(handheld: Handheld) -> None:
    """Each section's newest readings decide, whatever another section's visit in the same batch corrects."""
    handheld.field.section("TV117")
    elsewhere = visit(3, MAY, reading("relay_voltage", 2.3), section="TV117")
    wrong = visit(1, MAY, reading("relay_voltage", 4.5))
    right = visit(2, MAY, reading("relay_voltage", 2.1), replaces=visit_id(1))
    handheld.batch([wrong, right, elsewhere])
    assert [(row[0], row[3]) for row in handheld.field.latest()] == [
        ("TV114", visit_id(2)),
        ("TV117", visit_id(3)),
    ]


def test_the_clients_clock_is_that_of_the_whole_batch(handheld: Handheld) -> None:
    answer = handheld.batch([plain(1), plain(2)], headers={"Date": "Mon, 15 Jun 2026 09:10:00 GMT"})
    assert [one["clock_offset_s"] for one in answer.json()] == [600, 600]
    assert all("clock_offset" in {c["code"] for c in one["cautions"]} for one in answer.json())


def test_posting_everything_again_after_a_restore_stores_what_was_lost(handheld: Handheld) -> None:
    handheld.batch([plain(1), plain(2)])
    again = handheld.batch([plain(number) for number in (3, 1, 4, 2)])
    assert [outcome for _, outcome in outcomes(again)] == [
        "stored",
        "already_stored",
        "stored",
        "already_stored",
    ]
