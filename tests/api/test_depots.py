"""Depots over HTTP: opened, listed in pages, edited by those who read them."""

from __future__ import annotations

import asyncio
from datetime import UTC, datetime
from typing import Any

import pytest

from service.api import conditional
from service.application import depots
from service.errors import PreconditionMissingError, StaleError, UnparsableError
from service.records import journal
from support.api import Api

BODY = {
    "depot": "harrow",
    "title": "Harrow Vale signalling depot",
    "time_zone": "Europe/London",
    "audit_weekday": "monday",
    "audit_hour": 5,
}
TERMS = {name: value for name, value in BODY.items() if name != "depot"}


def test_a_depot_is_opened_with_its_journal(api: Api) -> None:
    client = api.client("admin", "read")
    answer = client.post("/v1/depots", json=BODY)
    assert answer.status_code == 201
    assert answer.headers["location"] == "/v1/depots/harrow"
    expected = BODY | {"version": 1, "created_at": "2026-11-30T09:00:00.000000Z", "sequence": 1}
    assert answer.json() == expected
    assert client.get("/v1/depots/harrow").json() == expected
    line = client.get("/v1/depots/harrow/journal").json()["items"][0]
    assert (line["action"], line["subject"]) == ("depot_created", {"kind": "depot", "name": "harrow"})
    assert line["content"].items() <= expected.items()


def test_a_name_is_taken_once_without_regard_to_case(api: Api) -> None:
    client = api.client("admin", "read")
    client.post("/v1/depots", json=BODY)
    for name in ("harrow", "HARROW"):
        assert client.post("/v1/depots", json=BODY | {"depot": name}).status_code == 409
    assert len(client.get("/v1/depots").json()["items"]) == 1


WRONG: list[tuple[dict[str, Any], str]] = [
    ({"depot": "_service"}, "/depot"),
    ({"depot": ".."}, "/depot"),
    ({"depot": "a/b"}, "/depot"),
    ({"depot": "x" * 41}, "/depot"),
    ({"depot": ""}, "/depot"),
    ({"time_zone": "Mars/Olympus"}, "/time_zone"),
    ({"time_zone": "../../etc/passwd"}, "/time_zone"),
    ({"time_zone": "Europe"}, "/time_zone"),
    ({"time_zone": "/etc/localtime"}, "/time_zone"),
    ({"time_zone": "a\x00b"}, "/time_zone"),
    ({"audit_weekday": 1}, "/audit_weekday"),
    ({"audit_weekday": "Monday"}, "/audit_weekday"),
    ({"audit_hour": 24}, "/audit_hour"),
    ({"audit_hour": -1}, "/audit_hour"),
    ({"audit_hour": "5"}, "/audit_hour"),
    ({"audit_hour": True}, "/audit_hour"),
    ({"audit_hour": 5.5}, "/audit_hour"),
    ({"audit_hour": 10**4000}, "/audit_hour"),
    ({"title": None}, "/title"),
    ({"title": "bell\x07"}, "/title"),
    ({"colour": "red"}, "/colour"),
    ({"version": 1}, "/version"),
]


def test_what_a_depot_cannot_be(api: Api, subtests: pytest.Subtests) -> None:
    client = api.client("admin", "read")
    for wrong, pointer in WRONG:
        with subtests.test(pointer=pointer, wrong=str(wrong)[:60]):
            answer = client.post("/v1/depots", json=BODY | wrong)
            assert answer.status_code == 422
            assert [error["pointer"] for error in answer.json()["errors"]] == [pointer]
    assert client.get("/v1/depots").json() == {"items": [], "next": None}


def test_what_a_depot_cannot_lack(api: Api, subtests: pytest.Subtests) -> None:
    client = api.client("admin")
    for left_out in BODY:
        with subtests.test(left_out=left_out):
            sent = {name: value for name, value in BODY.items() if name != left_out}
            answer = client.post("/v1/depots", json=sent)
            assert answer.json()["errors"] == [
                {"code": "missing", "reason": "must be given", "pointer": f"/{left_out}"}
            ]


def test_an_edit_needs_the_version_it_was_made_from(api: Api) -> None:
    api.depot("harrow")
    client = api.client("admin", "read")
    read = client.get("/v1/depots/harrow")
    sent = read.json() | {"title": "Renamed"}
    assert client.put("/v1/depots/harrow", json=sent).status_code == 428
    assert client.put("/v1/depots/harrow", json=sent, headers={"If-Match": "*"}).status_code == 428
    first = client.put("/v1/depots/harrow", json=sent, headers={"If-Match": read.headers["etag"]})
    assert (first.status_code, first.json()["title"], first.json()["version"]) == (200, "Renamed", 2)
    second = client.put("/v1/depots/harrow", json=sent, headers={"If-Match": read.headers["etag"]})
    assert (second.status_code, second.json()["type"]) == (412, "/problems/stale")
    third = client.put("/v1/depots/harrow", json=sent, headers={"If-Match": first.headers["etag"]})
    assert third.json()["version"] == 3


# RFC 9110, 13.1.1: If-Match compares strongly, so a weak tag never matches.
NO_MATCH = ('W/"v1"', '"1"', "v1", '"v2"', '""', '"v1", "v2"', '"v9999999999"')


