"""Circuits on the wire: the plain one, the section in its place, how far values wander; what answers share.

NumPy is loaded where a circuit is made of what was sent, so that the service starts without it.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Annotated, Any

from pydantic import Field, model_validator

from service.api.schemas.base import Answer, Name, Request
from service.application.equipment import Impedance
from service.errors import NoAnswerError

if TYPE_CHECKING:
    from service.electrical.circuit import PlainCircuit, Shunt

# Under these lowest values nothing in a track circuit is; they keep every quotient finite.
Volt = Annotated[float, Field(ge=1e-6, le=1e4)]
Ampere = Annotated[float, Field(ge=1e-6, le=1e5)]
Ohm = Annotated[float, Field(ge=0, le=1e6)]
SomeOhm = Annotated[float, Field(ge=1e-6, le=1e6)]
OhmKm = Annotated[float, Field(ge=1e-6, le=1e6)]
Metre = Annotated[float, Field(ge=1e-3, le=1e5)]
Position = Annotated[float, Field(ge=0, le=1e5)]
Factor = Annotated[float, Field(ge=0.1, le=10)]
Share = Annotated[float, Field(ge=1e-3, le=1)]
Celsius = Annotated[float, Field(ge=-60, le=120)]
RelativeU = Annotated[float, Field(ge=0, le=2)]

CAUTION = (
    "Worked out from a model, not measured. It authorises nothing, and defers to the railway's own rules and "
    "to a competent, licensed person."
)
SURFACE_CAUTION = (
    f"{CAUTION} It says nothing of rail surface: a wheel on rust or film is not a clamped shunt."
)

PLAIN_EXAMPLE: dict[str, Any] = {
    "frequency_hz": 0,
    "feed": {"emf_v": 10, "series_ohm": [7.2, 0]},
    "line": {"length_m": 1000, "loop_ohm_per_km": [0.0578, 0], "ballast_ohm_km": 10.6},
    "relay": {"impedance_ohm": [20, 0], "series_ohm": [0, 0], "pick_up_v": 1.62, "drop_away_v": 1.1},
}
"""A circuit of the university model of UK DC circuits, Space Weather 2023, in moderate ballast."""

NAMED_EXAMPLE: dict[str, Any] = {"depot": "harrow-vale", "section": "TV114"}


class FeedSent(Request):
    """A source, in phase with the reference, behind an impedance [resistance, reactance]."""

    emf_v: Volt
    series_ohm: Impedance


class LineSent(Request):
    """The rails: impedance of the loop of both; ballast from rail to rail, null for infinite."""

    length_m: Metre
    loop_ohm_per_km: Impedance
    ballast_ohm_km: OhmKm | None = None


class RelaySent(Request):
    """A relay, its working voltages at its own terminals; `series_ohm` is what stands before it."""

    impedance_ohm: Impedance
    series_ohm: Impedance | None = None
    pick_up_v: Volt
    drop_away_v: Volt


class CircuitSent(Request):
    """The plain circuit; 0 Hz is DC."""

    frequency_hz: Annotated[float, Field(ge=0, le=1e5)]
    feed: FeedSent
    line: LineSent
    relay: RelaySent

    def circuit(self) -> PlainCircuit:
        """The circuit; NotAcceptableError with a pointer for what no circuit has."""
        from service.application.circuit_cases import pointed
        from service.electrical.circuit import Feed, Line, PlainCircuit
        from service.electrical.relay import Relay

        feed, line, relay = self.feed, self.line, self.relay
        ballast_ohm_km = math.inf if line.ballast_ohm_km is None else line.ballast_ohm_km
        with pointed("/circuit"):
            return PlainCircuit(
                frequency_hz=self.frequency_hz,
                feed=Feed(feed.emf_v, complex(*feed.series_ohm)),
                line=Line(line.length_m, complex(*line.loop_ohm_per_km), ballast_ohm_km),
                relay=Relay(
                    complex(*relay.impedance_ohm),
                    complex(*(relay.series_ohm or (0.0, 0.0))),
                    relay.pick_up_v,
                    relay.drop_away_v,
                ),
            )


class ShuntSent(Request):
    """A resistance across the rails, its place from the feed end."""

    position_m: Position
    ohm: Ohm

    def shunt(self) -> Shunt:
        """The shunt."""
        from service.electrical.circuit import Shunt

        return Shunt(self.position_m, self.ohm)


class SpreadSent(Request):
    """How far values wander, each [low, high]; what is not stated is as registered, or does not wander.

    `supply`, `feed_ohm` and `loop_ohm` are factors, `pick_up` and `drop_away` the factors on the highest
    pick-up and the lowest drop-away of such a relay. `ballast_ohm_km` is [wettest, driest], null for
    infinite; `coil_c` the coldest and hottest coil of a DC relay. `local_follows`: a vane relay's local
    winding hangs on the feed's supply.
    """

    supply: tuple[Factor, Factor] | None = None
    feed_ohm: tuple[Factor, Factor] | None = None
    loop_ohm: tuple[Factor, Factor] | None = None
    ballast_ohm_km: tuple[OhmKm, OhmKm | None] | None = None
    pick_up: Factor | None = None
    drop_away: Factor | None = None
    coil_c: tuple[Celsius, Celsius] | None = None
    local_follows: bool | None = None

    def wandering(self) -> dict[str, Any]:
        """The members that are stated, as the electrical models name them."""
        stated = {name: value for name, value in self if value is not None}
        if self.ballast_ohm_km is not None:
            wet, dry = self.ballast_ohm_km
            stated["ballast_ohm_km"] = (wet, math.inf if dry is None else dry)
        return stated


class Asked(Request):
    """A plain circuit, or in its place a depot and the name of one of its sections."""

    circuit: CircuitSent | None = None
    depot: Name | None = None
    section: Name | None = None

    @model_validator(mode="after")
    def _one_of_both(self) -> Asked:
        named = (self.depot is not None, self.section is not None)
        if named not in ((True, True), (False, False)) or named[0] is (self.circuit is not None):
            raise ValueError("give a circuit, or a depot and one of its sections in its place")
        return self


class AskedWithSpread(Asked):
    """With `spread`, and for every registered section, the worst case is answered beside the nominal one."""

    spread: SpreadSent | None = None

    def wandering(self) -> dict[str, Any] | None:
        """What is stated of the spread; None if nothing was sent."""
        return None if self.spread is None else self.spread.wandering()


class Stated(Answer):
    """What every calculation states; `depot` and `section` null for what is not registered."""

    depot: str | None
    section: str | None
    model: str
    assumptions: list[str]
    caution: str


Phasor = tuple[float, float]
"""[real, imaginary], rms, against the feed's emf."""


def number(value: Any) -> float:
    """A real number that can be written.

    Raises
    ------
    NoAnswerError
        It is not finite.
    """
    found = float(value)
    if not math.isfinite(found):
        raise NoAnswerError("degenerate", "the circuit has no finite answer")
    return found


def number_or_null(value: Any) -> float | None:
    """A real number, null where it is infinite."""
    return None if math.isinf(value) else number(value)


def phasor(value: Any) -> Phasor:
    """A complex number as [real, imaginary]."""
    found = complex(value)
    return number(found.real), number(found.imag)
