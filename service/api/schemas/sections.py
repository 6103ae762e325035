"""Sections on the wire.

Equipment and layout are the types of the register itself.
"""

from __future__ import annotations

from datetime import date
from typing import Annotated, Any

from pydantic import ConfigDict, Field, JsonValue, StringConstraints

from service.api.schemas.base import Answer, Instant, Line, Name, Request
from service.api.schemas.status import SUMMARY, SummaryAnswer
from service.api.whole import IGNORED
from service.application.equipment import Equipment, TestPoint
from service.application.layouts import Layout
from service.application.section_content import CONFIGURATION, Boundary, Configuration, Content
from service.application.section_lists import Listed
from service.application.sections import Recorded
from service.rules.words import (
    Bonding,
    CircuitKind,
    Place,
    SectionState,
    Separation,
    Sleepers,
    Traction,
)

_SERVED: dict[str, JsonValue] = {"depot": "harrow-vale", "section": "TV114", "version": 1}
_EXAMPLE: dict[str, JsonValue] = {
    "valid_from_on": "2026-11-02",
    "title": "TV 114",
    "state": "in_use",
    "line_name": "Harrow Vale main",
    "from_km": 12.4,
    "to_km": 13.21,
    "length_m": 812.5,
    "circuit_kind": "dc",
    "traction": "none",
    "return_rails": 0,
    "place": "block",
    "sleepers": "wood",
    "commissioned_on": "1994-05-01",
    "book": "harrow-vale-house",
    "required_test_points": ["feed_end", "relay_end"],
    "configuration": {
        "points_ends": 0,
        "insulated_joints": 4,
        "bonding": "series",
        "longest_parallel_m": 0,
        "bonds_duplicated": True,
        "interrupter_required": False,
        "interrupter_fitted": False,
        "train_frequency": "hourly",
    },
    "adjacent": [{"boundary": "J12", "neighbour": "TV115", "separation": "joint", "polarity": "+"}],
    "equipment": None,
    "layout": None,
    "succeeds": None,
    "asset_reference": "SIG-004711",
}

Kilometres = Annotated[float, Field(ge=-1e5, le=1e5)]
Length = Annotated[float, Field(gt=0, le=1e5)]
Count = Annotated[int, Field(ge=0, le=1000)]
Polarity = Annotated[str, StringConstraints(pattern=r"^[^\x00-\x1f\x7f;]{1,40}$")]
"""Polarity, phase or frequency, as both records write it."""


class ConfigurationSent(Request):
    points_ends: Count | None = None
    insulated_joints: Count | None = None
    bonding: Bonding | None = None
    longest_parallel_m: Annotated[float, Field(ge=0, le=1e5)] | None = None
    bonds_duplicated: bool | None = None
    interrupter_required: bool | None = None
    interrupter_fitted: bool | None = None
    train_frequency: Line | None = None


class BoundarySent(Request):
    """One boundary; the neighbour's record calls it by the same name."""

    boundary: Name
    neighbour: Name | None = None
    separation: Separation
    polarity: Polarity | None = None


class SectionSent(Request):
    """The editable members of a section. `valid_from_on` not stated is the depot's today."""

    valid_from_on: date | None = None
    title: Line | None = None
    state: SectionState
    line_name: Line | None = None
    from_km: Kilometres | None = None
    to_km: Kilometres | None = None
    length_m: Length | None = None
    circuit_kind: CircuitKind
    traction: Traction
    return_rails: Annotated[int, Field(ge=0, le=2)] | None = None
    place: Place | None = None
    sleepers: Sleepers | None = None
    commissioned_on: date | None = None
    book: Name | None = None
    required_test_points: Annotated[list[TestPoint], Field(max_length=100)]
    configuration: ConfigurationSent | None = None
    adjacent: Annotated[list[BoundarySent], Field(max_length=100)] | None = None
    equipment: Equipment | None = None
    layout: Layout | None = None
    succeeds: Name | None = None
    asset_reference: Line | None = None

    def content(self) -> Content:
        """What the register is asked to say."""
        given = self.configuration or ConfigurationSent()
        return Content(
            **{name: getattr(self, name) for name in _PLAIN},
            required_test_points=tuple(self.required_test_points),
            configuration=Configuration(**{name: getattr(given, name) for name in CONFIGURATION}),
            adjacent=tuple(
                Boundary(one.boundary, one.neighbour, one.separation, one.polarity)
                for one in self.adjacent or ()
            ),
            equipment=self.equipment,
            layout=self.layout,
        )


