"""Audits, weekly lists and findings as clients see them."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from datetime import timedelta
from typing import Any

import httpx
import openpyxl
import pytest

from support.api import Api, served
from support.world import World, furnished

AUDITS, FINDINGS = "/v1/depots/harrow/audits", "/v1/depots/harrow/findings"
XLSX = "application/vnd.openxmlformats-officedocument.spreadsheetml.sheet"


@pytest.fixture
def api(database_url: str) -> Iterator[Api]:
    with served(database_url) as found:
        yield found


@pytest.fixture
def world(api: Api) -> World:
    """Two track circuits: one fails, one was never visited."""
    made = furnished(api.service, api.clock, others=("marsh",))
    made.section("A1")
    made.section("A2")
    made.visit("A1", 0.3, "as_found")
    return made


@pytest.fixture
def client(api: Api, world: World) -> httpx.Client:
    return api.client("read", "audit", holder="R. Ashdown")


def audited(client: httpx.Client, as_of: str | None = None) -> dict[str, Any]:
    answer = client.post(AUDITS, json={"as_of": as_of})
    assert answer.status_code == 201, answer.text
    found: dict[str, Any] = answer.json()
    return found


def problem(answer: httpx.Response) -> tuple[int, str]:
    assert answer.headers["content-type"] == "application/problem+json"
    return answer.status_code, answer.json()["type"]


def test_an_audit_by_request(client: httpx.Client) -> None:
    first = client.post(AUDITS, json={})
    assert (first.status_code, first.headers["location"]) == (201, f"{AUDITS}/2026-11-02")
    assert first.json() == client.get(first.headers["location"]).json()
    assert audited(client, "2026-11-02") == first.json()
    assert first.json()["started_by"] == "R. Ashdown"
    assert [one["audit"] for one in client.get(AUDITS).json()["items"]] == ["2026-11-02"]


def test_dates_that_cannot_be(client: httpx.Client, subtests: pytest.Subtests) -> None:
    audited(client, "2026-11-01")
    cases = {
        "2026-11-03": (422, "/problems/not-acceptable"),
        "2026-10-31": (409, "/problems/before-last-audit"),
        "2026-02-30": (422, "/problems/not-acceptable"),
        "yesterday": (422, "/problems/not-acceptable"),
    }
    for as_of, expected in cases.items():
        with subtests.test(as_of=as_of):
            answer = client.post(AUDITS, json={"as_of": as_of})
            assert problem(answer) == expected
            assert [error["pointer"] for error in answer.json()["errors"]] == ["/as_of"]
    assert len(client.get(AUDITS).json()["items"]) == 1


def test_the_latest_and_those_that_are_not(client: httpx.Client, world: World) -> None:
    for which in ("latest", "2026-11-02", "2026-02-30", "soon"):
        assert problem(client.get(f"{AUDITS}/{which}")) == (404, "/problems/not-found")
        assert problem(client.get(f"{AUDITS}/{which}/list")) == (404, "/problems/not-found")
    audited(client)
    world.week()
    second = audited(client)
    assert client.get(f"{AUDITS}/latest").json() == second
    assert client.get(f"{AUDITS}/latest/list").json()["audit"] == second
    assert client.get(f"{AUDITS}/2026-11-02/list").json()["audit"]["audit"] == "2026-11-02"


def test_audits_page_by_date(client: httpx.Client, world: World) -> None:
    for _ in range(5):
        audited(client)
        world.clock.move(days=1)
    found, address = [], f"{AUDITS}?page_size=2"
    while address:
        page = client.get(address)
        found += [one["audit"] for one in page.json()["items"]]
        address = page.json()["next"]
    assert found == [f"2026-11-0{day}" for day in range(2, 7)]


def test_the_list_in_each_format(client: httpx.Client) -> None:
    audited(client)
    address = f"{AUDITS}/latest/list"
    listed = client.get(address).json()
    assert [one["section"] for one in listed["sections"]] == ["A1", "A2"]
    kinds = [finding["kind"] for finding in listed["sections"][0]["findings"]]
    assert kinds == ["found_outside", "outside"]

    text = client.get(address, params={"format": "csv"})
    assert text.headers["content-type"] == "text/csv; charset=utf-8"
    assert text.content.startswith(b"\xef\xbb\xbf")
    rows = list(csv.DictReader(io.StringIO(text.content.decode("utf-8-sig"), newline="")))
    assert [row["sections.section"] for row in rows] == ["A1", "A1", "A2"]

    book = client.get(address, headers={"Accept": XLSX})
    assert book.headers["content-type"] == XLSX
    assert 'filename="weekly-list-harrow-2026-11-02.xlsx"' in book.headers["content-disposition"]
    sheets = openpyxl.load_workbook(io.BytesIO(book.content))
    cells = {str(cell.value) for sheet in sheets for line in sheet.iter_rows() for cell in line}
    assert {"A1", "A2"} <= cells

    page = client.get(address, headers={"Accept": "text/html,application/xhtml+xml,*/*;q=0.8"})
    assert page.headers["content-type"] == "text/html; charset=utf-8"
    policy = page.headers["content-security-policy"]
    assert "default-src 'none'" in policy
    assert "frame-ancestors 'none'" in policy
    assert "script-src" not in policy
    assert "unsafe" not in policy
    assert "A1" in page.text
    assert "<script" not in page.text


def test_a_format_that_is_none(client: httpx.Client) -> None:
    audited(client)
    address = f"{AUDITS}/latest/list"
    assert problem(client.get(address, params={"format": "pdf"})) == (406, "/problems/not-producible")
    assert problem(client.get(address, headers={"Accept": "image/png"})) == (406, "/problems/not-producible")
    assert client.get(f"{address}?format=json", headers={"Accept": "text/html"}).json()["depot"] == "harrow"


def test_a_list_is_sent_once(client: httpx.Client, world: World) -> None:
    audited(client)
    for name in ("json", "csv", "xlsx", "html"):
        address = f"{AUDITS}/latest/list?format={name}"
        tag = client.get(address).headers["etag"]
        assert client.get(address, headers={"If-None-Match": tag}).status_code == 304
    world.visit("A2")
    assert client.get(address, headers={"If-None-Match": tag}).status_code == 200


def test_findings_by_filter(client: httpx.Client) -> None:
    audited(client)

    def found(query: str) -> list[tuple[str, str]]:
        return [(one["section"], one["kind"]) for one in client.get(f"{FINDINGS}?{query}").json()["items"]]

    everything = [("A1", "found_outside"), ("A1", "outside"), ("A2", "not_shown")]
    assert sorted(found("")) == everything
    assert sorted(found("state=new")) == everything
    assert found("state=cleared") == []
    assert found("section=A2") == [("A2", "not_shown")]
    assert found("kind=found_outside&section=A1") == [("A1", "found_outside")]
    assert found("section=nowhere") == []
    assert client.get(f"{FINDINGS}?kind=anything").status_code == 422
    assert client.get(f"{FINDINGS}?sektion=A1").status_code == 422


def test_findings_page_in_the_order_of_their_making(client: httpx.Client) -> None:
    audited(client)
    found, address = [], f"{FINDINGS}?page_size=1"
    while address:
        page = client.get(address).json()
        found += [one["finding"] for one in page["items"]]
        address = page["next"]
    assert found == sorted(found)
    assert len(set(found)) == 3


RESPONSE = {
    "owner": "R. Ashdown",
    "action": None,
    "planned_on": "2026-11-20",
    "reported_at": "2026-11-02T08:30:00Z",
    "report_reference": "WSF-1",
    "reported_to": "control",
    "protection": "line blocked",
    "cause": None,
    "restored_by": None,
}


def test_an_answer_to_a_finding(client: httpx.Client, world: World) -> None:
    [finding] = client.get(f"{FINDINGS}?kind=found_outside").json()["items"]
    address = f"{FINDINGS}/{finding['finding']}"
    tag = client.get(address).headers["etag"]
    put = f"{address}/response"
    assert problem(client.put(put, json=RESPONSE)) == (428, "/problems/precondition-missing")
    assert problem(client.put(put, json=RESPONSE, headers={"If-Match": '"v9"'})) == (412, "/problems/stale")
    answered = client.put(put, json=RESPONSE, headers={"If-Match": tag})
    assert answered.status_code == 200
    said = answered.json()["response"]
    assert {name: said[name] for name in RESPONSE if name != "reported_at"} == {
        name: value for name, value in RESPONSE.items() if name != "reported_at"
    }
    assert (said["reported_at"], said["updated_by"]) == ("2026-11-02T08:30:00.000000Z", "R. Ashdown")
    assert client.put(put, json=RESPONSE, headers={"If-Match": tag}).status_code == 412
    # As it was read, so may it be sent back: what the server owns is ignored.
    tag = answered.headers["etag"]
    full = said | {"cause": "feed", "restored_by": "T. Marlow"}
    cleared = client.put(put, json=full, headers={"If-Match": tag})
    assert (cleared.json()["state"], cleared.json()["cleared_on"]) == ("cleared", "2026-11-02")
    assert client.get(address).json() == cleared.json()


def test_answers_that_cannot_be_taken(client: httpx.Client, world: World, subtests: pytest.Subtests) -> None:
    [finding] = client.get(f"{FINDINGS}?kind=found_outside").json()["items"]
    address = f"{FINDINGS}/{finding['finding']}"
    tag = client.get(address).headers["etag"]
    ahead = (world.clock.now + timedelta(hours=1)).isoformat()
    wrong: dict[str, Any] = {
        "/reported_at": RESPONSE | {"reported_at": ahead},
        "/planned_on": RESPONSE | {"planned_on": "soon"},
        "/owner": {name: value for name, value in RESPONSE.items() if name != "owner"},
        "/cause": RESPONSE | {"cause": 5},
        "/action": RESPONSE | {"action": "x" * 2001},
        "/causes": RESPONSE | {"causes": "a word misspelt"},
    }
    for pointer, body in wrong.items():
        with subtests.test(pointer=pointer):
            answer = client.put(f"{address}/response", json=body, headers={"If-Match": tag})
            assert answer.status_code == 422
            assert [error["pointer"] for error in answer.json()["errors"]] == [pointer]
    assert client.get(address).json() == finding
    nowhere = f"{FINDINGS}/0197c0de-0000-7000-8000-00000000ffff"
    assert client.get(nowhere).status_code == 404
    assert client.put(f"{nowhere}/response", json=RESPONSE, headers={"If-Match": tag}).status_code == 404


def test_scopes(api: Api, world: World, client: httpx.Client) -> None:
    audited(client)
    reader, field = api.client("read"), api.client("readings")
    assert problem(reader.post(AUDITS, json={}))[0] == 403
    assert problem(field.get(f"{AUDITS}/latest/list"))[0] == 403
    assert reader.get(f"{AUDITS}/latest/list").status_code == 200
