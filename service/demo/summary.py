"""The first lines of the demo's weekly list, and where to look further, as text for a terminal.

The list itself comes from its audit; pages and files of it are made elsewhere.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from service.application import audits
from service.application.context import Service
from service.demo.lines import DEPOT

FIRST = 12
"""Lines of the list that are shown."""


def first_lines(service: Service) -> Iterator[str]:
    """The head of the latest weekly list and its first sections, each with its gravest finding."""
    with service.read(snapshot=True) as connection:
        weekly = audits.weekly_list(connection, DEPOT, None)
    audit, counts = weekly.audit, weekly.audit["counts"]
    yield f"{weekly.title}: weekly list as of {audit['audit']}"
    yield (
        f"{audit['sections_judged']} track circuits judged, {audit['sections_not_judged']} not; "
        f"shown within limits {counts['compliance_yes']}, not shown {counts['compliance_not_shown']}, "
        f"outside {counts['compliance_no']}, overdue {counts['overdue']}"
    )
    for shown in weekly.sections[:FIRST]:
        yield f"  {shown['section']:<7}{shown['line_name']:<22}{_gravest(shown)}"
    if len(weekly.sections) > FIRST:
        yield f"  and {len(weekly.sections) - FIRST} more"
    yield audit["caution"]


def _gravest(shown: dict[str, Any]) -> str:
    if not shown["findings"]:
        return str(shown["state"]).replace("_", " ")
    first, *others = shown["findings"]
    what = first["quantity"] or first["task"] or ""
    words = [first["kind"], what, *([f"at {first['test_point']}"] if first["test_point"] else [])]
    text = " ".join(word for word in words if word).replace("_", " ")
    return f"{text} (and {len(others)} more)" if others else text


def where_to_look(base: str, keys: Path) -> Iterator[str]:
    """Addresses to open, and a request to try."""
    yield f"Weekly list: {base}/v1/depots/{DEPOT}/audits/latest/list?format=html"
    yield f"API:         {base}/docs"
    yield f"Keys:        {keys}, by scope"
    yield f"Try:         curl -u me:READ_KEY '{base}/v1/depots/{DEPOT}/sections?compliance=no'"
    yield "In a browser any name will do, with a key as the password."
