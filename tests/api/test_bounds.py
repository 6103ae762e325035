"""How much may be sent and asked for, and in what form: everything beyond gets a clear 4xx."""

from __future__ import annotations

import socket
from collections.abc import Iterator
from urllib.parse import urlsplit

import pytest

from service.api import bounds
from service.api.paging import Paging
from service.application import editions
from support.api import ACTOR, Api

pytestmark = pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)

BODY = b'{"depot": "harrow", "title": "t", "time_zone": "UTC", "audit_weekday": "monday", "audit_hour": 1}'
JSON = {"Content-Type": "application/json"}


def test_the_service_tells_its_bounds(api: Api) -> None:
    told = api.client("readings").get("/v1").json()
    assert told["service"] == "shuntbook"
    # The figures of the wire contract and of the design's bounds.
    assert {
        name: told[name] for name in ("batch_visits", "import_lines", "page_size", "remarks_characters")
    } == {
        "batch_visits": 500,
        "import_lines": 20_000,
        "page_size": 1000,
        "remarks_characters": 2000,
    }
    assert (told["body_bytes"], told["clock_skew_s"], told["clock_offset_caution_s"]) == (2**21, 300, 120)
    assert "competent, licensed person" in told["caution"]


def test_every_quantity_is_told_with_its_units(api: Api) -> None:
    items = {item["quantity"]: item for item in api.client("read").get("/v1/quantities").json()["items"]}
    assert items["drop_shunt"]["unit"] == "Ohm"
    assert {"unit": "mOhm", "factor": "0.001"} in items["drop_shunt"]["units"]
    assert items["residual_voltage"]["needs_shunt"]
    assert items["length"]["from_register"]


def test_every_task_is_told_with_the_editions_that_name_it(api: Api) -> None:
    client = api.client("readings")
    assert client.get("/v1/tasks").json() == {"items": [], "next": None}
    with api.service.unit_of_work(ACTOR) as tx:
        loaded = set(editions.load_bundled(tx))
    items = client.get("/v1/tasks").json()["items"]
    names = [item["task"] for item in items]
    assert names == sorted(set(names))
    assert "shunt_test" in names
    told = {(one["book"], one["edition"]) for item in items for one in item["editions"]}
    assert told
    assert told <= loaded


def test_a_body_at_the_bound_is_read_and_one_byte_more_is_not(api: Api) -> None:
    client = api.client("admin")
    padded = BODY.ljust(bounds.BODY_BYTES)
    assert client.post("/v1/depots", content=padded, headers=JSON).status_code == 201
    answer = client.post("/v1/depots", content=padded + b" ", headers=JSON)
    assert (answer.status_code, answer.json()["type"]) == (413, "/problems/too-large")


