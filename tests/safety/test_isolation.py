"""A key of one depot finds nothing of another: at no address, by no method, and it changes nothing."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import httpx
import pytest
import sqlalchemy as sa
from fastapi.routing import APIRoute

from service.application import access, findings, visit_records
from service.records.tables import metadata
from support.api import Api, served
from support.world import World, furnished

ADDRESSES = {
    "depot": "harrow",
    "section": "A1",
    "instrument": "SB",
    "concession": "0197c0de-0000-7000-8000-00000000c001",
    "audit": "latest",
    "book": "house",
    "edition": "1",
}


@pytest.fixture
def api(database_url: str) -> Iterator[Api]:
    with served(database_url) as found:
        yield found


@pytest.fixture
def world(api: Api) -> World:
    made = furnished(api.service, api.clock, others=("marsh",))
    made.section("A1")
    made.visit("A1", 0.3, "as_found")
    made.audit()
    return made


def everything(api: Api) -> dict[str, list[Any]]:
    """Every row of every table, but for when keys were used."""
    with api.service.read(snapshot=True) as connection:
        return {
            table.name: sorted(map(repr, connection.execute(sa.select(table))))
            for table in metadata.tables.values()
            if table.name != "access_key"
        }


def routes(api: Api) -> list[tuple[str, str]]:
    return [
        (method, route.path)
        for route in api.app.routes
        if isinstance(route, APIRoute)
        for method in sorted(route.methods)
    ]


def sent(client: httpx.Client, method: str, address: str) -> httpx.Response:
    headers = {"If-Match": '"v1"'} if method == "PUT" else {}
    if method in ("GET", "HEAD"):
        return client.request(method, address)
    return client.request(method, address, json={}, headers=headers)


def test_no_route_of_a_depot_answers_anothers_key(api: Api, world: World, subtests: pytest.Subtests) -> None:
    visit = world.read(visit_records.page, section=None, received_after=None, after=None, most=1)[0]["visit"]
    finding = world.read(findings.page, state=None, section=None, kind=None, after=None, most=1)[0].finding
    names = ADDRESSES | {"visit": visit, "finding": finding}
    marsh, harrow = (api.client(*sorted(access.SCOPES), depot=depot) for depot in ("marsh", "harrow"))
    before = everything(api)
    looked = 0
    for method, path in routes(api):
        if "{depot}" not in path:
            continue
        address = path.format(**names)
        with subtests.test(method=method, path=path):
            answer = sent(marsh, method, address)
            assert (answer.status_code, answer.json()["type"]) == (404, "/problems/not-found")
            assert "harrow" not in answer.text
            looked += 1
            if method == "GET" and "concession}" not in path:  # the address is one that its own depot has
                assert harrow.get(address).status_code == 200
    assert looked > 25
    assert everything(api) == before


def test_lists_without_a_depot_show_only_the_keys_own(api: Api, world: World) -> None:
    client = api.client(*sorted(access.SCOPES), depot="marsh")
    assert [one["depot"] for one in client.get("/v1/depots").json()["items"]] == ["marsh"]
    assert client.get("/v1/key").json()["depot"] == "marsh"
