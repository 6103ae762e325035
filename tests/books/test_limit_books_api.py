"""Limit books, section limits and checks over HTTP: who may, what is answered, what is refused."""

from __future__ import annotations

from datetime import date
from typing import Any

import pytest

from support.limit_books import SOURCE, Api, edition, limit, task

BOOKS = "/v1/limit-books"
ONE = f"{BOOKS}/house/1"
CHECK: dict[str, Any] = {
    "book": "house",
    "edition": "1",
    "visited_on": "2026-04-01",
    "section": {
        "section": "X1",
        "state": "in_use",
        "circuit_kind": "dc",
        "traction": "none",
        "required_test_points": ["relay_end"],
    },
    "readings": [
        {
            "quantity": "drop_shunt",
            "test_point": "relay_end",
            "stage": "as_left",
            "value": 0.7,
            "unit": "Ohm",
            "instrument": "SB-1",
        }
    ],
    "instruments": [
        {
            "instrument": "SB-1",
            "calibrations": [{"calibrated_on": "2026-01-05", "due_on": "2027-01-04", "result": "pass"}],
        }
    ],
}


def drafted(api: Api, **changes: Any) -> str:
    """The ETag of a new draft."""
    answered = api.post(BOOKS, edition(**changes))
    assert answered.status_code == 201, answered.text
    return answered.headers["ETag"]


def issue(api: Api, tag: str, day: str = "2026-04-01", key: str = "issuer") -> Any:
    return api.post(f"{ONE}/issue", {"effective_on": day}, key, headers={"If-Match": tag})


def test_from_draft_to_withdrawal(api: Api) -> None:
    answered = api.post(BOOKS, edition(tasks=[task()]))
    assert answered.headers["Location"] == ONE
    read = api.get(ONE)
    assert read.json() == answered.json()
    assert read.json()["limits"][0]["applies"] is None
    edited = api.put(ONE, read.json() | {"title": "Changed"}, read.headers["ETag"])
    assert (edited.status_code, edited.json()["title"], edited.json()["version"]) == (200, "Changed", 2)
    issued = issue(api, edited.headers["ETag"])
    assert issued.json()["state"] == "issued"
    assert issued.json()["issued_by"] == "J. Abara"
    headers = {"If-Match": issued.headers["ETag"]}
    withdrawn = api.post(f"{ONE}/withdraw", {"withdrawn_on": "2026-06-01"}, headers=headers)
    assert withdrawn.json()["state"] == "withdrawn"
    [book] = api.get(BOOKS).json()["items"]
    assert (book["book"], [one["state"] for one in book["editions"]]) == ("house", ["withdrawn"])
    assert "limits" not in book["editions"][0]


def test_pages_of_books(api: Api) -> None:
    for book in ("c", "a", "b"):
        drafted(api, book=book)
    first = api.get(f"{BOOKS}?page_size=2")
    assert [book["book"] for book in first.json()["items"]] == ["a", "b"]
    assert first.links["next"]["url"] == first.json()["next"]
    rest = api.get(first.json()["next"]).json()
    assert ([book["book"] for book in rest["items"]], rest["next"]) == (["c"], None)


@pytest.mark.parametrize(("key", "status"), [("reader", 403), ("bound", 403), ("drafter", 201)])
def test_only_a_key_with_the_scope_for_every_depot_drafts(api: Api, key: str, status: int) -> None:
    assert api.post(BOOKS, edition(), key).status_code == status


@pytest.mark.parametrize("key", ["reader", "bound"])
def test_any_reader_reads_but_does_not_edit_issue_or_withdraw(api: Api, key: str) -> None:
    tag = drafted(api)
    read = api.get(ONE, key)
    assert read.status_code == 200
    assert api.put(ONE, read.json(), tag, key).status_code == 403
    assert issue(api, tag, key=key).status_code == 403
    withdrawal = {"withdrawn_on": "2026-06-01"}
    assert api.post(f"{ONE}/withdraw", withdrawal, key, headers={"If-Match": tag}).status_code == 403


def test_whoever_drafted_cannot_issue(api: Api) -> None:
    refused = issue(api, drafted(api), key="drafter")
    assert (refused.status_code, refused.json()["type"]) == (409, "/problems/second-holder")


def test_an_edit_names_its_version_and_every_member(api: Api) -> None:
    tag = drafted(api)
    whole = api.get(ONE).json()
    assert api.put(ONE, whole, None).status_code == 428
    assert api.put(ONE, whole, '"v9"').status_code == 412
    part = {name: value for name, value in whole.items() if name != "tasks"}
    refused = api.put(ONE, part, tag)
    assert refused.status_code == 422
    assert [error["pointer"] for error in refused.json()["errors"]] == ["/tasks"]
    shortened = whole | {"limits": [{k: v for k, v in whole["limits"][0].items() if k != "ballast"}]}
    refused = api.put(ONE, shortened, tag)
    assert [error["pointer"] for error in refused.json()["errors"]] == ["/limits/0/ballast"]


def test_an_issued_edition_is_not_edited(api: Api) -> None:
    issued = issue(api, drafted(api))
    refused = api.put(ONE, issued.json() | {"title": "Changed"}, issued.headers["ETag"])
    assert refused.status_code == 409
    assert api.get(ONE).json() == issued.json()


