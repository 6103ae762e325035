"""Shunt boxes and meters with their calibrations. Calibrations are only ever added.

A calibration can move every section that was measured with the instrument, so they are judged anew.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields
from dataclasses import replace as with_changes
from datetime import date, datetime
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection

from service.application import status
from service.application.section_content import json_value
from service.errors import Fault, NotAcceptableError, NotFoundError, StaleError
from service.records import bulk, journal
from service.records.tables import CalibrationRow, InstrumentRow, ReadingRow
from service.records.unit_of_work import Transaction, local_day
from service.rules.quantities import UNITS, base_unit, to_base
from service.rules.words import CalibrationResult

_instrument = InstrumentRow.__table__  # type: ignore[attr-defined]
_calibration = CalibrationRow.__table__  # type: ignore[attr-defined]
_reading = ReadingRow.__table__  # type: ignore[attr-defined]


@dataclass(frozen=True, slots=True)
class Calibration:
    """One calibration. `resolution` is a box's step or a meter's last digit, in `resolution_unit`."""

    calibrated_on: date
    due_on: date
    result: CalibrationResult
    accuracy_percent: float | None = None
    resolution: float | None = None
    resolution_unit: str | None = None
    lead_resistance_ohm: float | None = None
    certificate: str | None = None


@dataclass(frozen=True, slots=True)
class Content:
    """The editable members of an instrument; `kind` is `shunt_box` or `meter`."""

    kind: str
    title: str | None
    serial: str | None
    calibrations: tuple[Calibration, ...]


@dataclass(frozen=True, slots=True)
class Instrument:
    """An instrument as kept, its calibrations by date, resolutions in the base unit."""

    depot: str
    instrument: str
    version: int
    recorded_at: datetime
    content: Content

    def document(self) -> dict[str, Any]:
        """The instrument as plain JSON, as journal and wire show it."""
        said: dict[str, Any] = json_value(self.content)
        when = journal.instant_text(self.recorded_at)
        names = {"depot": self.depot, "instrument": self.instrument}
        return names | {"version": self.version, "recorded_at": when} | said


_CALIBRATION = tuple(field.name for field in fields(Calibration))


def get(connection: Connection, depot: str, instrument: str) -> Instrument:
    """One instrument; NotFoundError if the depot has none of this name."""
    query = sa.select(_instrument).where(_instrument.c.instrument == instrument)
    for found in _read(connection, depot, query):
        return found
    raise NotFoundError("There is no such instrument in this depot.")


def page(connection: Connection, depot: str, *, after: str | None, most: int) -> list[Instrument]:
    """Up to `most` instruments by name from beyond `after`."""
    query = sa.select(_instrument).order_by(_instrument.c.instrument).limit(most)
    return _read(connection, depot, query if after is None else query.where(_instrument.c.instrument > after))


def put(
    tx: Transaction, depot: str, instrument: str, version: int | None, content: Content
) -> tuple[Instrument, bool]:
    """Record an instrument (`version` None) or its next state; whether it is new.

    Content that says what is stored already stores nothing.

    Raises
    ------
    NotFoundError, StaleError
        If it is to be edited and is not there, or not at `version`; if it is to be new and exists.
    NotAcceptableError
        If an earlier calibration is missing or changed, or the content contradicts itself.
    """
    row = tx.lock_depot(depot, exclusive=True)
    stored = _stored(tx.connection, depot, instrument, version)
    found = tuple(_faults(content, stored, local_day(tx.now, row.time_zone)))
    if found:
        raise NotAcceptableError("The instrument cannot be recorded like this; nothing was written.", found)
    content = _in_base_units(content)
    if stored is not None:
        if json_value(stored.content) == json_value(content):
            return stored, False
        if version is None:
            raise StaleError("The depot has an instrument of this name already: edit it with If-Match.")
    kept = Instrument(depot, instrument, 1 if stored is None else stored.version + 1, tx.now, content)
    _write(tx, kept, stored)
    moved = _measured_with(tx.connection, depot, instrument)
    tx.lock_sections(depot, moved)
    action = "instrument_created" if stored is None else "instrument_changed"
    entry = journal.Entry(action, "instrument", instrument, tuple(moved), kept.document())
    status.rejudge_and_append(tx, row, moved, [entry])
    return kept, stored is None


def _stored(connection: Connection, depot: str, instrument: str, version: int | None) -> Instrument | None:
    try:
        stored = get(connection, depot, instrument)
    except NotFoundError:
        if version is None:
            return None
        raise
    if version not in (None, stored.version):
        raise StaleError("The instrument was changed since it was read.")
    return stored


def _write(tx: Transaction, kept: Instrument, stored: Instrument | None) -> None:
    names = {"depot": kept.depot, "instrument": kept.instrument}
    said = {"kind": kept.content.kind, "title": kept.content.title, "serial": kept.content.serial}
    values = said | {"version": kept.version, "recorded_at": kept.recorded_at}
    if stored is None:
        tx.connection.execute(sa.insert(_instrument).values(names | values))
    else:
        same = sa.and_(_instrument.c.depot == kept.depot, _instrument.c.instrument == kept.instrument)
        tx.connection.execute(sa.update(_instrument).where(same).values(values))
    known = {one.calibrated_on for one in stored.content.calibrations} if stored is not None else set()
    rows = [
        names
        | {name: getattr(one, name) for name in _CALIBRATION}
        | {"result": one.result.value, "recorded_at": tx.now}
        for one in kept.content.calibrations
        if one.calibrated_on not in known
    ]
    bulk.insert(tx.connection, _calibration, rows)


def _measured_with(connection: Connection, depot: str, instrument: str) -> list[str]:
    """The sections that have a reading taken with an instrument."""
    query = sa.select(_reading.c.section).distinct()
    query = query.where(_reading.c.depot == depot, _reading.c.instrument == instrument)
    return sorted(connection.execute(query).scalars())


def _in_base_units(content: Content) -> Content:
    """The content as kept: calibrations by date, resolutions in the base unit."""
    converted = (
        one
        if one.resolution is None or one.resolution_unit is None
        else with_changes(
            one,
            resolution=to_base(one.resolution, one.resolution_unit),
            resolution_unit=base_unit(one.resolution_unit),
        )
        for one in content.calibrations
    )
    return with_changes(content, calibrations=tuple(sorted(converted, key=lambda one: one.calibrated_on)))


def _faults(content: Content, stored: Instrument | None, today: date) -> Iterator[Fault]:
    days: set[date] = set()
    usable = True
    for index, one in enumerate(content.calibrations):
        at = f"/calibrations/{index}"
        if one.calibrated_on in days:
            yield Fault("duplicate", "there is one calibration a day", f"{at}/calibrated_on")
        days.add(one.calibrated_on)
        if one.calibrated_on > today:
            yield Fault("in_the_future", "a calibration is recorded once it is done", f"{at}/calibrated_on")
        if one.due_on < one.calibrated_on:
            yield Fault("out_of_order", "the next one is due before this one", f"{at}/due_on")
        if (one.resolution is None) != (one.resolution_unit is None):
            yield Fault("unit_missing", "a resolution and its unit go together", f"{at}/resolution_unit")
        elif one.resolution_unit is not None and one.resolution_unit not in UNITS:
            usable = False
            yield Fault("unknown_unit", "units are UCUM codes", f"{at}/resolution_unit")
    if stored is not None and stored.content.kind != content.kind:
        yield Fault("fixed", "an instrument does not change its kind", "/kind")
    if stored is not None and usable:
        yield from _dropped(stored.content, _in_base_units(content))


def _dropped(stored: Content, content: Content) -> Iterator[Fault]:
    given = {one.calibrated_on: json_value(one) for one in content.calibrations}
    for one in stored.calibrations:
        if given.get(one.calibrated_on) != json_value(one):
            reason = (
                f"the calibration of {one.calibrated_on} is missing or changed; calibrations are only added"
            )
            yield Fault("calibration_changed", reason, "/calibrations")


def _read(connection: Connection, depot: str, query: sa.Select[Any]) -> list[Instrument]:
    rows = connection.execute(query.where(_instrument.c.depot == depot)).all()
    wanted: Sequence[str] = [row.instrument for row in rows]
    found = sa.select(_calibration).where(
        _calibration.c.depot == depot, _calibration.c.instrument.in_(wanted)
    )
    calibrations: dict[str, list[Calibration]] = defaultdict(list)
    for row in connection.execute(found.order_by(_calibration.c.calibrated_on)):
        values = {name: getattr(row, name) for name in _CALIBRATION}
        calibrations[row.instrument].append(Calibration(**values | {"result": CalibrationResult(row.result)}))
    return [
        Instrument(
            depot,
            row.instrument,
            row.version,
            row.recorded_at,
            Content(row.kind, row.title, row.serial, tuple(calibrations[row.instrument])),
        )
        for row in rows
    ]
