"""The journal as others follow it: gapless, checkable line by line, refused once it has diverged."""

from __future__ import annotations

import hashlib
import json
from typing import Any

import pytest
import rfc8785

from service.application import depots
from service.records.journal import Entry
from support.api import ACTOR, Api

FEED = "/v1/depots/harrow/journal"


def write(api: Api, count: int, **more: Any) -> None:
    """Lines as any noun would append them."""
    sections = more.get("sections", ())
    with api.service.unit_of_work(ACTOR) as tx:
        tx.lock_depot("harrow")
        entries = [
            Entry("tested", more.get("kind", "test"), f"n{n}", sections, {"n": n}) for n in range(count)
        ]
        tx.append("harrow", entries)


@pytest.fixture
def feed(api: Api) -> Api:
    api.depot("harrow")
    return api


def test_every_line_can_be_checked_by_whoever_follows(feed: Api) -> None:
    """The digest by the wire's own words: SHA-256 of the RFC 8785 form without `digest`."""
    write(feed, 5)
    previous = "0" * 64
    for number, line in enumerate(feed.client("read").get(FEED).json()["items"], start=1):
        digest = line.pop("digest")
        assert hashlib.sha256(rfc8785.dumps(line)).hexdigest() == digest
        assert (line["sequence"], line["previous_digest"]) == (number, previous)
        previous = digest
    assert number == 6


def test_pages_follow_each_other_without_gap(feed: Api) -> None:
    write(feed, 6)
    client = feed.client("read")
    found, address = [], f"{FEED}?page_size=3"
    while address:
        page = client.get(address).json()
        found += [line["sequence"] for line in page["items"]]
        address = page["next"]
    assert found == [1, 2, 3, 4, 5, 6, 7]


def test_lines_come_as_ndjson_too(feed: Api) -> None:
    write(feed, 2)
    client = feed.client("read")
    lines = client.get(FEED).json()["items"]
    named = client.get(FEED, params={"format": "ndjson"})
    accepted = client.get(FEED, headers={"Accept": "application/x-ndjson"})
    for answer in (named, accepted):
        assert answer.headers["content-type"] == "application/x-ndjson"
        assert answer.text.endswith("\n")
        assert [json.loads(line) for line in answer.text.splitlines()] == lines


def test_the_parameter_wins_over_the_header(feed: Api) -> None:
    client = feed.client("read")
    answer = client.get(f"{FEED}?format=json", headers={"Accept": "application/x-ndjson"})
    assert answer.headers["content-type"] == "application/json"


# RFC 9110, 12.5.1: quality values rank media ranges; q=0 is "not acceptable".
ACCEPT = [
    ("*/*", "application/json"),
    ("application/*", "application/json"),
    ("text/html, */*;q=0.1", "application/json"),
    ("application/json;q=0.5, application/x-ndjson", "application/x-ndjson"),
    ("application/json;q=0, application/x-ndjson;q=0.1", "application/x-ndjson"),
    ("text/html", None),
    ("application/json;q=0", None),
    ("application/json;q=x", None),
]


def test_formats_by_accept(feed: Api, subtests: pytest.Subtests) -> None:
    client = feed.client("read")
    for accept, expected in ACCEPT:
        with subtests.test(accept=accept):
            answer = client.get(FEED, headers={"Accept": accept})
            if expected is None:
                assert (answer.status_code, answer.json()["type"]) == (406, "/problems/not-producible")
            else:
                assert answer.headers["content-type"] == expected


def test_an_unknown_format_is_refused(feed: Api) -> None:
    assert feed.client("read").get(f"{FEED}?format=xml").status_code == 406


def test_lines_by_subject_and_by_section(feed: Api) -> None:
    write(feed, 1, kind="visit", sections=("TV1",))
    write(feed, 1, kind="visit", sections=("TV2",))
    write(feed, 1, kind="import", sections=("TV1", "TV2"))
    write(feed, 1, kind="book", sections=None)
    write(feed, 1, kind="visit", sections=("TV11",))
    client = feed.client("read")

    def sequences(query: str) -> list[int]:
        return [line["sequence"] for line in client.get(f"{FEED}?{query}").json()["items"]]

    assert sequences("subject_kind=visit") == [2, 3, 6]
    assert sequences("section=TV1") == [2, 4, 5]
    assert sequences("section=TV2&subject_kind=visit") == [3]
    assert sequences("section=TV2&after=3") == [4, 5]
    assert sequences("section=nowhere&subject_kind=visit") == []


def test_a_feed_that_diverged_is_refused(feed: Api) -> None:
    write(feed, 2)
    client = feed.client("read")
    last = client.get(FEED).json()["items"][-1]
    same = client.get(FEED, params={"after": 3, "after_digest": last["digest"]})
    assert (same.status_code, same.json()) == (200, {"items": [], "next": None})
    for after, digest in ((4, None), (2, last["digest"]), (3, "0" * 64), (0, last["digest"])):
        params = {"after": after} | ({"after_digest": digest} if digest else {})
        answer = client.get(FEED, params=params)
        assert (answer.status_code, answer.json()["type"]) == (409, "/problems/feed-diverged")
    assert client.get(FEED, params={"after": 0, "after_digest": "0" * 64}).status_code == 200


IMPOSSIBLE = (
    "after=-1", "after=x", "after=99999999999", "after_digest=xyz", "page_size=0", "page_size=1001",
    "section=a/b", "section=%00", "subject_kind=%00", "subject_kind=",
)  # fmt: skip


def test_parameters_that_cannot_be(feed: Api, subtests: pytest.Subtests) -> None:
    client = feed.client("read")
    for query in IMPOSSIBLE:
        with subtests.test(query=query):
            answer = client.get(f"{FEED}?{query}")
            assert answer.status_code == 422
            assert [error["parameter"] for error in answer.json()["errors"]] == [query.partition("=")[0]]


def test_depots_have_journals_of_their_own(feed: Api) -> None:
    feed.depot("marsh", depots.Terms("Marsh", "UTC", "monday", 1))
    client = feed.client("read", depot="marsh")
    lines = client.get("/v1/depots/marsh/journal").json()["items"]
    assert [(line["depot"], line["sequence"]) for line in lines] == [("marsh", 1)]
    for other in ("harrow", "_service", "nowhere"):
        assert client.get(f"/v1/depots/{other}/journal").status_code == 404
    assert feed.client("read").get("/v1/depots/_service/journal").status_code == 404
