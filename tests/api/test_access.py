"""Keys: who gets in, to what, and what is said to those who do not."""

from __future__ import annotations

import base64
import time
from datetime import timedelta
from typing import Any

import pytest
import sqlalchemy as sa

from service.application import access
from service.errors import ConflictError, NotAcceptableError, NotFoundError
from service.records import journal
from service.records.tables import AccessKey
from support.api import ACTOR, Api


def refused(answer: Any, status: int, kind: str) -> dict[str, Any]:
    assert answer.status_code == status
    assert answer.headers["content-type"] == "application/problem+json"
    problem: dict[str, Any] = answer.json()
    assert problem["type"] == f"/problems/{kind}"
    assert problem["instance"] == answer.headers["x-request-id"]
    return problem


def test_without_a_key_nobody_gets_in(api: Api) -> None:
    answer = api.client().get("/v1/depots")
    assert "Send an access key" in refused(answer, 401, "unknown-key")["detail"]
    assert answer.headers["www-authenticate"].startswith("Bearer ")


def test_a_key_is_shown_what_it_is_good_for(api: Api) -> None:
    api.depot("harrow")
    text = api.key("read", "readings", depot="harrow", device="HH-07", holder="T. Marlow", label="handheld")
    client = api.client()
    for scheme in ("Bearer", "bearer"):  # RFC 9110, 11.1: without regard to case
        answer = client.get("/v1/key", headers={"Authorization": f"{scheme} {text}"})
        assert answer.json() == {
            "label": "handheld",
            "holder": "T. Marlow",
            "scopes": ["read", "readings"],
            "depot": "harrow",
            "device": "HH-07",
            "created_at": "2026-11-30T09:00:00.000000Z",
            "expires_at": None,
        }
        assert text not in answer.text


def basic(password: str, user: str = "anyone") -> dict[str, str]:
    return {"Authorization": "Basic " + base64.b64encode(f"{user}:{password}".encode()).decode()}


def test_basic_reads_but_does_not_write(api: Api) -> None:
    text = api.key("read", "admin")
    client = api.client()
    assert client.get("/v1/depots", headers=basic(text)).status_code == 200
    answer = client.post("/v1/depots", headers=basic(text), json={})
    refused(answer, 401, "unknown-key")
    assert "Basic" not in answer.headers["www-authenticate"]


def test_a_browser_is_asked_for_a_password(api: Api) -> None:
    answer = api.client().get("/v1/key")
    assert 'Basic realm="shuntbook"' in answer.headers["www-authenticate"]


def test_credentials_that_are_none_are_refused(api: Api, subtests: pytest.Subtests) -> None:
    client = api.client()
    for sent in ("Basic", "Basic !", "Basic /w==", "Digest x", "Bearer", "x"):
        with subtests.test(sent=sent):
            refused(client.get("/v1/key", headers={"Authorization": sent}), 401, "unknown-key")


def test_why_a_key_does_not_work_is_said(api: Api) -> None:
    client = api.client("read", label="old", expires_at=api.clock.now + timedelta(days=1))
    assert client.get("/v1/key").status_code == 200
    api.clock.move(days=1)
    assert "expired" in refused(client.get("/v1/key"), 401, "unknown-key")["detail"]
    with api.service.unit_of_work(ACTOR) as tx:
        access.revoke(tx, "old")
    assert "revoked" in refused(client.get("/v1/key"), 401, "unknown-key")["detail"]
    unknown = api.client().get("/v1/key", headers={"Authorization": "Bearer sbk_nobody"})
    assert "not known" in refused(unknown, 401, "unknown-key")["detail"]


ASKED = {
    "read": ("GET", "/v1/depots/harrow"),
    "readings": ("POST", "/v1/depots/harrow/visits"),
    "register": ("POST", "/v1/depots/harrow/sections"),
    "limits": ("POST", "/v1/limit-books"),
    "audit": ("POST", "/v1/depots/harrow/audits"),
    "admin": ("PUT", "/v1/depots/harrow"),
}


def test_scopes_do_not_include_each_other(api: Api, subtests: pytest.Subtests) -> None:
    """A key of every other scope does not do what needs this one."""
    api.depot("harrow")
    for scope, asked in ASKED.items():
        with subtests.test(scope=scope):
            others = [other for other in access.SCOPES if other != scope]
            problem = refused(api.client(*others).request(*asked, json={}), 403, "forbidden")
            assert f"'{scope}'" in problem["detail"]
            assert api.client(scope).request(*asked, json={}).status_code not in (401, 403)