def test_a_body_without_a_length_is_bounded_too(api: Api) -> None:
    def chunks() -> Iterator[bytes]:
        for _ in range(bounds.BODY_BYTES // 2**16 + 1):
            yield b" " * 2**16

    answer = api.client("admin").post("/v1/depots", content=chunks(), headers=JSON)
    assert answer.status_code == 413


def test_a_length_that_is_a_lie_does_no_harm(api: Api) -> None:
    """A client that announces a terabyte and sends nothing is answered when it gives up, and nobody waits."""
    client = api.client("admin", "read")
    where = urlsplit(api.base_url)
    with socket.create_connection((where.hostname or "", where.port or 0), timeout=10) as raw:
        key = client.headers["authorization"]
        head = f"POST /v1/depots HTTP/1.1\r\nHost: x\r\nAuthorization: {key}\r\n"
        raw.sendall(
            f"{head}Content-Type: application/json\r\nContent-Length: 1099511627776\r\n\r\n{{".encode()
        )
        assert client.get("/v1/depots").status_code == 200
    assert client.get("/v1/depots").json()["items"] == []


def test_kinds_of_content(api: Api) -> None:
    client = api.client("admin")
    for sent in ("text/plain", "application/x-www-form-urlencoded", "application/jsonx", ""):
        answer = client.post("/v1/depots", content=BODY, headers={"Content-Type": sent})
        assert (answer.status_code, answer.json()["type"]) == (415, "/problems/unsupported-media-type"), sent
    parameter = {"Content-Type": "Application/JSON; charset=utf-8"}
    assert client.post("/v1/depots", content=BODY, headers=parameter).status_code == 201


def test_bodies_that_cannot_be_read(api: Api, subtests: pytest.Subtests) -> None:
    client = api.client("admin", "read")
    for sent in (b"", b"{", b"\xff", b"[" * 100_000, BODY.replace(b"harrow", b"\xff"), b'"\\ud800"'):
        with subtests.test(sent=repr(sent[:20])):
            answer = client.post("/v1/depots", content=sent, headers=JSON)
            assert (answer.status_code, answer.json()["type"]) == (400, "/problems/unparsable")
    assert client.get("/v1/depots").json()["items"] == []


@pytest.mark.parametrize("query", ["pagesize=5", "PAGE_SIZE=5", "cursor%20=x", "=", "a=1&b=2"])
def test_a_misspelt_parameter_is_refused(api: Api, query: str) -> None:
    answer = api.client("read").get(f"/v1/depots?{query}")
    assert (answer.status_code, answer.json()["type"]) == (422, "/problems/unknown-parameter")
    assert {error["code"] for error in answer.json()["errors"]} == {"unknown_parameter"}


def test_a_parameter_given_twice_is_refused(api: Api) -> None:
    answer = api.client("read").get("/v1/depots?page_size=5&page_size=6")
    assert answer.status_code == 422
    assert [error["parameter"] for error in answer.json()["errors"]] == ["page_size"]


def test_cursors_are_good_for_their_own_list_only(api: Api, subtests: pytest.Subtests) -> None:
    for name in ("ash", "birch", "cedar"):
        api.depot(name)
    client = api.client("read")
    following = client.get("/v1/depots?page_size=1").json()["next"]
    cursor = following.rpartition("cursor=")[2]
    assert client.get(following).json()["items"][0]["depot"] == "birch"
    assert client.get(f"/v1/depots?page_size=2&cursor={cursor}").status_code == 200
    changed = [
        cursor[:n] + ("A" if cursor[n] != "A" else "B") + cursor[n + 1 :] for n in range(len(cursor) - 1)
    ]
    for wrong in ["", "x", "%00", cursor[:-3], cursor + "AAAA", cursor * 50, *changed]:
        with subtests.test(cursor=wrong[:40]):
            answer = client.get(f"/v1/depots?cursor={wrong}")
            assert answer.status_code == 422
            assert [error["parameter"] for error in answer.json()["errors"]] == ["cursor"]
    visits = client.get(f"/v1/depots/ash/visits?cursor={cursor}")
    assert (visits.status_code, visits.json()["errors"][0]["parameter"]) == (422, "cursor")


def test_a_cursor_is_bound_to_its_filters(api: Api) -> None:
    api.depot("ash")
    client = api.client("read")
    made = Paging(1, None, "/v1/depots/ash/findings", (("state", "open"),))
    _, following = made.cut(["a", "b"], lambda row: (row,))
    assert following is not None
    assert client.get(following).status_code == 200
    other = client.get(following.replace("state=open", "state=cleared"))
    assert (other.status_code, other.json()["errors"][0]["parameter"]) == (422, "cursor")


def test_what_is_answered_is_kept_by_nobody_else(api: Api) -> None:
    """RFC 9111: private and no-cache, varying by who asks and for what format."""
    for answer in (api.client("read").get("/v1/depots"), api.client().get("/v1/depots")):
        assert answer.headers["cache-control"] == "private, no-cache"
        assert answer.headers["vary"] == "Authorization, Accept"
        assert "server" not in answer.headers or answer.headers["server"] == "uvicorn"
