"""What the service says of itself: its limits, quantities and tasks.

Nothing here belongs to a depot.
"""

from __future__ import annotations

from pydantic import ConfigDict

from service.api.schemas.base import Answer


class ServiceAnswer(Answer):
    """Version and the bounds that clients rely on."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "service": "shuntbook",
                    "version": "0.1.0",
                    "body_bytes": 2097152,
                    "batch_visits": 500,
                    "import_lines": 20000,
                    "page_size": 1000,
                    "remarks_characters": 2000,
                    "clock_skew_s": 300,
                    "clock_offset_caution_s": 120,
                    "caution": "Advice only.",
                }
            ]
        }
    )

    service: str
    version: str
    body_bytes: int
    batch_visits: int
    import_lines: int
    page_size: int
    remarks_characters: int
    clock_skew_s: int
    clock_offset_caution_s: int
    caution: str


class UnitAnswer(Answer):
    """A UCUM code and how many base units one of it is, as a decimal."""

    unit: str
    factor: str


class QuantityAnswer(Answer):
    """One quantity. `from_register`: judged from the track circuit's record, never from a reading."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "quantity": "relay_voltage",
                    "title": "Relay voltage",
                    "unit": "V",
                    "units": [{"unit": "V", "factor": "1"}],
                    "lowest": 0.0,
                    "highest": 1000.0,
                    "from_register": False,
                    "needs_shunt": False,
                }
            ]
        }
    )

    quantity: str
    title: str
    unit: str
    units: list[UnitAnswer]
    lowest: float
    highest: float
    from_register: bool
    needs_shunt: bool


class KnownTaskAnswer(Answer):
    """A task that some issued edition knows, and which."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "task": "shunt_test",
                    "title": "Shunt test",
                    "editions": [{"book": "harrow-vale-house", "edition": "2026"}],
                }
            ]
        }
    )

    task: str
    title: str | None
    editions: list[EditionName]


class EditionName(Answer):
    """An edition of a limit book."""

    book: str
    edition: str
