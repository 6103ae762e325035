"""Findings: what is wrong with a section, from audit to audit until cleared, and the responses to it.

A `found_outside` is raised when its visit is stored and cleared by its response alone; all others
are opened and cleared by audits.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from datetime import date
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, Row

from service.application.answers import day, verdict_json
from service.errors import Fault, NotAcceptableError, NotFoundError, StaleError
from service.records import journal
from service.records.journal import canonical, instant_text
from service.records.tables import Finding
from service.records.unit_of_work import Transaction, local_day
from service.rules.facts import Visit
from service.rules.findings import FindingSeed, found_outside_seeds, identity, weeks_open
from service.rules.verdicts import Verdict
from service.rules.words import FindingKind, FindingState

_finding = Finding.__table__  # type: ignore[attr-defined]

RESPONSE = (
    "owner",
    "action",
    "planned_on",
    "reported_at",
    "report_reference",
    "reported_to",
    "protection",
    "cause",
    "restored_by",
)
"""What a person can say in a response."""

CLEARING = ("reported_at", "reported_to", "report_reference", "protection", "cause", "restored_by")
"""What the response to a `found_outside` must say before it is cleared."""


def raise_found_outside(
    tx: Transaction, depot: str, section: str, visit: Visit, verdicts: Sequence[Verdict]
) -> list[journal.Entry]:
    """Open a finding for each quantity and test point that a visit found outside a wrong-side limit.

    One that is open already stays as it is: it was not answered for yet. Returns the journal lines to append.
    """
    seeds = {identity_of(section, seed): seed for seed in found_outside_seeds(verdicts)}
    already = open_rows(tx.connection, depot, section) if seeds else {}
    new = {name: seed for name, seed in seeds.items() if name not in already}
    rows = new_rows(tx, depot, {name: (section, seed) for name, seed in new.items()}, visit.visited_on, None)
    for row in rows:
        row["visit"] = visit.visit
    if rows:
        tx.connection.execute(sa.insert(_finding), rows)
    return [
        journal.Entry("finding_opened", "finding", row["finding"], (section,), wire(row, visit.visited_on))
        for row in rows
    ]


def identity_of(section: str, seed: FindingSeed) -> str:
    """What makes two findings of a depot the same, as it is kept; no part can hold the bar."""
    return "|".join((section, *(part or "" for part in identity(seed))))


def open_rows(connection: Connection, depot: str, section: str | None = None) -> dict[str, Row[Any]]:
    """Findings that are not cleared, by identity."""
    query = sa.select(_finding).where(_finding.c.depot == depot, _finding.c.state != FindingState.CLEARED)
    if section is not None:
        query = query.where(_finding.c.section == section)
    return {row.identity: row for row in connection.execute(query)}


def new_rows(
    tx: Transaction,
    depot: str,
    seeds: Mapping[str, tuple[str, FindingSeed]],
    seen_on: date,
    first_audit_on: date | None,
) -> list[dict[str, Any]]:
    """Rows of `finding` for (section, seed) by identity; what an earlier, cleared one was is in `reopens`."""
    reopens = _last_cleared(tx.connection, depot, list(seeds))
    return [
        {
            "depot": depot,
            "finding": tx.new_id(),
            "section": section,
            "identity": name,
            "kind": seed.kind,
            "quantity": seed.quantity,
            "task": seed.task,
            "test_point": seed.test_point,
            "hazard": seed.hazard,
            "state": FindingState.NEW,
            "opened_on": seen_on,
            "last_seen_on": seen_on,
            "cleared_on": None,
            "first_audit_on": first_audit_on,
            "reopens": reopens.get(name),
            "concession": seed.concession,
            "visit": None,
            "verdict": None if seed.verdict is None else canonical(verdict_json(seed.verdict)),
            "response": None,
            "reported_at": None,
            "version": 1,
        }
        for name, (section, seed) in seeds.items()
    ]


def _last_cleared(connection: Connection, depot: str, identities: list[str]) -> dict[str, str]:
    """identity → the last finding of it that was cleared."""
    found: dict[str, str] = {}
    for start in range(0, len(identities), 5000):
        query = sa.select(_finding.c.identity, _finding.c.finding).where(
            _finding.c.depot == depot,
            _finding.c.state == FindingState.CLEARED,
            _finding.c.identity.in_(identities[start : start + 5000]),
        )
        for row in connection.execute(query.order_by(_finding.c.cleared_on, _finding.c.finding)):
            found[row.identity] = row.finding
    return found


def wire(row: Row[Any] | Mapping[str, Any], as_of: date) -> dict[str, Any]:
    """A finding as answers, lists and the journal show it, on a day."""
    values: Mapping[str, Any] = row if isinstance(row, Mapping) else row._asdict()
    response = None if values["response"] is None else json.loads(values["response"])
    return {
        "depot": values["depot"],
        "finding": values["finding"],
        "section": values["section"],
        "kind": values["kind"],
        "hazard": values["hazard"],
        "state": values["state"],
        "quantity": values["quantity"],
        "test_point": values["test_point"],
        "task": values["task"],
        "opened_on": day(values["opened_on"]),
        "last_seen_on": day(values["last_seen_on"]),
        "cleared_on": day(values["cleared_on"]),
        "weeks_open": weeks_open(values["opened_on"], values["cleared_on"] or as_of),
        "reopens": values["reopens"],
        "concession": values["concession"],
        "visit": values["visit"],
        "verdict": None if values["verdict"] is None else json.loads(values["verdict"]),
        "response": response,
        "version": values["version"],
    }


def get(connection: Connection, depot: str, finding: str) -> Row[Any]:
    """One finding's row; NotFoundError if the depot has none of that name."""
    query = sa.select(_finding).where(_finding.c.depot == depot, _finding.c.finding == finding)
    row = connection.execute(query).one_or_none()
    if row is None:
        raise NotFoundError("This depot has no such finding.")
    return row


