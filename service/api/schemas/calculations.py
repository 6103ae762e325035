"""Operating point, shunt limits and season on the wire.

A plain circuit is answered as it stands; a registered one, or one with a spread, as `nominal` and
`worst_case`. What all calculations share is in `circuits`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Literal

from pydantic import ConfigDict, RootModel

from service.api.schemas.base import Answer
from service.api.schemas.circuits import (
    NAMED_EXAMPLE,
    PLAIN_EXAMPLE,
    AskedWithSpread,
    OhmKm,
    Phasor,
    ShuntSent,
    SomeOhm,
    Stated,
    number,
    number_or_null,
    phasor,
)
from service.api.schemas.examples import shown

if TYPE_CHECKING:
    from service.application.calculations import Limits, Point
    from service.application.circuits import Weather
    from service.electrical.relay import RelayState
    from service.electrical.season import Season
    from service.electrical.shunt import Along

RelayWord = Literal["picks_up", "holds", "released"]
Interval = tuple[float, float | None]
"""From and to; null is infinite."""

RELEASED = "released with no train: no shunt is the largest that releases the relay"
NOT_PICKED_UP = "does not pick up with no train: no shunt is the smallest at which it does"


class PointSent(AskedWithSpread):
    """A circuit, and a shunt across its rails if there is one."""

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {"circuit": PLAIN_EXAMPLE},
                NAMED_EXAMPLE | {"shunt": {"position_m": 400, "ohm": 0.5}},
            ]
        }
    )

    shunt: ShuntSent | None = None


class LimitsSent(AskedWithSpread):
    """A circuit."""

    model_config = ConfigDict(json_schema_extra={"examples": [{"circuit": PLAIN_EXAMPLE}, NAMED_EXAMPLE]})


class SeasonSent(AskedWithSpread):
    """A circuit whose own ballast is left aside, the range of ballast, and the shunt that must release.

    For a registered section what is not stated is taken from its record and its limit book; else
    `dry_ohm_km` null is infinite and the others are needed.
    """

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {"circuit": PLAIN_EXAMPLE, "wet_ohm_km": 3, "dry_ohm_km": None, "minimum_shunt_ohm": 1.0}
            ]
        }
    )

    wet_ohm_km: OhmKm | None = None
    dry_ohm_km: OhmKm | None = None
    minimum_shunt_ohm: SomeOhm | None = None


class ElementAnswer(Answer):
    """One element: voltage and current into its port towards the feed, and the power it takes."""

    name: str
    voltage_v: Phasor
    current_a: Phasor
    power_w: float


class RailAnswer(Answer):
    """Voltage between the rails at a place from the feed end."""

    position_m: float
    rail_v: Phasor


class PointValues(Answer):
    """Voltages and currents as [real, imaginary] against the feed's emf; the relay's at its coil."""

    relay_v: Phasor
    relay_current_a: Phasor
    relay_end_rail_v: Phasor
    feed_end_rail_v: Phasor
    feed_current_a: Phasor
    relay_state: RelayWord
    elements: list[ElementAnswer]
    rails: list[RailAnswer]


class PointAnswer(PointValues, Stated):
    """The operating point of a circuit as it stands."""


class PointCasesAnswer(Stated):
    """Nominal, and the worst case: the clear one with no shunt, the occupied one with a shunt."""

    nominal: PointValues
    worst_case: PointValues


class PointReply(RootModel[PointAnswer | PointCasesAnswer]):
    """As it stands, or with its worst case beside it."""

    model_config = ConfigDict(json_schema_extra=shown("operating-point"))


class PlaceAnswer(Answer):
    """The smallest value along the section, and where it is from the feed end."""

    position_m: float
    ohm: float


class AlongAnswer(Answer):
    """A shunt limit along the section."""

    feed_end: float
    middle: float
    relay_end: float
    worst: PlaceAnswer


class LiftingAnswer(Answer):
    """Shunts that would pick up a relay that is down with no train, where their range is widest."""

    position_m: float
    from_ohm: float
    to_ohm: float


class LimitsValues(Answer):
    """Drop shunt and pick-up shunt, null with the reason where there is none.

    `lifting_shunt`: a vane relay that is down can be lifted by these shunts.
    """

    relay_clear_v: Phasor
    drop_shunt_ohm: AlongAnswer | None
    drop_shunt_reason: str | None
    pick_up_shunt_ohm: AlongAnswer | None
    pick_up_shunt_reason: str | None
    lifting_shunt: LiftingAnswer | None


class LimitsAnswer(LimitsValues, Stated):
    """Shunt limits of a circuit as it stands."""


class LimitsCasesAnswer(Stated):
    """Nominal, and the occupied case."""

    nominal: LimitsValues
    worst_case: LimitsValues


class LimitsReply(RootModel[LimitsAnswer | LimitsCasesAnswer]):
    """As it stands, or with its worst case beside it."""

    model_config = ConfigDict(json_schema_extra=shown("shunt-limits"))


class SeasonPoint(Answer):
    """One ballast, null for infinite; the drop shunt is null where the relay is released with no train."""

    ballast_ohm_km: float | None
    relay_v: Phasor
    drop_shunt_ohm: float | None


class SeasonValues(Answer):
    """Ballast in which the relay picks up, in which it holds, in which the shunt releases it; the curve."""

    picks_up: list[Interval]
    holds: list[Interval]
    shunts: list[Interval]
    curve: list[SeasonPoint]


class SeasonAnswer(SeasonValues, Stated):
    """A season of a circuit as it stands; what was not stated is answered as it was taken."""

    wet_ohm_km: float
    dry_ohm_km: float | None
    minimum_shunt_ohm: float


class SeasonCasesAnswer(Stated):
    """Nominal, and the worst cases: the clear one for the relay, the occupied one for its shunt."""

    wet_ohm_km: float
    dry_ohm_km: float | None
    minimum_shunt_ohm: float
    nominal: SeasonValues
    worst_case: SeasonValues


class SeasonReply(RootModel[SeasonAnswer | SeasonCasesAnswer]):
    """As it stands, or with its worst case beside it."""

    model_config = ConfigDict(json_schema_extra=shown("season"))


def relay_word(state: RelayState) -> RelayWord:
    """What one relay does."""
    if bool(state.picks_up):
        return "picks_up"
    return "released" if bool(state.released) else "holds"


def point_values(found: Point) -> dict[str, Any]:
    """The members of an operating point."""
    at = found.at
    names = ("relay_v", "relay_current_a", "relay_end_rail_v", "feed_end_rail_v", "feed_current_a")
    return {name: phasor(getattr(at, name)) for name in names} | {
        "relay_state": relay_word(at.relay_state),
        "elements": [
            ElementAnswer(
                name=element.name,
                voltage_v=phasor(element.voltage_v),
                current_a=phasor(element.current_a),
                power_w=number(element.power_w),
            )
            for element in found.elements
        ],
        "rails": [RailAnswer(position_m=place, rail_v=phasor(volts)) for place, volts in found.rails],
    }


def limits_values(found: Limits) -> dict[str, Any]:
    """The members of shunt limits."""
    limits, lifting = found.limits, found.lifting
    released, down = bool(limits.released), bool(limits.not_picked_up)
    return {
        "relay_clear_v": phasor(limits.relay_clear_v),
        "drop_shunt_ohm": None if released else _along(limits.drop_shunt_ohm),
        "drop_shunt_reason": RELEASED if released else None,
        "pick_up_shunt_ohm": None if down else _along(limits.pick_up_shunt_ohm),
        "pick_up_shunt_reason": NOT_PICKED_UP if down else None,
        "lifting_shunt": None if lifting is None else LiftingAnswer.model_validate(lifting),
    }


def season_range(weather: Weather) -> dict[str, Any]:
    """The members that say what a season was worked out for."""
    return {
        "wet_ohm_km": weather.wet_ohm_km,
        "dry_ohm_km": number_or_null(weather.dry_ohm_km),
        "minimum_shunt_ohm": weather.minimum_shunt_ohm,
    }


def season_values(found: Season) -> dict[str, Any]:
    """The members of a season."""
    columns = zip(found.ballast_ohm_km, found.relay_v, found.drop_shunt_ohm, strict=True)
    return {
        "picks_up": [_interval(span) for span in found.picks_up],
        "holds": [_interval(span) for span in found.holds],
        "shunts": [_interval(span) for span in found.shunts],
        "curve": [
            SeasonPoint(
                ballast_ohm_km=number_or_null(ballast),
                relay_v=phasor(volts),
                drop_shunt_ohm=number_or_null(ohm),
            )
            for ballast, volts, ohm in columns
        ],
    }


def _along(along: Along) -> AlongAnswer:
    return AlongAnswer(
        feed_end=number(along.feed_end),
        middle=number(along.middle),
        relay_end=number(along.relay_end),
        worst=PlaceAnswer(position_m=number(along.worst.position_m), ohm=number(along.worst.ohm)),
    )


def _interval(span: tuple[float, float]) -> Interval:
    return number(span[0]), number_or_null(span[1])
