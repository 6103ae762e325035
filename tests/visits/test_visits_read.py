"""Visits and statuses read again over HTTP: pages, entity tags, the list of sections."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta
from typing import Any

import pytest
from visits.field import SECOND, Handheld, drops, places, reading, visit, visit_id, wetness

MAY = datetime(2026, 5, 3, 9, tzinfo=UTC)


def plain(number: int = 1, **changes: Any) -> dict[str, Any]:
    return visit(number, MAY + timedelta(minutes=number), reading("relay_voltage", 2.1), **changes)


def test_a_visit_is_read_as_it_was_given(handheld: Handheld) -> None:
    sent = plain(
        readings=[
            reading("drop_shunt", 700, "feed_end", unit="mOhm", comparison="ge"),
            reading("relay_voltage", 2.1, instrument=None),
            reading("residual_voltage", 310.5, unit="mV", source="shunt", shunt_ohm=0.5),
        ],
        device="HH-07",
        tester="T114",
        conditions={"ballast": "damp", "ballast_state": "fouled", "rail": "clean", "air_temperature_c": -2.5},
        tasks=[{"task": "shunt_test", "done": "partly", "reason": "train coming"}],
        work_done=["adjusted", "tamped"],
        condition_left="fit",
        remarks="übergeben",
        pack="P-1",
    )
    handheld.post(sent)
    found = handheld.get(f"visits/{visit_id(1)}").json()
    assert found["visited_at"] == "2026-05-03T09:01:00.000000Z"
    for member in (
        "device",
        "tester",
        "conditions",
        "tasks",
        "work_done",
        "condition_left",
        "remarks",
        "pack",
    ):
        assert found[member] == sent[member]
    defaults = {"comparison": "eq", "shunt_ohm": None, "source": None}
    assert found["readings"] == [defaults | one for one in sent["readings"]]
    assert (found["replaces"], found["voided"], found["received_by"]) == (None, None, "handheld-7")
    assert handheld.get("visits").json()["items"] == [found]
    assert handheld.get("sections/TV114/visits").json()["items"] == [found]


def test_an_unknown_visit_is_not_found(handheld: Handheld) -> None:
    for name in (visit_id(1), "TV114", visit_id(1).upper()):
        assert handheld.get(f"visits/{name}").status_code == 404
    assert handheld.get("sections/TV999/visits").status_code == 404
    assert handheld.get("visits", params={"section": "TV999"}).json() == {"items": [], "next": None}


def pages(handheld: Handheld, path: str, **words: Any) -> list[list[str]]:
    """The ids on each page, from the first to the last."""
    found = []
    answer = handheld.get(path, params=words)
    while True:
        found.append([one["visit"] for one in answer.json()["items"]])
        following = answer.json()["next"]
        assert (following is None) == ("link" not in answer.headers)
        if following is None:
            return found
        assert answer.headers["link"] == f'<{following}>; rel="next"'
        answer = handheld.client.get(following)
        assert answer.status_code == 200


def test_pages_hold_each_visit_once_in_order_of_receipt(handheld: Handheld) -> None:
    """Of one batch by id, whatever the order in it; pages stay as they were when more arrives."""
    handheld.batch([plain(number) for number in (5, 3, 4)])
    handheld.api.clock.move(seconds=1)
    handheld.batch([plain(1, section="TV115"), plain(2)])
    expected = [visit_id(number) for number in (3, 4, 5, 1, 2)]
    for size in (1, 2, 4, 5, 6):
        found = pages(handheld, "visits", page_size=size)
        assert [one for page in found for one in page] == expected
        assert {len(page) for page in found[:-1]} <= {size}
    assert pages(handheld, "visits", page_size=2, section="TV115") == [[visit_id(1)]]
    assert pages(handheld, "sections/TV114/visits", page_size=3) == [expected[:3], [visit_id(2)]]
    assert pages(handheld, "visits", received_after="2026-06-15T09:00:00Z") == [expected[3:]]
    assert pages(handheld, "visits", received_after="2026-06-15T11:00:01+02:00") == [[]]


def test_a_cursor_is_good_for_its_own_list_only(handheld: Handheld) -> None:
    handheld.batch([plain(1), plain(2)])
    following = handheld.get("visits", params={"page_size": 1}).json()["next"]
    assert handheld.client.get(following).status_code == 200
    for other in (
        f"{following}&section=TV114",
        following[:-2] + "xy",
        following.replace("visits", "sections"),
    ):
        answer = handheld.client.get(other)
        assert (answer.status_code, places(answer.json())) == (422, [("cursor", "cursor")])


FILTERS: list[tuple[dict[str, Any], str]] = [
    ({"recieved_after": "2026-06-15T09:00:00Z"}, "recieved_after"),
    ({"received_after": "2026-06-15"}, "received_after"),
    ({"received_after": "2026-06-15T09:00:00"}, "received_after"),
    ({"received_after": "0001-01-01T00:00:00+14:00"}, "received_after"),
    ({"page_size": 0}, "page_size"),
    ({"page_size": 1001}, "page_size"),
]


def test_a_filter_that_cannot_be_taken_is_named(handheld: Handheld, subtests: pytest.Subtests) -> None:
    for query, parameter in FILTERS:
        with subtests.test(query=query):
            answer = handheld.get("visits", params=query)
            assert answer.status_code == 422
            assert [place for _, place in places(answer.json())] == [parameter]


FUTURES: list[tuple[dict[str, Any], str]] = [
    ({"as_of": "2026-06-16"}, "as_of"),
    ({"as_of": "15 June"}, "as_of"),
    ({"as_known_at": "2026-06-15T09:00:01Z"}, "as_known_at"),
    ({"as_known_at": "2026-06-15T09:00:00"}, "as_known_at"),
    ({"as_known_at": "9999-12-31T23:59:59-14:00"}, "as_known_at"),
    ({"asof": "2026-06-15"}, "asof"),
]


def test_a_status_of_the_future_is_refused(handheld: Handheld, subtests: pytest.Subtests) -> None:
    for query, parameter in FUTURES:
        with subtests.test(query=query):
            answer = handheld.get("sections/TV114/status", params=query)
            assert answer.status_code == 422
            assert [place for _, place in places(answer.json())] == [parameter]


def test_a_status_of_long_ago_is_not_found(handheld: Handheld) -> None:
    for query in ({"as_of": "0001-01-01"}, {"as_known_at": "0001-01-01T00:00:00Z"}):
        assert handheld.get("sections/TV114/status", params=query).status_code == 404


def test_a_status_says_what_it_rests_on(handheld: Handheld) -> None:
    posted = handheld.post(visit(1, MAY, *drops(0.7), **wetness("wet"))).json()
    found = handheld.get("sections/TV114/status").json()
    assert found["verdicts"] == posted["verdicts"]
    assert {name: found[name] for name in posted["status"]} == posted["status"]
    assert (found["as_of"], found["as_known_at"], found["section_version"]) == ("2026-06-15", None, 1)
    assert (found["book"], found["edition"], found["state"]) == ("house", "1", "in_use")
    then = handheld.get(
        "sections/TV114/status", params={"as_of": "2026-06-15", "as_known_at": "2026-06-15T08:59:59Z"}
    ).json()
    assert {one["verdict"] for one in then["verdicts"]} == {"not_measured"}
    assert then["as_known_at"] == "2026-06-15T08:59:59.000000Z"


READS = ["visits", f"visits/{visit_id(1)}", "sections/TV114/visits", "sections/TV114/status", "sections"]


def test_what_has_not_changed_is_not_sent_again(handheld: Handheld) -> None:
    handheld.post(plain())
    tags = {path: handheld.get(path).headers["etag"] for path in READS}
    for path, tag in tags.items():
        again = handheld.get(path, headers={"If-None-Match": tag})
        assert (again.status_code, again.content, again.headers["etag"]) == (304, b"", tag)
    handheld.api.client("readings", holder=SECOND.holder).post(
        f"/v1/depots/ashby/visits/{visit_id(1)}/void", json={"why": "another place"}
    )
    for path, tag in tags.items():
        changed = handheld.get(path, headers={"If-None-Match": tag})
        assert changed.status_code == 200
        assert changed.headers["etag"] != tag


def test_a_new_day_is_a_new_tag(handheld: Handheld) -> None:
    handheld.post(plain())
    known = {"If-None-Match": handheld.get("sections/TV114/status").headers["etag"]}
    handheld.api.clock.now = datetime(2026, 6, 15, 23, 59, 59, tzinfo=UTC)
    assert handheld.get("sections/TV114/status", headers=known).status_code == 304
    handheld.api.clock.move(seconds=1)
    answer = handheld.get("sections/TV114/status", headers=known)
    assert (answer.status_code, answer.json()["as_of"]) == (200, "2026-06-16")


def test_another_question_has_another_tag(handheld: Handheld) -> None:
    handheld.post(plain())
    tag = handheld.get("sections/TV114/status").headers["etag"]
    for query in ({"as_of": "2026-06-15"}, {"as_known_at": "2026-06-15T09:00:00Z"}):
        answer = handheld.get("sections/TV114/status", params=query, headers={"If-None-Match": tag})
        assert answer.status_code == 200
    assert handheld.get("sections/TV115/status", headers={"If-None-Match": tag}).status_code == 200


def test_the_lists_summary_is_that_of_the_status_on_every_day(handheld: Handheld) -> None:
    """Whether the day's first reader asks for the list or for the status."""
    done = [{"task": "shunt_test", "done": "done"}]
    handheld.post(visit(1, MAY, *drops(0.7), reading("relay_voltage", 2.1), tasks=done))
    seen = set()
    for day in (date(2026, 6, 15), date(2026, 8, 2), date(2026, 8, 3), date(2026, 8, 4), date(2027, 1, 9)):
        handheld.api.clock.now = datetime(day.year, day.month, day.day, tzinfo=UTC)
        (listed, _) = handheld.get("sections").json()["items"]
        status = handheld.get("sections/TV114/status").json()
        assert {name: status[name] for name in listed["status"]} == listed["status"]
        seen.add((status["overdue"], status["holds_until"]))
    assert len(seen) > 2


def test_reading_needs_its_scope_and_its_depot(handheld: Handheld) -> None:
    handheld.post(plain())
    handheld.api.depot("elsewhere")
    writer = handheld.api.client("readings", "register", "audit")
    stranger = handheld.api.client("read", depot="elsewhere")
    for path in READS:
        assert writer.get(f"/v1/depots/ashby/{path}").status_code == 403
        assert stranger.get(f"/v1/depots/ashby/{path}").status_code == 404
    assert stranger.get(f"/v1/depots/elsewhere/visits/{visit_id(1)}").status_code == 404
