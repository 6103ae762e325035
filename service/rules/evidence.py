"""One section's facts put in order: what was read where and when, and what of it still proves anything.

Built once for each judgement; verdicts, tasks and cautions all ask here. No limit is applied here.
"""

from __future__ import annotations

from bisect import insort
from collections.abc import Sequence
from datetime import date
from operator import itemgetter

from service.rules.facts import Instrument, Reading, SectionFacts, Visit
from service.rules.quantities import QUANTITIES
from service.rules.readings import counting, interval, steps_on, trust
from service.rules.words import CIRCUIT_CHANGING_WORK, Comparison, Reason, RelativeTo, Stage, TaskDone, Work

Series = list[tuple[int, Reading]]
"""Readings of one quantity at one test point, oldest first, each with its order.

The order is twice the visit's place in `Evidence.visits`, plus one if as left: work lies between.
"""

_order = itemgetter(0)
EXACTLY, AS_LEFT = Comparison.EQ, Stage.AS_LEFT

UNKNOWN = Reason("unknown", "not asked yet")

RATED = {
    (RelativeTo.RELAY_PICK_UP, "V"): ("relay_pick_up_voltage", "relay_pick_up_v"),
    (RelativeTo.RELAY_PICK_UP, "A"): ("relay_pick_up_current", "relay_pick_up_a"),
    (RelativeTo.RELAY_DROP_AWAY, "V"): ("relay_drop_away_voltage", "relay_drop_away_v"),
    (RelativeTo.RELAY_DROP_AWAY, "A"): ("relay_drop_away_current", "relay_drop_away_a"),
}
"""What a relative limit is a multiple of, by its quantity's base unit: bench reading, else register."""


class Evidence:
    """The counting visits and their readings, as known on `as_of`.

    `series` and `points` are by quantity; `claims` has, by task, the place of each visit that says
    something of it; `fresh_from` is the first order that is not older than the last work that
    changed the circuit, nor than the return from out of use.
    """

    __slots__ = (
        "_rated",
        "_trust",
        "as_of",
        "claims",
        "facts",
        "fresh_from",
        "next_calibration_on",
        "points",
        "record",
        "series",
        "visits",
    )

    def __init__(self, facts: SectionFacts, as_of: date) -> None:
        self.facts = facts
        self.record = facts.record
        self.as_of = as_of
        self.visits = counting(facts.visits)
        self.series: dict[tuple[str, str], Series] = {}
        self.points: dict[str, list[str]] = {}
        self.claims: dict[str, list[tuple[int, TaskDone]]] = {}
        self.next_calibration_on: date | None = None
        """First day on which a calibration that is already stored begins to count."""
        self._trust: dict[tuple[str | None, int], Reason | None] = {}
        self._rated: dict[str, tuple[float | None, Reason | None]] = {}
        self._put_in_order(facts.readings)
        self.fresh_from = max(2 * self.last_work(CIRCUIT_CHANGING_WORK) + 1, 2 * self._returned())

    def _put_in_order(self, readings: Sequence[Reading]) -> None:
        series, points, claims = self.series, self.points, self.claims
        first_order = {}
        for place, visit in enumerate(self.visits):
            first_order[visit.visit] = 2 * place
            for claim in visit.tasks:
                claims.setdefault(claim.task, []).append((place, claim.done))
        for reading in readings:
            order = first_order.get(reading.visit)
            if order is None:
                continue
            if reading.stage is AS_LEFT:
                order += 1
            key = (reading.quantity, reading.test_point)
            known = series.get(key)
            if known is None:
                series[key] = [(order, reading)]
                points.setdefault(reading.quantity, []).append(reading.test_point)
            elif order >= known[-1][0]:
                known.append((order, reading))
            else:
                insort(known, (order, reading), key=_order)

    def last_work(self, kinds: frozenset[Work]) -> int:
        """The place of the last visit with such work; −1 if there was none."""
        for place in range(len(self.visits) - 1, -1, -1):
            work = self.visits[place].work
            if work and not kinds.isdisjoint(work):
                return place
        return -1

    def _returned(self) -> int:
        """The place of the first visit on or after the return from out of use."""
        returned_on = self.record.returned_on
        if returned_on is None:
            return 0
        return sum(visit.visited_on < returned_on for visit in self.visits)

    def visit(self, order: int) -> Visit:
        """The visit of a reading, by its order."""
        return self.visits[order // 2]

    def trust(self, order: int, reading: Reading) -> Reason | None:
        """Why a reading cannot be relied on; None if it can."""
        if reading.doubtful is not None:
            return trust(reading, self.visit(order).visited_on, self.facts.instruments, self.as_of)
        key = (reading.instrument, order // 2)
        known = self._trust.get(key, UNKNOWN)
        if known is UNKNOWN:
            self._note_calibrations(reading.instrument)
            day = self.visit(order).visited_on
            known = self._trust[key] = trust(reading, day, self.facts.instruments, self.as_of)
        return known

    def _instrument(self, name: str | None) -> Instrument | None:
        return self.facts.instruments.get(name) if name is not None else None

    def _note_calibrations(self, name: str | None) -> None:
        instrument = self._instrument(name)
        for calibration in () if instrument is None else instrument.calibrations:
            day = calibration.calibrated_on
            if day > self.as_of and (self.next_calibration_on is None or day < self.next_calibration_on):
                self.next_calibration_on = day

    def span(self, order: int, reading: Reading) -> tuple[float, float]:
        """Where the true value lies, from the reading's comparison and the box's step [base unit]."""
        quantity = QUANTITIES[reading.quantity]
        if reading.comparison is not EXACTLY:
            return interval(reading, None)[:2]
        if not quantity.steps_up:
            return reading.value, reading.value
        steps = steps_on(self._instrument(reading.instrument), self.visit(order).visited_on, self.as_of)
        return interval(reading, steps.get(quantity.unit))[:2]

    def stale(self, order: int) -> Reason | None:
        """Why an electrical reading of the track is too old to prove anything; None if it is not."""
        if order >= self.fresh_from:
            return None
        if order < 2 * self._returned():
            returned_on = self.record.returned_on
            return Reason(
                "returned_to_use", f"measured before the section came back into use on {returned_on}"
            )
        work = self.visits[self.last_work(CIRCUIT_CHANGING_WORK)]
        return Reason("work_since", f"measured before work of {work.visited_on} that changed the circuit")

    def rated(self, relative_to: RelativeTo, unit: str) -> tuple[float | None, Reason | None]:
        """The fitted relay's own pick-up or drop-away [base unit], and why it cannot be relied on.

        The latest bench reading since this relay was fitted, else the register's figure.
        """
        quantity, attribute = RATED[relative_to, unit]
        if quantity not in self._rated:
            bench = self._bench(quantity)
            if bench is None:
                self._rated[quantity] = (getattr(self.record, attribute), None)
            else:
                self._rated[quantity] = (bench[1].value, self.trust(*bench))
        return self._rated[quantity]

    def _bench(self, quantity: str) -> tuple[int, Reading] | None:
        """The newest exact reading of a rated value that is of the relay now fitted."""
        relay = self.record.items.get("relay")
        fitted_on = date.min if relay is None or relay.fitted_on is None else relay.fitted_on
        since = 2 * self.last_work(frozenset({Work.RELAY_CHANGED})) + 1
        found = [
            (order, reading)
            for point in self.points.get(quantity, ())
            for order, reading in self.series[quantity, point]
            if order >= since and reading.comparison is EXACTLY and self.visit(order).visited_on >= fitted_on
        ]
        return max(found, key=lambda entry: (entry[0], entry[1].test_point), default=None)
