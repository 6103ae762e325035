"""The register over HTTP: what clients send and get, on both databases."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from datetime import date
from typing import Any

import httpx
import pytest

from service.application import editions
from support import limit_books
from support.api import Api, served

AT = "/v1/depots/ashby"
SECTION: dict[str, Any] = {
    "section": "TV114",
    "state": "in_use",
    "circuit_kind": "dc",
    "traction": "none",
    "required_test_points": ["feed_end", "relay_end"],
}
EQUIPMENT = {
    "circuit_kind": "dc",
    "feed": {"emf_v": 6, "series_ohm": [3, 0]},
    "relay": {"type": "9 ohm", "serial": "R-9", "rated_pick_up_v": 1.4, "fitted_on": "2024-05-01"},
}
INSTRUMENT: dict[str, Any] = {"kind": "meter", "title": None, "serial": None, "calibrations": []}
CALIBRATION = {
    "calibrated_on": "2026-02-03",
    "due_on": "2027-02-03",
    "result": "pass",
    "accuracy_percent": None,
    "resolution": None,
    "resolution_unit": None,
    "lead_resistance_ohm": None,
    "certificate": None,
}
ID = "0197c0de-0000-7000-8000-000000000001"
CREATE = {"If-None-Match": "*"}
LISTS = ("sections", "instruments", "concessions")


@pytest.fixture
def api(database_url: str) -> Iterator[Api]:
    with served(database_url) as found:
        found.depot("ashby")
        found.depot("birchfield")
        yield found


@pytest.fixture
def client(api: Api) -> httpx.Client:
    return api.client("read", "register", holder="R. Marlowe")


def places(answer: httpx.Response) -> set[tuple[str, str | None]]:
    assert answer.headers["content-type"] == "application/problem+json"
    return {
        (one["code"], one.get("pointer") or one.get("parameter") or one.get("column"))
        for one in answer.json()["errors"]
    }


def test_a_section_is_recorded_read_and_edited(client: httpx.Client) -> None:
    made = client.post(f"{AT}/sections", json=SECTION | {"equipment": EQUIPMENT, "title": "TV 114"})
    assert made.status_code == 201
    assert made.headers["location"] == f"{AT}/sections/TV114"
    found = client.get(f"{AT}/sections/TV114")
    assert found.json() == made.json()
    assert found.json()["equipment"]["relay"]["overhauled_on"] is None
    assert found.json()["equipment"]["schema"] == 1
    assert found.json()["valid_from_on"] == "2026-11-30"
    edited = client.put(
        f"{AT}/sections/TV114",
        json=found.json() | {"length_m": 812.5},
        headers={"If-Match": found.headers["etag"]},
    )
    assert (edited.status_code, edited.json()["version"], edited.json()["length_m"]) == (200, 2, 812.5)
    again = client.put(
        f"{AT}/sections/TV114", json=edited.json(), headers={"If-Match": edited.headers["etag"]}
    )
    assert again.json() == edited.json()
    versions = client.get(f"{AT}/sections/TV114/versions").json()
    assert [one["version"] for one in versions["items"]] == [1, 2]
    assert versions["items"][0]["recorded_by"] == "R. Marlowe"
    assert versions["next"] is None


def test_an_edit_names_the_version_it_was_made_from(client: httpx.Client) -> None:
    body = client.post(f"{AT}/sections", json=SECTION).json()
    at = f"{AT}/sections/TV114"
    assert client.put(at, json=body).status_code == 428
    assert client.put(at, json=body, headers={"If-Match": '"v2"'}).status_code == 412
    assert client.put(f"{AT}/sections/X", json=body, headers={"If-Match": '"v1"'}).status_code == 404


def test_a_put_names_every_editable_member_at_whatever_depth(client: httpx.Client) -> None:
    body = client.post(f"{AT}/sections", json=SECTION | {"equipment": EQUIPMENT}).json()
    headers = {"If-Match": '"v1"'}
    del body["title"], body["configuration"]["bonding"], body["equipment"]["relay"]["serial"]
    answer = client.put(f"{AT}/sections/TV114", json=body, headers=headers)
    assert answer.status_code == 422
    assert places(answer) == {
        ("missing", "/title"),
        ("missing", "/configuration/bonding"),
        ("missing", "/equipment/relay/serial"),
    }
    assert client.get(f"{AT}/sections/TV114").json()["version"] == 1


IMPOSSIBLE: list[tuple[dict[str, Any], str]] = [
    ({"section": "TV 114"}, "/section"),
    ({"section": ".."}, "/section"),
    ({"state": "used"}, "/state"),
    ({"lenght_m": 3}, "/lenght_m"),
    ({"length_m": "3"}, "/length_m"),
    ({"length_m": True}, "/length_m"),
    ({"length_m": 0}, "/length_m"),
    ({"return_rails": 3}, "/return_rails"),
    ({"book": "nowhere"}, "/book"),
    ({"commissioned_on": "2026-02-30"}, "/commissioned_on"),
    ({"required_test_points": ["end"]}, "/required_test_points/0"),
    ({"adjacent": [{"boundary": "J1", "separation": "wall"}]}, "/adjacent/0/separation"),
    ({"equipment": {}}, "/equipment"),
    ({"equipment": {"circuit_kind": "coded"}}, "/equipment/circuit_kind"),
    ({"equipment": EQUIPMENT | {"code": "75"}}, "/equipment/code"),
    ({"equipment": EQUIPMENT | {"schema": 2}}, "/equipment/schema"),
    ({"equipment": EQUIPMENT | {"relay": {"rated_pick_up_v": -1}}}, "/equipment/relay/rated_pick_up_v"),
    ({"equipment": EQUIPMENT | {"feed": {"series_ohm": [1]}}}, "/equipment/feed/series_ohm"),
]


def test_what_cannot_be_recorded_is_named(client: httpx.Client) -> None:
    for changes, expected in IMPOSSIBLE:
        answer = client.post(f"{AT}/sections", json=SECTION | changes)
        assert answer.status_code == 422, changes
        assert any(str(place).startswith(expected) for _, place in places(answer)), places(answer)
    assert client.get(f"{AT}/sections").json()["items"] == []


def test_a_name_is_taken_once(client: httpx.Client) -> None:
    client.post(f"{AT}/sections", json=SECTION)
    assert client.post(f"{AT}/sections", json=SECTION | {"section": "tv114"}).status_code == 409


def names(answer: httpx.Response) -> list[str]:
    assert answer.status_code == 200, answer.text
    return [one["section"] for one in answer.json()["items"]]


def test_lists_come_in_pages_with_each_status(client: httpx.Client) -> None:
    for name in ("c", "a", "B"):
        client.post(f"{AT}/sections", json=SECTION | {"section": name})
    first = client.get(f"{AT}/sections", params={"page_size": 2, "state": "in_use"})
    assert names(first) == ["B", "a"]
    assert first.json()["items"][0]["status"]["compliance"] == "not_shown"
    assert first.headers["link"] == f'<{first.json()["next"]}>; rel="next"'
    second = client.get(first.json()["next"])
    assert (names(second), second.json()["next"]) == (["c"], None)
    other_filters = first.json()["next"].replace("in_use", "planned")
    assert client.get(other_filters).status_code == 422


FILTERS: list[tuple[dict[str, str], list[str]]] = [
    ({}, ["A", "B", "C"]),
    ({"circuit_kind": "coded"}, ["B"]),
    ({"traction": "ac_overhead"}, ["C"]),
    ({"line_name": "Main"}, ["A"]),
    ({"state": "planned"}, ["B"]),
    ({"compliance": "not_shown"}, ["A", "C"]),
    ({"compliance": "yes"}, []),
    ({"overdue": "false"}, ["A", "B", "C"]),
    ({"overdue": "true"}, []),
    ({"hazard": "wrong_side"}, []),
    ({"due_before": "2030-01-01"}, []),
    ({"asset_reference": "SIG-7"}, ["C"]),
    ({"traction": "none", "state": "in_use"}, ["A"]),
]


def test_every_filter_narrows(client: httpx.Client) -> None:
    for changes in (
        {"section": "A", "line_name": "Main"},
        {"section": "B", "circuit_kind": "coded", "state": "planned"},
        {"section": "C", "traction": "ac_overhead", "asset_reference": "SIG-7"},
    ):
        assert client.post(f"{AT}/sections", json=SECTION | changes).status_code == 201
    for filters, expected in FILTERS:
        assert names(client.get(f"{AT}/sections", params=filters)) == expected, filters


def test_a_filter_that_is_not_known_returns_nothing(client: httpx.Client) -> None:
    for query in ("circuitkind=dc", "circuit_kind=DC", "overdue=maybe", "due_before=soon", "page_size=1001"):
        answer = client.get(f"{AT}/sections?{query}")
        assert answer.status_code == 422, query
        assert places(answer)


def test_what_has_not_changed_is_not_sent_again(client: httpx.Client) -> None:
    client.post(f"{AT}/sections", json=SECTION)
    client.put(f"{AT}/instruments/VM-3", json=INSTRUMENT, headers=CREATE)
    for number, at in enumerate((*LISTS, "sections/TV114", "sections/TV114/versions", "instruments/VM-3")):
        tag = client.get(f"{AT}/{at}").headers["etag"]
        assert client.get(f"{AT}/{at}", headers={"If-None-Match": tag}).status_code == 304
        client.put(f"{AT}/instruments/{number}", json=INSTRUMENT, headers=CREATE)
        assert client.get(f"{AT}/{at}", headers={"If-None-Match": tag}).status_code == 200


def test_the_list_as_a_file_imports_again_unchanged(api: Api, client: httpx.Client) -> None:
    for name in ("A", "B"):
        client.post(f"{AT}/sections", json=SECTION | {"section": name, "title": "=1", "equipment": EQUIPMENT})
    answer = client.get(f"{AT}/sections", headers={"Accept": "text/csv"})
    assert answer.headers["content-type"] == "text/csv; charset=utf-8"
    assert answer.headers["content-disposition"] == 'attachment; filename="sections-ashby.csv"'
    assert answer.content == client.get(f"{AT}/sections?format=csv").content
    rows = list(csv.DictReader(io.StringIO(answer.content.decode("utf-8-sig"), newline="")))
    assert [row["section"] for row in rows] == ["A", "B"]
    assert rows[0]["status.compliance"] == "not_shown"
    headers = {"Content-Type": "text/csv"}
    done = client.post(f"{AT}/sections/import", content=answer.content, headers=headers)
    assert done.json() == {
        "dry_run": False,
        "created": 0,
        "changed": 0,
        "unchanged": 2,
        "sequence": None,
    }
    theirs = answer.content.replace(b",A,1,", b",A,,").replace(b",B,1,", b",B,,")
    at = "/v1/depots/birchfield/sections"
    tried = client.post(f"{at}/import?dry_run=true", content=theirs, headers=headers)
    assert (tried.json()["created"], tried.json()["sequence"]) == (2, None)
    assert names(client.get(at)) == []
    done = client.post(f"{at}/import", content=theirs, headers=headers)
    assert (done.json()["created"], done.json()["sequence"]) == (2, 3)
    assert names(client.get(at)) == ["A", "B"]


def test_a_bad_file_is_named_line_by_line(client: httpx.Client) -> None:
    content = (
        "section,state,circuit_kind,traction,required_test_points\nA,in_use,dc,none,middle\nB,used,dc,none,"
    )
    answer = client.post(f"{AT}/sections/import", content=content, headers={"Content-Type": "text/csv"})
    assert answer.status_code == 422
    assert {(one["line"], one["column"]) for one in answer.json()["errors"]} == {
        (3, "state"),
        (3, "required_test_points"),
    }
    assert names(client.get(f"{AT}/sections")) == []
    for body, kind, status in ((b"\xff", "text/csv", 400), (b"", "application/json", 415)):
        headers = {"Content-Type": kind}
        answer = client.post(f"{AT}/sections/import", content=body, headers=headers)
        assert answer.status_code == status


def test_a_file_has_no_pages_and_lists_no_other_format(client: httpx.Client) -> None:
    assert client.get(f"{AT}/sections?format=csv&page_size=5").status_code == 422
    assert client.get(f"{AT}/sections?format=xlsx").status_code == 406
    assert client.get(f"{AT}/sections", headers={"Accept": "image/png"}).status_code == 406


def test_instruments_are_created_and_added_to(client: httpx.Client) -> None:
    at = f"{AT}/instruments/VM-3"
    assert client.put(at, json=INSTRUMENT).status_code == 428
    made = client.put(at, json=INSTRUMENT, headers=CREATE)
    assert (made.status_code, made.json()["version"]) == (201, 1)
    assert client.put(at, json=INSTRUMENT, headers=CREATE).status_code == 200
    assert client.put(at, json=INSTRUMENT | {"title": "x"}, headers=CREATE).status_code == 412
    found = client.get(at)
    edited = client.put(
        at, json=found.json() | {"calibrations": [CALIBRATION]}, headers={"If-Match": found.headers["etag"]}
    )
    assert (edited.status_code, edited.json()["calibrations"]) == (200, [CALIBRATION])
    assert edited.json() in client.get(f"{AT}/instruments").json()["items"]
    gone = client.put(at, json=INSTRUMENT, headers={"If-Match": edited.headers["etag"]})
    assert places(gone) == {("calibration_changed", "/calibrations")}
    partial = client.put(
        at, json=INSTRUMENT | {"calibrations": [{**CALIBRATION, "unit": "V"}]}, headers={"If-Match": '"v2"'}
    )
    assert places(partial) == {("unknown_member", "/calibrations/0/unit")}


def in_force(api: Api) -> None:
    """A book whose limit and task judge from the day after tomorrow; the clock is moved there."""
    draft = limit_books.draft_of(limit_books.edition(tasks=[limit_books.task()]))
    with api.service.unit_of_work(limit_books.DRAFTER) as tx:
        editions.draft(tx, draft)
    with api.service.unit_of_work(limit_books.ISSUER) as tx:
        editions.issue(tx, draft.book, draft.edition, date(2026, 12, 2), expected=1)
    api.clock.move(days=2)


def test_concessions_are_granted_once_and_ended(api: Api, client: httpx.Client) -> None:
    in_force(api)
    client.post(f"{AT}/sections", json=SECTION | {"book": "house"})
    body: dict[str, Any] = {
        "section": "TV114",
        "limit": "drop_shunt",
        "task": None,
        "test_point": None,
        "allowed_min": 0.4,
        "allowed_max": None,
        "conditions": "until renewed",
        "protection": "swept before every train",
        "asked_by": "T. Okafor",
        "approved_by": None,
        "from_on": "2026-12-02",
        "until_on": "2026-12-31",
    }
    at = f"{AT}/concessions/{ID}"
    assert client.put(at, json=body).status_code == 428
    made = client.put(at, json=body, headers=CREATE)
    assert made.status_code == 201, made.text
    assert made.json()["approved_by"] == "R. Marlowe"
    assert client.put(at, json=body, headers=CREATE).status_code == 200
    assert client.put(at, json=made.json(), headers=CREATE).status_code == 200
    assert client.put(at, json=body | {"allowed_min": 0.3}, headers=CREATE).status_code == 409
    found = client.get(at)
    assert found.json() == made.json()
    assert client.get(at, headers={"If-None-Match": found.headers["etag"]}).status_code == 304
    assert client.get(f"{AT}/concessions").json()["items"] == [made.json()]
    ended = client.post(f"{at}/end", json={"why": "renewed"})
    assert (ended.status_code, ended.json()["ended_on"]) == (200, "2026-12-02")
    assert client.post(f"{at}/end", json={"why": "again"}).json() == ended.json()
    assert client.put(f"{AT}/concessions/1", json=body, headers=CREATE).status_code == 404
    same = body | {"asked_by": "R. Marlowe"}
    answer = client.put(f"{AT}/concessions/{ID[:-1]}2", json=same, headers=CREATE)
    assert places(answer) == {("same_person", "/asked_by")}


WRITES = (
    ("POST", "sections", SECTION, {}),
    ("POST", "sections/import", None, {}),
    ("PUT", "sections/TV114", SECTION, {"If-Match": '"v1"'}),
    ("PUT", "instruments/VM-3", INSTRUMENT, CREATE),
    ("PUT", f"concessions/{ID}", {}, CREATE),
    ("POST", f"concessions/{ID}/end", {"why": "x"}, {}),
)
READS = (*LISTS, "sections/TV114", "sections/TV114/versions", "instruments/VM-3", f"concessions/{ID}")


def test_a_key_of_one_depot_finds_nothing_of_another(api: Api, client: httpx.Client) -> None:
    client.post("/v1/depots/birchfield/sections", json=SECTION)
    client.put("/v1/depots/birchfield/instruments/VM-3", json=INSTRUMENT, headers=CREATE)
    before = client.get("/v1/depots/birchfield").json()
    for scopes in (("read", "register"), ("audit",)):
        theirs = api.client(*scopes, depot="ashby")
        for method, at, body, headers in (*WRITES, *(("GET", at, None, {}) for at in READS)):
            answer = theirs.request(method, f"/v1/depots/birchfield/{at}", json=body, headers=headers)
            assert answer.status_code == 404, at
    assert client.get("/v1/depots/birchfield").json() == before
    ours = api.client("read", depot="ashby")
    for at in READS:
        answer = ours.get(f"{AT}/{at}")
        assert answer.json()["items"] == [] if at in LISTS else answer.status_code == 404


def test_the_register_needs_its_scopes(api: Api) -> None:
    reader = api.client("read", "readings", "limits", "audit", "admin")
    for method, at, body, headers in WRITES:
        answer = reader.request(method, f"{AT}/{at}", json=body, headers=headers)
        assert answer.status_code == 403, at
    writer = api.client("register", "readings", "limits", "audit", "admin")
    for at in READS:
        assert writer.get(f"{AT}/{at}").status_code == 403, at