_MAPPED = ("required_test_points", "configuration", "adjacent", "equipment", "layout")
_PLAIN = tuple(name for name in SectionSent.model_fields if name not in _MAPPED)


class SectionDraft(SectionSent):
    """A new section."""

    model_config = ConfigDict(json_schema_extra={"examples": [_EXAMPLE | {"section": "TV114"}]})

    section: Name


class SectionEdit(SectionSent):
    """Every editable member, at whatever depth; the others are the service's own and ignored."""

    model_config = ConfigDict(
        json_schema_extra={"examples": [_EXAMPLE], "required": list(SectionSent.model_fields)}
    )

    depot: object = Field(default=None, description=IGNORED)
    section: object = Field(default=None, description=IGNORED)
    version: object = Field(default=None, description=IGNORED)
    sequence: object = Field(default=None, description=IGNORED)
    status: object = Field(default=None, description=IGNORED)
    recorded_at: object = Field(default=None, description=IGNORED)
    recorded_by: object = Field(default=None, description=IGNORED)


class SectionLine(SectionDraft):
    """A line of a file; `version` is the one it was made from, null for a new section."""

    version: int | None = None


class ConfigurationAnswer(Answer):
    points_ends: int | None
    insulated_joints: int | None
    bonding: Bonding | None
    longest_parallel_m: float | None
    bonds_duplicated: bool | None
    interrupter_required: bool | None
    interrupter_fitted: bool | None
    train_frequency: str | None


class BoundaryAnswer(Answer):
    boundary: str
    neighbour: str | None
    separation: Separation
    polarity: str | None


class ContentAnswer(Answer):
    """What every answer about a section says of it."""

    depot: str
    section: str
    version: int
    valid_from_on: date | None
    title: str | None
    state: SectionState
    line_name: str | None
    from_km: float | None
    to_km: float | None
    length_m: float | None
    circuit_kind: CircuitKind
    traction: Traction
    return_rails: int | None
    place: Place | None
    sleepers: Sleepers | None
    commissioned_on: date | None
    book: str | None
    required_test_points: list[str]
    configuration: ConfigurationAnswer
    adjacent: list[BoundaryAnswer]
    equipment: Equipment | None
    layout: Layout | None
    succeeds: str | None
    asset_reference: str | None


class SectionAnswer(ContentAnswer):
    """A section's present record. `sequence`: the journal's when its record or status last changed."""

    model_config = ConfigDict(json_schema_extra={"examples": [_EXAMPLE | _SERVED | {"sequence": 8}]})

    sequence: int


class SectionVersionAnswer(ContentAnswer):
    """One version of a section's record, with who recorded it and when."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                _EXAMPLE | _SERVED | {"recorded_at": "2026-11-01T08:00:00Z", "recorded_by": "A. Engineer"}
            ]
        }
    )

    recorded_at: Instant
    recorded_by: str


class ListedAnswer(SectionAnswer):
    """A section in a list, with its status in short."""

    model_config = ConfigDict(
        json_schema_extra={"examples": [_EXAMPLE | _SERVED | {"sequence": 8, "status": SUMMARY}]}
    )

    status: SummaryAnswer


class ImportAnswer(Answer):
    """What an import did, or with `dry_run` would do. `sequence` null: nothing was written."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [{"dry_run": False, "created": 240, "changed": 0, "unchanged": 0, "sequence": 241}]
        }
    )

    dry_run: bool
    created: int
    changed: int
    unchanged: int
    sequence: int | None


def _members(recorded: Recorded) -> dict[str, Any]:
    names = {"depot": recorded.depot, "section": recorded.section, "version": recorded.version}
    return names | {name: getattr(recorded.content, name) for name in SectionSent.model_fields}


def section_answer(recorded: Recorded) -> SectionAnswer:
    """The present record of a section."""
    return SectionAnswer.model_validate(_members(recorded) | {"sequence": recorded.sequence})


def version_answer(recorded: Recorded) -> SectionVersionAnswer:
    """One version of a section."""
    when = {"recorded_at": recorded.recorded_at, "recorded_by": recorded.recorded_by}
    return SectionVersionAnswer.model_validate(_members(recorded) | when)


def listed_answer(listed: Listed) -> ListedAnswer:
    """One row of the list."""
    own = {"sequence": listed.section.sequence, "status": listed.status}
    return ListedAnswer.model_validate(_members(listed.section) | own)
