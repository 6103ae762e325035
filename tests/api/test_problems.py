"""Problems as RFC 9457 has them: every type a page, every pointer right, nothing that was sent repeated."""

from __future__ import annotations

import ast
import json
import re
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pytest
from pydantic import Field

from service import errors
from service.api import bodies, problems
from service.api.problem_kinds import KINDS
from service.api.schemas.base import Request
from service.errors import Fault
from support import house
from support.api import Api

NOW = datetime(2026, 11, 30, 9, 0, tzinfo=UTC)


def all_errors() -> Iterator[errors.ShuntbookError]:
    for found in vars(errors).values():
        if isinstance(found, type) and issubclass(found, errors.ShuntbookError):
            if found is errors.NonPhysicalError:
                yield found(("line", "length_m"), "must be more than nothing")
            elif found is errors.NoAnswerError:
                yield found("ill_conditioned", "these figures do not tell the two apart")
            elif found is not errors.ShuntbookError:
                yield found("Something is wrong.")


def test_every_error_has_a_type() -> None:
    for error in all_errors():
        problem = problems.problem_of(error, "an-id", NOW)
        assert problem["status"] == KINDS[problem["type"].removeprefix("/problems/")].status
        assert problem["instance"] == "an-id"
        assert problem["detail"] == error.detail


def conflict_kinds(path: Path) -> set[str]:
    """Kinds that a module gives to conflicts."""
    return {
        word.value.value
        for node in ast.walk(ast.parse(path.read_text()))
        if isinstance(node, ast.Call) and getattr(node.func, "id", "") == "ConflictError"
        for word in node.keywords
        if word.arg == "kind" and isinstance(word.value, ast.Constant)
    }


def test_every_kind_of_conflict_is_a_type() -> None:
    used = set().union(*(conflict_kinds(path) for path in house.modules(house.SERVICE)))
    assert "feed-diverged" in used
    assert {kind for kind in used if kind not in KINDS or KINDS[kind].status != 409} == set()


def test_titles_and_types_are_each_used_once() -> None:
    assert len({kind.title for kind in KINDS.values()}) == len(KINDS)
    assert all(re.fullmatch("[a-z-]{1,40}", name) for name in KINDS)


def test_a_problem_of_one_kind_of_fault_says_which() -> None:
    unit = Fault("unknown_unit", "no such unit", pointer="/readings/0/unit")
    other = Fault("absurd_value", "cannot be", pointer="/readings/0/value")
    error = errors.NotAcceptableError
    assert problems.kind_of(error("No.", (unit, unit))).type == "unknown-unit"
    assert problems.kind_of(error("No.", (unit, other))).type == "not-acceptable"
    assert problems.kind_of(error("No.", (other,))).type == "not-acceptable"
    assert problems.kind_of(error("No.")).type == "not-acceptable"


def test_members_that_some_problems_add() -> None:
    taken = errors.ConflictError("Taken.", kind="id-reused", stored_digest="ab" * 32)
    assert problems.problem_of(taken, "i", NOW)["stored_digest"] == "ab" * 32
    early = errors.NotAcceptableError("No.", (Fault("in_the_future", "is later than now", "/visited_at"),))
    assert problems.problem_of(early, "i", NOW)["server_time"] == "2026-11-30T09:00:00Z"
    fault = problems.problem_of(early, "i", NOW)["errors"][0]
    assert fault == {"code": "in_the_future", "reason": "is later than now", "pointer": "/visited_at"}
    line = Fault("unknown_word", "is none", line=3, column="traction")
    csv = problems.problem_of(errors.NotAcceptableError("No.", (line,)), "i", NOW)["errors"][0]
    assert csv == {"code": "unknown_word", "reason": "is none", "line": 3, "column": "traction"}


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_every_type_is_a_page(api: Api) -> None:
    client = api.client()
    for kind in KINDS.values():
        page = client.get(f"/problems/{kind.type}")
        assert page.headers["content-type"] == "text/html; charset=utf-8"
        assert kind.title.replace("'", "&#x27;") in page.text
    for unknown in ("nothing", "<b>", "..%2f"):
        assert client.get(f"/problems/{unknown}").status_code == 404