def test_another_depot_is_not_found_whatever_the_scope(api: Api) -> None:
    api.depot("harrow")
    api.depot("marsh")
    for scopes in (("read",), ("readings",), access.SCOPES):
        client = api.client(*scopes, depot="marsh")
        problem = refused(client.get("/v1/depots/harrow"), 404, "not-found")
        missing = refused(client.get("/v1/depots/nowhere"), 404, "not-found")
        assert problem["detail"] == missing["detail"]


def test_what_belongs_to_no_depot_needs_a_key_for_all(api: Api) -> None:
    api.depot("harrow")
    refused(api.client("admin", depot="harrow").post("/v1/depots", json={}), 403, "forbidden")


def test_two_keys_of_one_holder_overlap(api: Api) -> None:
    first = api.client("read", label="handheld-1", device="HH-07")
    second = api.client("read", label="handheld-2", device="HH-07")
    assert [c.get("/v1/key").status_code for c in (first, second)] == [200, 200]
    with api.service.unit_of_work(ACTOR) as tx:
        access.revoke(tx, "handheld-1")
    assert [c.get("/v1/key").status_code for c in (first, second)] == [401, 200]


def last_used(api: Api, label: str) -> Any:
    with api.service.read() as connection:
        return next(key for key in access.listed(connection) if key.label == label).last_used_at


def noted(api: Api, label: str) -> Any:
    """When the use was noted; it is noted after the answer."""
    deadline = time.monotonic() + 5
    while (found := last_used(api, label)) is None and time.monotonic() < deadline:
        time.sleep(0.01)
    return found


def test_use_is_noted_at_most_every_five_minutes(api: Api) -> None:
    client = api.client("read", label="handheld")
    began = api.clock.now
    client.get("/v1/key")
    assert noted(api, "handheld") == began
    api.clock.move(minutes=4)
    client.get("/v1/key")
    client.get("/v1/key")
    assert last_used(api, "handheld") == began
    api.clock.move(minutes=1)
    access.note_use(api.service, "handheld")
    assert last_used(api, "handheld") == began + timedelta(minutes=5)


def test_only_a_digest_is_kept(api: Api) -> None:
    text = api.key("read", label="handheld")
    assert text.startswith(access.PREFIX)
    assert len(base64.urlsafe_b64decode(text.removeprefix(access.PREFIX) + "=")) == 32
    with api.service.read(snapshot=True) as connection:
        rows = connection.execute(sa.select(AccessKey.__table__)).mappings().all()
        lines = list(journal.lines(connection, journal.SERVICE))
    assert text not in str(rows)
    assert text not in str(lines)
    assert rows[0]["digest"] not in str(lines)


def test_issuing_and_revoking_are_journalled(api: Api) -> None:
    api.key("read", label="handheld")
    with api.service.unit_of_work(ACTOR) as tx:
        access.revoke(tx, "handheld")
        access.revoke(tx, "handheld")
    with api.service.read(snapshot=True) as connection:
        lines = list(journal.lines(connection, journal.SERVICE))
        assert [line["action"] for line in lines] == ["key_created", "key_revoked"]
        assert {line["subject_name"] for line in lines} == {"handheld"}
        assert journal.verify(connection, journal.SERVICE) is None


REFUSED: list[tuple[access.Wanted, type[Exception]]] = [
    (access.Wanted("k", "h", ()), NotAcceptableError),
    (access.Wanted("k", "h", ("read", "everything")), NotAcceptableError),
    (access.Wanted("k", " ", ("read",)), NotAcceptableError),
    (access.Wanted("k", "h", ("read",), "nowhere"), NotFoundError),
    (access.Wanted("taken", "h", ("read",)), ConflictError),
]


def test_keys_that_cannot_be_issued(api: Api, subtests: pytest.Subtests) -> None:
    api.key("read", label="taken")
    for wanted, error in REFUSED:
        with subtests.test(wanted=wanted), pytest.raises(error), api.service.unit_of_work(ACTOR) as tx:
            access.create(tx, wanted, bytes(32))
    with api.service.read() as connection:
        assert [key.label for key in access.listed(connection)] == ["taken"]


def test_a_key_that_would_be_expired_is_not_issued(api: Api) -> None:
    wanted = access.Wanted("k", "h", ("read",), expires_at=api.clock.now)
    with pytest.raises(NotAcceptableError), api.service.unit_of_work(ACTOR) as tx:
        access.create(tx, wanted, bytes(32))


def test_revoking_an_unknown_key_says_so(api: Api) -> None:
    with pytest.raises(NotFoundError), api.service.unit_of_work(ACTOR) as tx:
        access.revoke(tx, "nobody")