def page(
    connection: Connection,
    depot: str,
    *,
    state: str | None,
    section: str | None,
    kind: str | None,
    after: str | None,
    most: int,
) -> list[Row[Any]]:
    """Findings in order of their name (UUIDv7: of their making), from `after` on, at most `most`."""
    query = sa.select(_finding).where(_finding.c.depot == depot)
    for column, wanted in (("state", state), ("section", section), ("kind", kind)):
        if wanted is not None:
            query = query.where(_finding.c[column] == wanted)
    if after is not None:
        query = query.where(_finding.c.finding > after)
    return list(connection.execute(query.order_by(_finding.c.finding).limit(most)))


def respond(
    tx: Transaction, depot: str, finding: str, response: Mapping[str, Any], expected_version: int
) -> tuple[date, Row[Any]]:
    """Keep a response; a `found_outside` whose response says all of `CLEARING` is cleared.

    Returns the depot's day and the finding as it is then. `response` has the members of `RESPONSE`,
    instants and days as values. Raises StaleError when the finding has another version,
    NotAcceptableError for a report in the future.
    """
    depot_row = tx.lock_depot(depot)
    section = get(tx.connection, depot, finding).section
    tx.lock_sections(depot, [section])
    row = get(tx.connection, depot, finding)
    if row.version != expected_version:
        raise StaleError("The finding was changed since you read it; read it again.")
    today = local_day(tx.now, depot_row.time_zone)
    reported_at = response["reported_at"]
    if reported_at is not None and reported_at > tx.now:
        fault = Fault("future", "a report cannot lie in the future", "/reported_at")
        raise NotAcceptableError("The response cannot be taken as it is.", (fault,))
    cleared = row.kind == FindingKind.FOUND_OUTSIDE and all(response[name] is not None for name in CLEARING)
    if row.state == FindingState.CLEARED and row.kind == FindingKind.FOUND_OUTSIDE and not cleared:
        missing = [name for name in CLEARING if response[name] is None]
        faults = tuple(Fault("missing", "was what cleared this finding", f"/{name}") for name in missing)
        raise NotAcceptableError("A cleared finding keeps what cleared it.", faults)
    kept = {name: response[name] for name in RESPONSE}
    kept["planned_on"] = day(response["planned_on"])
    kept["reported_at"] = None if reported_at is None else instant_text(reported_at)
    kept["updated_at"], kept["updated_by"] = instant_text(tx.now), tx.actor.holder
    changes = {"response": canonical(kept), "reported_at": reported_at, "version": row.version + 1}
    if cleared and row.state != FindingState.CLEARED:
        changes.update(state=FindingState.CLEARED, cleared_on=today)
    where = (_finding.c.depot == depot, _finding.c.finding == finding)
    tx.connection.execute(sa.update(_finding).where(*where).values(**changes))
    after = get(tx.connection, depot, finding)
    entry = journal.Entry("finding_answered", "finding", finding, (section,), wire(after, today))
    tx.append(depot, [entry])
    return today, after
