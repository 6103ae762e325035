"""Small builders of rule facts: a section, limit *M* of the worked verdicts, visits that read it.

Invented names throughout. Days are 2026 unless given; the depot's zone is UTC.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from datetime import UTC, date, datetime, time
from typing import Any

from service.rules.facts import (
    Calibration,
    Concession,
    Instrument,
    Reading,
    SectionFacts,
    SectionRecord,
    TaskClaim,
    Visit,
)
from service.rules.limits import Bound, Combination, Edition, Limit, Task
from service.rules.quantities import QUANTITIES
from service.rules.status import Status, judge
from service.rules.verdicts import Verdict
from service.rules.words import (
    Ballast,
    CalibrationResult,
    CircuitKind,
    Comparison,
    EditionState,
    Hazard,
    Rail,
    SectionState,
    Stage,
    TaskDone,
    Traction,
    Work,
)

WRONG, RIGHT = Hazard.WRONG_SIDE, Hazard.RIGHT_SIDE
POINTS = ("relay_end", "feed_end")
AS_OF = date(2026, 6, 1)


def limit(**given: Any) -> Limit:
    """Limit *M*, unless told otherwise: drop shunt at least 0.5 Ω, wrong side, near margin 0.1 Ω."""
    values: dict[str, Any] = {
        "limit": "m",
        "quantity": "drop_shunt",
        "minimum": Bound(0.5, WRONG, 0.1),
        "maximum": None,
        "clause": "1.1",
        "source": "invented",
        "confirmed": True,
        "standing": "practice",
    }
    return Limit(**(values | given))


def task(**given: Any) -> Task:
    values: dict[str, Any] = {
        "task": "shunt_test",
        "clause": "2.1",
        "source": "invented",
        "confirmed": True,
        "standing": "practice",
        "interval": "P3M",
    }
    return Task(**(values | given))


def combination(kind: str, traction: str, rails: Iterable[int] | None = None, **given: Any) -> Combination:
    values: dict[str, Any] = {
        "clause": "3.1",
        "source": "invented",
        "confirmed": True,
        "standing": "practice",
    }
    return Combination(
        circuit_kind=CircuitKind(kind),
        traction=Traction(traction),
        return_rails=None if rails is None else frozenset(rails),
        **(values | given),
    )


def edition(*entries: Limit | Task | Combination, **given: Any) -> Edition:
    values: dict[str, Any] = {
        "book": "house",
        "edition": "1",
        "state": EditionState.ISSUED,
        "effective_on": date(2020, 1, 1),
        "withdrawn_on": None,
        "digest": "d1",
        "limits": tuple(entry for entry in entries if isinstance(entry, Limit)),
        "tasks": tuple(entry for entry in entries if isinstance(entry, Task)),
        "combinations": tuple(entry for entry in entries if isinstance(entry, Combination)),
    }
    return Edition(**(values | given))


def record(**given: Any) -> SectionRecord:
    values: dict[str, Any] = {
        "section": "TV114",
        "version": 1,
        "state": SectionState.IN_USE,
        "commissioned_on": date(2020, 1, 1),
        "circuit_kind": CircuitKind.DC,
        "traction": Traction.NONE,
        "required_test_points": POINTS,
    }
    values |= given
    values["state"] = SectionState(values["state"])
    values["traction"] = Traction(values["traction"])
    values["circuit_kind"] = CircuitKind(values["circuit_kind"])
    return SectionRecord(**values)


def calibration(on: date, due: date, result: str = "pass", **step: float) -> Calibration:
    return Calibration(on, due, CalibrationResult(result), step)


SB = Instrument("SB", (calibration(date(2025, 1, 1), date(2030, 1, 1), Ohm=0.1),))
VM = Instrument("VM", (calibration(date(2025, 1, 1), date(2030, 1, 1)),))
INSTRUMENTS = {"SB": SB, "VM": VM}


def reading(visit: str, value: float, **given: Any) -> Reading:
    quantity = given.get("quantity", "drop_shunt")
    values: dict[str, Any] = {
        "visit": visit,
        "quantity": quantity,
        "test_point": "relay_end",
        "stage": Stage.AS_LEFT,
        "comparison": Comparison.EQ,
        "value": value,
        "instrument": "SB" if QUANTITIES[quantity].steps_up else "VM",
    }
    values |= given
    values["stage"] = Stage(values["stage"])
    values["comparison"] = Comparison(values["comparison"])
    return Reading(**values)


class Case:
    """Visits and readings as they come in; `judge` and `verdict` judge what came so far."""

    def __init__(self, *entries: Limit | Task | Combination, **given: Any) -> None:
        self.edition = edition(*(entries or (limit(),)))
        self.record = record(**given)
        self.visits: list[Visit] = []
        self.readings: list[Reading] = []
        self.instruments: Mapping[str, Instrument] = INSTRUMENTS
        self.concessions: tuple[Concession, ...] = ()

    def visit(
        self,
        on: date,
        value: float | None = None,
        ballast: str | None = "dry",
        *,
        points: Sequence[str] = POINTS,
        work: Sequence[str] = (),
        tasks: Mapping[str, str] | None = None,
        rail: str | None = None,
        hour: int = 9,
        replaces: str | None = None,
        voided: bool = False,
        **given: Any,
    ) -> str:
        """Add a visit that reads `value` at `points`; its id, so that readings can be added."""
        name = f"v{len(self.visits)}"
        self.visits.append(
            Visit(
                visit=name,
                visited_at=datetime.combine(on, time(hour), UTC),
                visited_on=on,
                ballast=None if ballast is None else Ballast(ballast),
                rail=None if rail is None else Rail(rail),
                tasks=tuple(TaskClaim(task, TaskDone(done)) for task, done in (tasks or {}).items()),
                work=frozenset(Work(one) for one in work),
                replaces=replaces,
                voided=voided,
            )
        )
        if value is not None:
            self.readings += [reading(name, value, test_point=point, **given) for point in points]
        return name

    def facts(self) -> SectionFacts:
        visits = sorted(self.visits, key=lambda visit: (visit.visited_at, visit.visit))
        return SectionFacts(
            self.record, tuple(visits), tuple(self.readings), self.instruments, self.concessions
        )

    def judge(self, as_of: date = AS_OF) -> Status:
        return judge(self.facts(), "house", (self.edition,), as_of)

    def verdict(self, test_point: str | None = "relay_end", as_of: date = AS_OF) -> Verdict:
        (found,) = [one for one in self.judge(as_of).verdicts if one.test_point == test_point]
        return found


def codes(verdict: Any) -> list[str]:
    """The codes of the reasons given."""
    return [reason.code for reason in verdict.reasons]


def concession(**given: Any) -> Concession:
    values: dict[str, Any] = {
        "concession": "c1",
        "limit": "m",
        "task": None,
        "test_point": None,
        "allowed_min": None,
        "allowed_max": None,
        "from_on": date(2026, 1, 1),
        "until_on": date(2026, 6, 30),
    }
    return Concession(**(values | given))
