"""Ballast from readings, on the wire.

What all calculations share is in `circuits`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any

from pydantic import ConfigDict, Field

from service.api.schemas.base import Answer, Request
from service.api.schemas.circuits import Asked, RelativeU, ShuntSent, Stated, Volt, number
from service.api.schemas.examples import shown

if TYPE_CHECKING:
    from service.application.ballast_estimates import Ballast, Readings, Trust
    from service.electrical.estimate import Reading

Doubt = Annotated[float, Field(ge=1e-4, le=2)]

_HELM: dict[str, Any] = {
    "frequency_hz": 0,
    "feed": {"emf_v": 4, "series_ohm": [5, 0]},
    "line": {"length_m": 1000, "loop_ohm_per_km": [0.34, 0], "ballast_ohm_km": None},
    "relay": {"impedance_ohm": [10, 0], "pick_up_v": 0.9, "drop_away_v": 0.6},
}
"""HELM Workbook 30, section 30.5, as a uniform line."""


class ReadingSent(Request):
    """A value and its standard uncertainty, both in the value's unit."""

    value: Volt
    u: Annotated[float, Field(ge=0, le=1e4)]

    def reading(self) -> Reading:
        """The reading."""
        from service.electrical.estimate import Reading

        return Reading(self.value, self.u)


class ReadingsSent(Request):
    """Voltages between the rails at both ends; currents into the rails at the feed end and out of them."""

    feed_v: ReadingSent
    relay_v: ReadingSent
    feed_a: ReadingSent | None = None
    relay_a: ReadingSent | None = None

    def readings(self) -> Readings:
        """What is asked of the application."""
        from service.application.ballast_estimates import Readings

        feed_a = None if self.feed_a is None else self.feed_a.reading()
        relay_a = None if self.relay_a is None else self.relay_a.reading()
        return Readings(self.feed_v.reading(), self.relay_v.reading(), feed_a, relay_a)


class DoubtSent(Request):
    """Relative standard uncertainty of an AC circuit's own values, with which its readings are weighed."""

    ballast: Doubt
    emf: Doubt
    feed_ohm: Doubt
    loop_ohm: Doubt
    drop_away: Doubt


class BallastSent(Asked):
    """Readings of one moment. The rails' impedance is held at the circuit's; its ballast is not used in DC.

    A DC current that was not measured is derived from the feed's or the relay's resistance, known to
    `feed_relative_u` and `relay_relative_u`. An AC circuit is fitted by size and needs `doubt`.
    `drop_shunt` is one that was measured at that moment.
    """

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "circuit": _HELM,
                    "readings": {
                        "feed_v": {"value": 1.31597, "u": 0.0066},
                        "feed_a": {"value": 0.53681, "u": 0.0027},
                        "relay_v": {"value": 1.20526, "u": 0.006},
                        "relay_a": {"value": 0.120526, "u": 0.0006},
                    },
                    "loop_relative_u": 0.05,
                    "drop_shunt": {"position_m": 1000, "ohm": 0.4},
                }
            ]
        }
    )

    readings: ReadingsSent
    loop_relative_u: RelativeU | None = None
    feed_relative_u: RelativeU | None = None
    relay_relative_u: RelativeU | None = None
    doubt: DoubtSent | None = None
    drop_shunt: ShuntSent | None = None

    def trust(self) -> Trust:
        """What is asked of the application."""
        from service.application.ballast_estimates import Trust
        from service.electrical.fit import Doubt as Fitted

        fitted = None if self.doubt is None else Fitted(**dict(self.doubt))
        return Trust(self.loop_relative_u, self.feed_relative_u, self.relay_relative_u, fitted)


class ExactAnswer(Answer):
    """Rail impedance and ballast together, null with the reason where the readings cannot tell them."""

    loop_ohm_per_km: float | None
    ballast_ohm_km: float | None
    reason: str | None


class BallastAnswer(Stated):
    """Ballast and its relative standard uncertainty; null what an AC circuit or these readings do not give.

    `handbook_ohm_km` is the handbook formula's, which reads high. `working_drop_away_v` is the coil voltage
    at which the measured drop shunt released the relay.
    """

    model_config = ConfigDict(json_schema_extra=shown("ballast"))

    ballast_ohm_km: float
    relative_u: float
    handbook_ohm_km: float | None
    exact: ExactAnswer | None
    working_drop_away_v: float | None


def ballast_values(found: Ballast) -> dict[str, Any]:
    """The members of a ballast estimate."""
    exact = found.exact
    loop, ohm_km = (None, None) if exact is None or exact.pair is None else map(number, exact.pair)
    return {
        "ballast_ohm_km": number(found.ballast_ohm_km),
        "relative_u": number(found.relative_u),
        "handbook_ohm_km": None if found.handbook_ohm_km is None else number(found.handbook_ohm_km),
        "exact": None
        if exact is None
        else ExactAnswer(loop_ohm_per_km=loop, ballast_ohm_km=ohm_km, reason=exact.reason),
        "working_drop_away_v": None
        if found.working_drop_away_v is None
        else number(found.working_drop_away_v),
    }