@pytest.mark.parametrize("database_url", ["sqlite"], indirect=True)
def test_wrong_addresses_and_methods(api: Api) -> None:
    api.depot("harrow")
    client = api.client("read", "admin")
    nowhere = client.get("/v1/nowhere")
    assert (nowhere.status_code, nowhere.json()["type"]) == (404, "/problems/not-found")
    assert client.get("/v1/depots/").status_code == 404
    assert client.get("/v1/depots/a%2Fb").status_code == 404
    assert client.get("/v1/depots/a%00b").status_code == 404
    assert client.get("/v1/depots/" + "x" * 41).status_code == 404
    for address, methods in (("/v1/depots", "GET, POST"), ("/v1/depots/harrow", "GET, PUT")):
        answer = client.patch(address)  # RFC 9110, 15.5.6: Allow names the methods of the resource
        assert (answer.status_code, answer.headers["allow"]) == (405, methods)
        assert answer.json()["type"] == "/problems/method-not-allowed"


class Inner(Request):
    value: float = Field(ge=0)
    name: str | None = None


class Outer(Request):
    inner: Inner
    items: tuple[Inner, ...] = ()
    either: Inner | list[int] | None = None
    by_name: dict[str, Inner] = Field(default_factory=dict)


INNER = '{"value": 1}'
POINTERS = [
    ('{"inner": {"value": -1}}', ["/inner/value"]),
    ('{"inner": {"value": true}}', ["/inner/value"]),
    ('{"inner": {"value": "1.5"}}', ["/inner/value"]),
    ('{"inner": {"value": NaN}}', ["/inner/value"]),
    ('{"inner": {"value": 1e999}}', ["/inner/value"]),
    ('{"inner": {"value": null}}', ["/inner/value"]),
    ('{"inner": {}}', ["/inner/value"]),
    ("{}", ["/inner"]),
    ("[]", [""]),
    ("3", [""]),
    ("null", [""]),
    (f'{{"inner": {INNER}, "items": [{INNER}, {{"value": -1}}]}}', ["/items/1/value"]),
    (f'{{"inner": {INNER}, "items": {{}}}}', ["/items"]),
    (f'{{"inner": {INNER}, "either": {{"value": -1}}}}', ["/either/value", "/either"]),
    (f'{{"inner": {INNER}, "either": [1, "x"]}}', ["/either", "/either/1"]),
    (f'{{"inner": {INNER}, "by_name": {{"a/b~c": {{"value": -1}}}}}}', ["/by_name/a~1b~0c/value"]),
    (f'{{"inner": {INNER}, "extra/": 1}}', ["/extra~1"]),
    (f'{{"inner": {INNER}, "{"x" * 500}": 1}}', [""]),
]


@pytest.mark.parametrize(("sent", "pointers"), POINTERS)
def test_pointers_lead_to_what_is_wrong(sent: str, pointers: list[str]) -> None:
    """RFC 6901: followed in what was sent, each comes to the faulty value, or where one is missing."""
    with pytest.raises(errors.NotAcceptableError) as caught:
        bodies.parse(Outer, sent.encode())
    assert [fault.pointer for fault in caught.value.faults] == pointers


SECRET = "S3CRET"
ECHOES: list[Any] = [
    SECRET,
    {"inner": SECRET},
    {"inner": {"value": SECRET}},
    {"inner": {"value": 1, "name": [SECRET]}},
    {"inner": {"value": 1}, "items": SECRET, "either": SECRET, "by_name": [SECRET]},
]


def test_nothing_that_was_sent_is_repeated() -> None:
    for sent in ECHOES:
        with pytest.raises(errors.NotAcceptableError) as caught:
            bodies.parse(Outer, json.dumps(sent).encode())
        assert SECRET not in str(problems.problem_of(caught.value, "i", NOW))


@pytest.mark.parametrize(
    "sent",
    [b"", b"{", b"\xff\xfe", b'{"inner": "\xff"}', b'{"inner": "\\ud800"}', b"[" * 5000 + b"]" * 5000,
     b'{"a":' * 3000 + b"1" + b"}" * 3000, b"{} x", b"\x00", b"{'a': 1}"],
    ids=lambda sent: repr(sent[:12]),
)  # fmt: skip
def test_what_cannot_be_read_is_said_to_be_so(sent: bytes) -> None:
    with pytest.raises(errors.UnparsableError):
        bodies.parse(Outer, sent)


def test_a_thousand_faults_are_not_all_told() -> None:
    sent = json.dumps({"inner": {"value": 1}, "items": [{"value": -1}] * 1000})
    with pytest.raises(errors.NotAcceptableError) as caught:
        bodies.parse(Outer, sent.encode())
    assert len(caught.value.faults) == 100
