"""The invented people, their handhelds, shunt boxes and meters with calibrations.

Who measures with what; what a reading then is, is in `measuring`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import date, timedelta

from service.application.instruments import Calibration, Content
from service.rules.words import CalibrationResult

YEAR = timedelta(days=365)
RENEWED_AFTER = timedelta(days=350)
ADRIFT_FROM = 92
"""Days before today on which the meter that goes out of tolerance came to the depot, calibrated."""

ADRIFT_FOUND = 6
"""Days before today on which it was found out of tolerance."""

ADRIFT = "VM-9"


@dataclass(frozen=True, slots=True)
class Person:
    """A key's label and its holder, and the device it may be bound to."""

    label: str
    holder: str


ENGINEER = Person("demo-register", "P. Ashdown")
AUTHOR = Person("demo-author", "M. Quillfeather")
ISSUER = Person("demo-limits", "J. Osterley")
FIELD = Person("demo-readings", "field handhelds")
AUDITOR = Person("demo-audit", "L. Wetherby")
MANAGER = Person("demo-admin", "C. Brankling")
READER = Person("demo-read", "T. Hollin")


@dataclass(frozen=True, slots=True)
class Technician:
    """Whom a visit names, and what is in the bag."""

    tester: str
    device: str
    meter: str
    coarse_box: str
    fine_box: str
    lines: tuple[str, ...]


TECHNICIANS = (
    Technician("T101", "HH-01", "VM-1", "SB-11", "SB-21", ("CB",)),
    Technician("T102", "HH-02", "VM-2", "SB-12", "SB-22", ("HM", "OS")),
    Technician("T103", "HH-03", "VM-3", "SB-13", "SB-23", ("LQ", "PS")),
    Technician("T104", "HH-04", "VM-4", "SB-14", "SB-24", ("TF", "DM", "MP")),
    Technician("T105", "HH-05", "VM-5", "SB-15", "SB-25", ("SW", "ER", "KF", "WM")),
)


def instruments(today: date, began_on: date) -> dict[str, Content]:
    """Every instrument with all its calibrations up to today."""
    found = {}
    for index, technician in enumerate(TECHNICIANS):
        first_on = began_on - timedelta(days=40 + 23 * index)
        for name, title, kind, step, unit in (
            (technician.meter, "Multimeter", "meter", 0.001, "V"),
            (technician.coarse_box, "Shunt box, 0.1 ohm steps", "shunt_box", 0.1, "Ohm"),
            (technician.fine_box, "Shunt box, 0.01 ohm steps", "shunt_box", 0.01, "Ohm"),
        ):
            calibrations = tuple(_yearly(first_on, today, step, unit))
            found[name] = Content(kind, title, f"{name}-{1000 + 7 * index}", calibrations)
    arrived_on, found_on = today - timedelta(days=ADRIFT_FROM), today - timedelta(days=ADRIFT_FOUND)
    adrift = (
        Calibration(arrived_on, arrived_on + YEAR, CalibrationResult.PASS, 0.5, 0.001, "V"),
        Calibration(found_on, found_on + YEAR, CalibrationResult.OUT_OF_TOLERANCE, 4.0, 0.001, "V"),
    )
    found[ADRIFT] = Content("meter", "Multimeter", f"{ADRIFT}-2044", adrift)
    return found


def _yearly(first_on: date, today: date, step: float, unit: str) -> Iterator[Calibration]:
    day = first_on
    while day <= today:
        result = CalibrationResult.PASS
        yield Calibration(day, day + YEAR, result, 0.5, step, unit, certificate=f"C-{day:%y%j}")
        day += RENEWED_AFTER