def test_a_bad_book_is_refused_with_the_place_and_nothing_is_kept(api: Api) -> None:
    contradictory = limit(maximum={"value": 0.1, "hazard": "wrong_side"})
    refused = api.post(BOOKS, edition(limits=[contradictory, contradictory]))
    assert refused.status_code == 422
    found = {(error["code"], error["pointer"]) for error in refused.json()["errors"]}
    assert {("contradictory", "/limits/0/minimum"), ("duplicate", "/limits/1/limit")} <= found
    assert api.get(BOOKS).json()["items"] == []
    unitless = {name: value for name, value in limit().items() if name != "unit"}
    refused = api.post(BOOKS, edition(limits=[unitless]))
    assert [error["pointer"] for error in refused.json()["errors"]] == ["/limits/0/unit"]


@pytest.mark.parametrize("day", ["2026-03-02", "2025-01-01"])
def test_an_edition_takes_effect_on_a_later_day(api: Api, day: str) -> None:
    refused = issue(api, drafted(api), day)
    assert (refused.status_code, refused.json()["errors"][0]["pointer"]) == (422, "/effective_on")


def test_an_edition_is_drafted_once_and_an_unknown_one_not_found(api: Api) -> None:
    drafted(api)
    assert api.post(BOOKS, edition()).status_code == 409
    assert api.get(f"{BOOKS}/house/2").status_code == 404
    assert api.get(f"{BOOKS}/other/1").status_code == 404


def test_a_misspelt_filter_is_refused(api: Api) -> None:
    assert api.get(f"{BOOKS}?bok=house").status_code == 422


def test_limits_of_a_section(api: Api) -> None:
    yearly = task(task="dry_round", interval=None, window={"first": "06-01", "last": "09-30"})
    short = {"quantity": "drop_shunt", "unit": "mOhm", "under": 700, "interval": "P1M"}
    permitted = {"circuit_kind": "dc", "traction": "none", "return_rails": [0]} | SOURCE
    tag = drafted(
        api,
        limits=[limit(applies={"circuit_kinds": ["dc"]})],
        tasks=[task(shortened=short), yearly],
        combinations=[permitted],
    )
    api.shelf.section("AS1")
    issue(api, tag)
    address = "/v1/depots/ashby/sections/AS1/limits"
    assert api.get(address).json()["limits"] == []
    ahead = api.get(f"{address}?as_of=2026-04-01")
    [shown] = ahead.json()["limits"]
    assert shown["because"] == [{"attribute": "circuit_kind", "value": "dc"}]
    assert [(one["test_point"], one["min"], one["near_min"]) for one in shown["test_points"]] == [
        ("feed_end", 0.5, 0.6),
        ("relay_end", 0.5, 0.6),
    ]
    assert (shown["clause"], shown["unit"], shown["missing"]) == ("1.1", "Ohm", None)
    shunt_test, dry_round = ahead.json()["tasks"]
    assert (shunt_test["interval"], shunt_test["shortened"]["under"]) == ("P3M", 0.7)
    assert dry_round["window"] == {"first": "06-01", "last": "09-30"}
    assert ahead.json()["combinations"] == [permitted]
    again = api.get(f"{address}?as_of=2026-04-01", headers={"If-None-Match": ahead.headers["ETag"]})
    assert again.status_code == 304
    assert api.get("/v1/depots/birchfield/sections/AS1/limits", "bound").status_code == 404
    assert api.get("/v1/depots/ashby/sections/AS2/limits").status_code == 404


def test_a_check_answers_verdicts(api: Api) -> None:
    drafted(api)
    answered = api.post("/v1/checks", CHECK, "reader")
    assert answered.status_code == 200, answered.text
    [verdict] = answered.json()["verdicts"]
    assert (verdict["verdict"], verdict["margin"], verdict["visit"]) == ("within", 0.2, None)
    assert answered.json()["compliance"] == "yes"
    assert answered.json()["doubtful"] == []


def test_a_check_points_at_what_is_wrong_or_doubtful(api: Api) -> None:
    drafted(api)
    refused = api.post("/v1/checks", CHECK | {"book": "nothing", "edition": None})
    assert (refused.status_code, refused.json()["type"]) == (422, "/problems/unknown-book")
    volts = [
        {
            "quantity": "relay_voltage",
            "test_point": "relay_end",
            "stage": "as_left",
            "value": 3.1,
            "unit": "V",
        },
        {
            "quantity": "supply_voltage",
            "test_point": "feed_end",
            "stage": "as_left",
            "value": 2900,
            "unit": "mV",
        },
    ]
    doubtful = api.post("/v1/checks", CHECK | {"readings": volts}).json()["doubtful"]
    assert [(one["code"], one["pointer"]) for one in doubtful] == [
        ("relay_above_supply", "/readings/0"),
        ("relay_above_supply", "/readings/1"),
    ]
    assert all(one["reason"] for one in doubtful)


def test_the_bundled_books_pass_through_the_api_unchanged(api: Api) -> None:
    from service.application import editions

    for new in editions.bundled():
        body = new.model_dump(mode="json")
        answered = api.post(BOOKS, body)
        assert answered.status_code == 201, answered.text
        assert {name: answered.json()[name] for name in body} == body


def test_the_day_of_issue_is_judged_by_the_clock_of_the_service(api: Api) -> None:
    tag = drafted(api)
    api.shelf.at(date(2026, 4, 1))
    assert issue(api, tag).status_code == 422
    assert issue(api, tag, "2026-04-03").status_code == 200
