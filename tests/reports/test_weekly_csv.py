"""The CSV by RFC 4180, read strictly by the standard library; names and codes are those of the JSON."""

from __future__ import annotations

import csv
import io
import re
from typing import Any

from service.api.schemas.audits import WeeklyListAnswer
from service.application.audits import WeeklyList
from service.application.csv_cells import unguarded
from service.reports import weekly_csv

# RFC 4180, section 2: a cell is plain, or quoted with its quotes doubled; a line ends in CRLF.
CELL = r'(?:[^",\r\n]*|"(?:[^"]|"")*")'
RECORD = re.compile(rf"{CELL}(?:,{CELL})*\r\n")


def rows(found: WeeklyList) -> list[dict[str, str]]:
    text = weekly_csv.write(found).decode("utf-8-sig")
    return list(csv.DictReader(io.StringIO(text, newline=""), strict=True))


def test_the_bytes_are_rfc_4180_with_bom(found: WeeklyList) -> None:
    content = weekly_csv.write(found)
    assert content.startswith(b"\xef\xbb\xbf")
    text = content.decode("utf-8-sig")
    at = 0
    while at < len(text):
        record = RECORD.match(text, at)
        assert record is not None, text[at : at + 80]
        at = record.end()
    lines = list(csv.reader(io.StringIO(text, newline=""), strict=True))
    assert {len(line) for line in lines} == {len(weekly_csv.HEADER)}


def test_columns_are_every_json_path_but_the_counts(found: WeeklyList) -> None:
    """The answer's own schema says which paths there are; lists give one column a member."""
    schema = WeeklyListAnswer.model_json_schema()
    paths = set(leaves(schema, schema))
    own = {"audit.depot", "audit.state", "sections.findings.depot", "sections.findings.section"}
    counts = {name for name in weekly_csv.HEADER if name.startswith("audit.counts.")}
    assert set(weekly_csv.HEADER) - counts == paths - own - {"audit.counts"}
    assert len(set(weekly_csv.HEADER)) == len(weekly_csv.HEADER)


def leaves(schema: dict[str, Any], node: dict[str, Any], before: str = "") -> list[str]:
    options = [one for one in node.get("anyOf", [node]) if one.get("type") != "null"]
    node = options[0]
    if "$ref" in node:
        node = schema["$defs"][node["$ref"].rpartition("/")[2]]
    if node.get("type") == "array":
        return leaves(schema, node["items"], before)
    if "properties" in node:
        inside = node["properties"].items()
        return [leaf for name, one in inside for leaf in leaves(schema, one, f"{before}.{name}")]
    return [before[1:]]


def test_there_is_a_row_for_each_finding_in_order_and_for_what_has_none(found: WeeklyList) -> None:
    shown = [
        (row["sections.section"], row["sections.findings.kind"], row["sections.tasks.task"])
        for row in rows(found)
    ]
    assert shown[:2] == [("TV114", "found_outside", ""), ("TV120(a)", "found_outside", "")]
    assert shown[-7:] == [
        ("TV160", "overdue", "shunt_test"),
        ("TV160", "", "relay_bench_test"),
        ("TV161", "concession_lapsing", ""),
        ("TV162", "will_not_hold", ""),
        ("TV170", "", ""),
        ("TV171", "", ""),
        ("TV172", "", ""),
    ]
    findings = [finding for section in found.sections for finding in section["findings"]]
    named = [row["sections.findings.finding"] for row in rows(found)]
    assert [name for name in named if name] == [finding["finding"] for finding in findings]


def test_every_row_carries_the_head(found: WeeklyList, nothing_found: WeeklyList) -> None:
    for row in [*rows(found), *rows(nothing_found)]:
        assert row["depot"] == "tarn-valley"
        assert row["title"] == "Tarn Valley & Fell depot"
        assert row["audit.audit"] == "2026-11-30"
        assert row["audit.started_by"] == "clock"
        assert row["audit.finished_at"] == "2026-11-30T04:01:02.500000Z"
        assert row["audit.editions.digest"] == "7d79" * 16
        assert (row["audit.sections_judged"], row["audit.sections_not_judged"]) == ("236", "4")
        assert (row["audit.sequence"], row["audit.digest"]) == ("4711", found.audit["digest"])
        assert row["audit.caution"] == found.audit["caution"]
    assert len(rows(nothing_found)) == 1


def test_cells_hold_what_json_holds(found: WeeklyList) -> None:
    """Read back by the type that the schema gives them: nothing is rounded, translated or lost."""
    lines = [row for row in rows(found) if row["sections.findings.finding"]]
    findings = [finding for section in found.sections for finding in section["findings"]]
    for row, finding in zip(lines, findings, strict=True):
        verdict, response = finding["verdict"] or {}, finding["response"] or {}
        for name in ("measured", "judged", "min", "max", "margin"):
            cell, value = row[f"sections.findings.verdict.{name}"], verdict.get(name)
            assert (None if cell == "" else float(cell)) == value
        for name in ("clause", "stage", "visited_at", "instrument", "unit"):
            assert row[f"sections.findings.verdict.{name}"] == (verdict.get(name) or "")
        for name in ("owner", "action", "reported_at", "cause"):
            assert row[f"sections.findings.response.{name}"] == (response.get(name) or "")
        reasons = ";".join(reason["reason"] for reason in verdict.get("reasons", ()))
        assert row["sections.findings.verdict.reasons.reason"] == reasons


def test_formulas_are_defused_and_come_back_and_numbers_stay(found: WeeklyList) -> None:
    row = rows(found)[0]
    assert row["sections.title"].startswith("'=1+1")
    assert unguarded(row["sections.title"]) == found.sections[0]["title"]
    assert row["sections.line_name"].startswith("'@first\n")
    assert unguarded(row["sections.line_name"]) == found.sections[0]["line_name"]
    assert row["sections.findings.verdict.margin"] == "-0.2"


def test_an_overdue_finding_comes_with_its_task(found: WeeklyList) -> None:
    row = next(row for row in rows(found) if row["sections.findings.kind"] == "overdue")
    assert row["sections.tasks.interval"] == "P3M"
    assert row["sections.tasks.due_on"] == "2026-11-01"
    assert row["sections.tasks.grace_until_on"] == "2026-11-15"
    assert row["sections.tasks.days_overdue"] == "15"
