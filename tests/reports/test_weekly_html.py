"""The page read by the standard library's parser: all is said, all is escaped, nothing runs or is fetched."""

from __future__ import annotations

import re
from base64 import b64encode
from collections import Counter
from hashlib import sha256
from html.parser import HTMLParser
from itertools import pairwise

import pytest

from service.application.audits import WeeklyList
from service.reports import findings, weekly_html

VOID = {"meta", "br", "hr", "img", "link", "input"}
INLINE = {"a", "span", "strong", "time"}


class Page(HTMLParser):
    """Elements, texts and headings of a page; tags that do not nest are an error."""

    def __init__(self, source: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.headings: list[list[str]] = []
        self.pieces: list[str] = []
        self.style = ""
        self.feed(source)
        self.close()
        assert self.open == []
        self.text = " ".join("".join(self.pieces).split())

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, {name: value or "" for name, value in attrs}))
        if re.fullmatch("h[1-6]", tag):
            self.headings.append([tag, ""])
        if tag not in VOID:
            self.open.append(tag)
        self.part(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag
        self.part(tag)

    def part(self, tag: str) -> None:
        """Blocks stand apart in the text; what runs along in a line does not."""
        if tag not in INLINE:
            self.pieces.append(" ")

    def handle_data(self, data: str) -> None:
        if "style" in self.open:
            self.style += data
            return
        self.pieces.append(data)
        if self.headings and self.headings[-1][0] in self.open:
            self.headings[-1][1] += data

    def all(self, tag: str) -> list[dict[str, str]]:
        return [attributes for name, attributes in self.elements if name == tag]


@pytest.fixture
def page(found: WeeklyList) -> Page:
    return Page(weekly_html.write(found))


def said(text: str, page: Page) -> bool:
    return " ".join(text.split()) in page.text


def test_it_opens_with_the_head_and_the_caution(page: Page, found: WeeklyList) -> None:
    before = page.text[: page.text.index("To be reported first")]
    for text in (
        *(
            "Tarn Valley & Fell depot",
            "as of Monday 30 November 2026",
            "Run by clock",
            found.audit["caution"],
        ),
        *(f"sequence 4711, digest {found.audit['digest']}", "tarn-house, edition 3, digest 7d79"),
        *("Judged 236 track circuits", "4 track circuits: 2 out of use, 1 planned, 1 recovered"),
    ):
        assert text in before


def test_everything_on_the_list_is_on_the_page(page: Page, found: WeeklyList) -> None:
    for section in found.sections:
        assert said(section["section"], page)
        assert said(section["title"] or "", page)
        for finding in section["findings"]:
            assert findings.kind(finding) in page.text.lower()
            assert said(findings.hazard(finding), page)
            assert all(said(reason, page) for reason in findings.why(finding, section))
            assert said(f"{finding['opened_on']}, {findings.standing(finding)}", page)
            response = finding["response"] or {}
            assert all(said(response.get(name) or "", page) for name in ("owner", "action", "protection"))
            if finding["verdict"] is not None:
                verdict = finding["verdict"]
                assert said(findings.clause(verdict), page)
                assert said(findings.measured(verdict), page)
                assert said(findings.limit(verdict), page)
                assert said(findings.margin(verdict), page)


GOLDEN = """
TV114 =1+1 "quoted", <script>alert(1)</script> & more
@first second; third · km 11.4 to 12.3 · DC · no traction
Drop shunt at relay end: found outside the limit, not yet reported wrong side a train may not be detected
Measured 0.3 Ω Limit at least 0.5 Ω Margin 0.2 Ω beyond Clause T 2.1 of tarn-house, edition 3
Visit 2026-11-24 01:40, as found, SB-22 Since 2026-11-24, new No response recorded.

Relay voltage at relay end: outside the limit right side clear track shows occupied
Measured 1.74 V Limit 1.75 to 4.2 V Margin 0.01 V beyond Clause T 2.1 of tarn-house, edition 3, not confirmed

Circuit kind permitted: configuration outside the limit wrong side a train may not be detected
Register no Limit must be yes Why dc under dc_third_rail is not among those permitted

Shunt test: overdue Overdue 15 days Dates due 2026-11-01, grace until 2026-11-15 Interval 3 months, T 6.1
Last done never Since 2026-11-30, new
"""


@pytest.mark.parametrize("golden", GOLDEN.split("\n\n"))
def test_each_finding_stands_with_its_figures(page: Page, golden: str) -> None:
    """What a person reads of four of them, in order."""
    assert said(golden, page)


def test_what_waits_for_its_report_is_linked_at_the_top(page: Page) -> None:
    links = [one["href"] for one in page.all("a")]
    assert links == ["#f-0197c0de-0000-7000-8000-000000000001"]
    names = Counter(attributes["id"] for _, attributes in page.elements if "id" in attributes)
    assert set(names.values()) == {1}
    assert all(link[1:] in names for link in links)


def test_tables_say_what_is_owed_and_what_was_not_judged(page: Page) -> None:
    tail = page.text[page.text.index("Tasks overdue and due") :]
    assert "TV160 Up Main, TV160 Shunt test 3 months, T 6.1 15 days due 2026-11-01, grace until" in tail
    assert (
        "TV152 Up Main, TV152 Bond inspection 3 months, T 6.1 due since when it is due is not known" in tail
    )
    assert tail.index("Shunt test") < tail.index("Relay bench test")
    idle = tail[tail.index("Not judged") :]
    assert (
        "TV170 Goods loop out of use 2026-11-24 01:40 TV171 Old dock out of use never TV172 planned" in idle
    )
    assert len(page.all("caption")) == len(page.all("table")) == 2
    assert {one["scope"] for one in page.all("th")} == {"col", "row"}


def test_headings_go_down_one_level_at_a_time_and_are_never_empty(page: Page) -> None:
    levels = [int(tag[1]) for tag, _ in page.headings]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(after - before <= 1 for before, after in pairwise(levels))
    assert all(text.strip() for _, text in page.headings)


def test_nothing_runs_and_nothing_is_fetched(page: Page, found: WeeklyList) -> None:
    tags = {tag for tag, _ in page.elements}
    assert not tags & {"script", "link", "img", "iframe", "object", "embed", "form", "base"}
    for _, attributes in page.elements:
        assert not any(name.startswith("on") or name in ("style", "src") for name in attributes)
    assert "url(" not in page.style
    assert "@import" not in page.style
    assert "<script" not in weekly_html.write(found)


def test_hostile_text_is_shown_and_not_obeyed(found: WeeklyList) -> None:
    hostile = "</style></dd><script>alert('x')</script>&amp;\" onload=\"x"
    section = found.sections[1]
    section["title"] = section["findings"][0]["response"]["action"] = hostile
    section["findings"][0]["verdict"]["reasons"] = [{"code": "x", "reason": f"{hostile} 2026-01-02"}]
    source = weekly_html.write(found)
    assert "<script" not in source
    assert Page(source).text.count(hostile) == 3


def test_the_policy_allows_this_style_and_nothing_else(page: Page) -> None:
    """CSP level 3, 2.4.1: base64 of the SHA-256 of the style element's text."""
    digest = b64encode(sha256(page.style.encode()).digest()).decode()
    policy = f"default-src 'none'; style-src 'sha256-{digest}'; base-uri 'none'; form-action 'none'"
    assert f"{policy}; frame-ancestors 'none'" == weekly_html.CONTENT_SECURITY_POLICY
    assert policy in [one["content"] for one in page.all("meta") if "http-equiv" in one]


def test_it_names_its_language_and_fits_the_screen(page: Page) -> None:
    assert page.all("html") == [{"lang": "en"}]
    assert {"charset": "utf-8"} in page.all("meta")
    assert {"name": "viewport", "content": "width=device-width, initial-scale=1"} in page.all("meta")


def test_nothing_is_green_and_text_stands_out(page: Page) -> None:
    """Contrast as WCAG 2.2 defines it; 7 to 1 is its 1.4.6. White stands on the grave colour, too."""
    colours = dict(re.findall(r"--(\w+): (#[0-9a-f]{6})", page.style))
    for name in ("ink", "soft", "grave"):
        assert 1.05 / (luminance(colours[name]) + 0.05) >= 7
    for colour in re.findall(r"#[0-9a-f]{3,6}\b", page.style):
        red, green, blue = channels(colour)
        assert green <= max(red, blue)
    assert not re.search(r"\b(green|lime|teal)\b", page.style)


def channels(colour: str) -> list[int]:
    digits = colour[1:] if len(colour) == 7 else "".join(2 * digit for digit in colour[1:])
    return [int(digits[place : place + 2], 16) for place in (0, 2, 4)]


def luminance(colour: str) -> float:
    """WCAG 2.2, "relative luminance"."""
    parts = [one / 255 for one in channels(colour)]
    linear = [one / 12.92 if one <= 0.04045 else ((one + 0.055) / 1.055) ** 2.4 for one in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_an_empty_list_promises_nothing(nothing_found: WeeklyList) -> None:
    text = Page(weekly_html.write(nothing_found)).text
    assert "No finding is listed. That is what the records show as of Monday 30 November 2026" in text
    assert "No reading that was found outside a wrong-side limit waits for its report." in text
    assert nothing_found.audit["caution"] in text


def test_it_never_says_that_anything_complies(page: Page) -> None:
    assert "compl" not in page.text.lower()