def test_tags_that_match_nothing(api: Api, subtests: pytest.Subtests) -> None:
    api.depot("harrow")
    client = api.client("admin")
    for tag in NO_MATCH:
        with subtests.test(tag=tag):
            answer = client.put("/v1/depots/harrow", json=TERMS, headers={"If-Match": tag})
            assert answer.status_code == 412


def test_a_put_names_every_editable_member(api: Api) -> None:
    api.depot("harrow")
    client = api.client("admin")
    sent = {name: value for name, value in TERMS.items() if name != "audit_hour"}
    answer = client.put("/v1/depots/harrow", json=sent, headers={"If-Match": '"v1"'})
    assert (answer.status_code, answer.json()["errors"][0]["pointer"]) == (422, "/audit_hour")


def test_server_owned_members_sent_back_are_ignored(api: Api) -> None:
    api.depot("harrow")
    client = api.client("admin", "read")
    sent = client.get("/v1/depots/harrow").json() | {"depot": "other", "version": "x", "sequence": None}
    answer = client.put("/v1/depots/harrow", json=sent, headers={"If-Match": '"v1"'})
    assert (answer.json()["depot"], answer.json()["version"], answer.json()["sequence"]) == ("harrow", 2, 2)


def test_a_new_time_zone_judges_every_section_again(api: Api) -> None:
    api.depot("harrow")
    client = api.client("admin", "read")
    title = client.put("/v1/depots/harrow", json=TERMS | {"title": "T"}, headers={"If-Match": '"v1"'})
    assert title.status_code == 200
    zone = client.put(
        "/v1/depots/harrow", json=TERMS | {"time_zone": "Asia/Tokyo"}, headers={"If-Match": '"v2"'}
    )
    assert zone.status_code == 200
    lines = client.get("/v1/depots/harrow/journal").json()["items"]
    assert [line["sections"] for line in lines] == [[], [], None]
    with api.service.read(snapshot=True) as connection:
        assert journal.verify(connection, "harrow") is None


def test_depots_are_listed_in_pages_that_hold_together(api: Api) -> None:
    names = ["B", "a", "a-b", "a.b", "b", "c"]  # by bytes: capitals first
    for number, name in enumerate(["a", "B", "c", "a.b", "a-b"]):
        api.depot(name, depots.Terms(f"depot {number}", "UTC", "sunday", 0))
    names.remove("b")
    client = api.client("read")
    found, address = [], "/v1/depots?page_size=2"
    while address:
        answer = client.get(address)
        page = answer.json()
        assert len(page["items"]) <= 2
        found += [item["depot"] for item in page["items"]]
        address = page["next"]
        linked = answer.links.get("next", {}).get("url")
        assert linked == address
    assert found == names
    assert [item["depot"] for item in client.get("/v1/depots").json()["items"]] == names


def test_a_key_of_one_depot_lists_that_one(api: Api) -> None:
    api.depot("harrow")
    api.depot("marsh")
    items = api.client("read", depot="marsh").get("/v1/depots").json()["items"]
    assert [item["depot"] for item in items] == ["marsh"]


def test_what_is_known_is_not_sent_again(api: Api) -> None:
    api.depot("harrow")
    client = api.client("admin", "read")
    first = client.get("/v1/depots/harrow")
    known = {"If-None-Match": first.headers["etag"]}
    again = client.get("/v1/depots/harrow", headers=known)
    assert (again.status_code, again.content, again.headers["etag"]) == (304, b"", first.headers["etag"])
    # RFC 9110, 13.1.2: If-None-Match takes a list and compares weakly.
    listed = client.get("/v1/depots/harrow", headers={"If-None-Match": f'"x", W/{first.headers["etag"]}'})
    assert listed.status_code == 304
    assert client.get("/v1/depots/harrow/journal", headers=known).status_code == 200
    client.put("/v1/depots/harrow", json=TERMS, headers={"If-Match": first.headers["etag"]})
    assert client.get("/v1/depots/harrow", headers=known).status_code == 200


def test_a_new_local_day_is_sent_though_nothing_was_written(api: Api) -> None:
    """London is on UTC in November: its day ends at 24:00 UTC."""
    api.depot("harrow")
    client = api.client("read")
    api.clock.now = datetime(2026, 11, 30, 23, 59, 59, tzinfo=UTC)
    known = {"If-None-Match": client.get("/v1/depots/harrow").headers["etag"]}
    assert client.get("/v1/depots/harrow", headers=known).status_code == 304
    api.clock.move(seconds=1)
    assert client.get("/v1/depots/harrow", headers=known).status_code == 200


def precondition(if_match: str | None, if_none_match: str | None) -> int | None:
    return asyncio.run(conditional.edits_or_creates(if_match, if_none_match))


def test_a_put_edits_a_version_or_creates() -> None:
    """RFC 9110, 13.1.2: `If-None-Match: *` holds only where there is nothing yet."""
    assert precondition(None, "*") is None
    assert precondition('"v3.0af"', None) == 3
    assert precondition('"v3"', None) == 3
    with pytest.raises(PreconditionMissingError):
        precondition(None, None)
    with pytest.raises(UnparsableError):
        precondition('"v3"', "*")
    with pytest.raises(UnparsableError):
        precondition(None, '"v3"')
    with pytest.raises(StaleError):
        precondition('"v"', None)
