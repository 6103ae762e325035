"""Single readings and visits: which visits count, which readings can be relied on, what interval one is.

Nothing here knows a limit. How the readings of a section stand to one another is in `evidence`.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from datetime import date
from math import inf
from operator import attrgetter
from typing import NamedTuple

from service.rules.facts import Instrument, Reading, Visit
from service.rules.quantities import QUANTITIES, difference, total
from service.rules.words import CalibrationResult, Comparison, Reason

OUT_OF_TOLERANCE = CalibrationResult.OUT_OF_TOLERANCE

_in_order = attrgetter("visited_at", "visit")


class Interval(NamedTuple):
    """Where the true value lies, in the base unit; ±inf for a half-line, `…_open` if the end is excluded."""

    low: float
    high: float
    low_open: bool
    high_open: bool


def counting(visits: Iterable[Visit]) -> tuple[Visit, ...]:
    """The visits that count, each once, oldest first by instant, then by id.

    A visit counts unless it is voided or replaced, directly or through the visit that replaced it.
    So of a chain of corrections only the last counts, and voiding it revives the one before.
    """
    kept = {visit.visit: visit for visit in visits if not visit.voided}
    replaced = {visit.replaces for visit in kept.values()}
    return tuple(sorted((visit for visit in kept.values() if visit.visit not in replaced), key=_in_order))


def replaces_cycle(visits: Iterable[Visit]) -> tuple[str, ...]:
    """The ids of visits that replace one another in a circle, voided or not; empty if none do."""
    replaces = {visit.visit: visit.replaces for visit in visits}
    done: set[str] = set()
    for start in replaces:
        path: list[str] = []
        at: str | None = start
        while at is not None and at in replaces and at not in done:
            done.add(at)
            path.append(at)
            at = replaces[at]
        if at in path:
            return tuple(path[path.index(at) :])
    return ()


def trust(
    reading: Reading, visited_on: date, instruments: Mapping[str, Instrument], as_of: date
) -> Reason | None:
    """Why the reading cannot be relied on; None if it can.

    Only calibrations made by `as_of` are known. One that found the instrument out of tolerance
    unproves every reading since the good one before it, and until the next good one.
    """
    if reading.doubtful is not None:
        return Reason("doubtful", f"the reading is doubtful: {reading.doubtful}")
    if reading.instrument is None:
        return Reason("no_instrument", "no instrument is named")
    instrument = instruments.get(reading.instrument)
    if instrument is None:
        return Reason("unknown_instrument", f"instrument {reading.instrument} is not in the register")
    return _proved(instrument, visited_on, as_of)


def _proved(instrument: Instrument, day: date, as_of: date) -> Reason | None:
    in_force = bad = None
    for one in instrument.calibrations:
        on = one.calibrated_on
        if on > as_of:
            break
        if on >= day and one.result is OUT_OF_TOLERANCE:
            bad = one
        if on > day:
            break
        in_force = one
    if bad is None and in_force is not None and in_force.result is OUT_OF_TOLERANCE:
        bad = in_force
    name = instrument.instrument
    if bad is not None:
        text = f"instrument {name} was found out of tolerance on {bad.calibrated_on}"
        return Reason("instrument_out_of_tolerance", text)
    if in_force is None:
        return Reason("not_calibrated", f"instrument {name} was not calibrated by {day}")
    if in_force.due_on < day:
        return Reason(
            "calibration_lapsed", f"instrument {name} was due to be calibrated on {in_force.due_on}"
        )
    return None


def steps_on(instrument: Instrument | None, day: date, as_of: date) -> Mapping[str, float]:
    """The steps of a box on a day, base unit → step; empty for a meter or no instrument known.

    From the calibration in force on that day, whatever its result, else the first there is.
    """
    if instrument is None or not instrument.calibrations:
        return {}
    known = min(day, as_of)
    for calibration in reversed(instrument.calibrations):
        if calibration.calibrated_on <= known:
            return calibration.step
    return instrument.calibrations[0].step


def interval(reading: Reading, step: float | None) -> Interval:
    """Where the true value of the reading lies, given the `step` of the box [base unit] or None.

    A drop shunt of 0.5 on 0.1 Ω steps is [0.5, 0.6): the next step no longer released the relay. A
    pick-up shunt of 0.5 is (0.4, 0.5]. `ge` and `lt` are half-lines, whatever the step.
    """
    value = reading.value
    if reading.comparison is Comparison.GE:
        return Interval(value, inf, low_open=False, high_open=True)
    if reading.comparison is Comparison.LT:
        return Interval(-inf, value, low_open=True, high_open=True)
    up = QUANTITIES[reading.quantity].steps_up
    if step is None or not up:
        return Interval(value, value, low_open=False, high_open=False)
    if up > 0:
        return Interval(value, total(value, step), low_open=False, high_open=True)
    return Interval(difference(value, step), value, low_open=True, high_open=False)
