"""A track circuit as a feed, a length of line and a relay, with equipment at either end or none.

The circuit, its operating point and the voltage between its rails. Shunt limits are in `shunt`,
circuits made from the equipment of a circuit kind in `presets`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import (
    Numbers,
    Path,
    PhasorLike,
    Phasors,
    RealLike,
    Reals,
    not_negative,
    passive,
    positive,
    positive_or_infinite,
)
from service.electrical.chain import TwoPort, cascade, ratio, series
from service.electrical.line import UniformLine
from service.electrical.relay import Relay, RelayState, state_of
from service.errors import NoAnswerError, NonPhysicalError


@dataclass(frozen=True, slots=True)
class Feed:
    """A source: emf [V], in phase with the reference, behind an impedance [ohm]."""

    emf_v: RealLike
    series_ohm: PhasorLike


@dataclass(frozen=True, slots=True)
class Line:
    """Length [m], loop impedance of both rails [ohm/km], ballast rail to rail, maybe infinite [ohm·km]."""

    length_m: RealLike
    loop_ohm_per_km: PhasorLike
    ballast_ohm_km: RealLike


@dataclass(frozen=True, slots=True)
class Element:
    """A named two-port between the feed or the relay and the rails: a transformer, a bond, a cable."""

    name: str
    two_port: TwoPort


@dataclass(frozen=True, slots=True)
class Shunt:
    """A resistance [ohm], zero allowed, across the rails at a distance from the feed end [m]."""

    position_m: RealLike
    ohm: RealLike


@dataclass(frozen=True, slots=True)
class PlainCircuit:
    """A feed, a line and a relay; `frequency_hz` is 0 for DC. Checked when made.

    Raises
    ------
    NonPhysicalError
        With the path of the value that no real circuit has, as `("line", "length_m")`.
    """

    frequency_hz: RealLike
    feed: Feed
    line: Line
    relay: Relay

    def __post_init__(self) -> None:
        """Refuse what no real circuit has."""
        not_negative(("frequency_hz",), self.frequency_hz)
        positive(("feed", "emf_v"), self.feed.emf_v)
        passive(("feed", "series_ohm"), self.feed.series_ohm)
        positive(("line", "length_m"), self.line.length_m)
        passive(("line", "loop_ohm_per_km"), self.line.loop_ohm_per_km)
        positive_or_infinite(("line", "ballast_ohm_km"), self.line.ballast_ohm_km)
        self.relay.check()
        impedances: tuple[tuple[Path, PhasorLike], ...] = (
            (("feed", "series_ohm"), self.feed.series_ohm),
            (("line", "loop_ohm_per_km"), self.line.loop_ohm_per_km),
            (("relay", "impedance_ohm"), self.relay.impedance_ohm),
            (("relay", "series_ohm"), self.relay.series_ohm),
        )
        for path, ohm in impedances:
            if np.any((np.asarray(self.frequency_hz) == 0) & (np.imag(ohm) != 0)):
                raise NonPhysicalError(path, "there is no reactance at 0 Hz")

    @property
    def feed_elements(self) -> tuple[Element, ...]:
        """Equipment between the feed and the rails, the feed's side first."""
        return ()

    @property
    def relay_elements(self) -> tuple[Element, ...]:
        """Equipment between the rails and the relay, the rails' side first."""
        return (Element("relay series", series(self.relay.series_ohm)),)

    @property
    def reach_m(self) -> tuple[Reals, Reals]:
        """Where a shunt may be put: from the feed end, first and last place [m]."""
        length_m = np.asarray(self.line.length_m, dtype=np.float64)
        return np.zeros_like(length_m), length_m


@dataclass(frozen=True, slots=True)
class EquippedCircuit(PlainCircuit):
    """A circuit with equipment between the feed and the rails and between the rails and the relay.

    Attributes
    ----------
    feed_end, relay_end : tuple of Element
        In order from the feed to the relay.
    tuned_zone_m : tuple of float
        Length at the feed end and at the relay end inside which the model gives no answer [m].
    """

    feed_end: tuple[Element, ...]
    relay_end: tuple[Element, ...]
    tuned_zone_m: tuple[float, float] = (0.0, 0.0)

    def __post_init__(self) -> None:
        """Refuse what no real circuit has."""
        PlainCircuit.__post_init__(self)
        if np.any(np.asarray(self.frequency_hz) == 0):
            for end in ("feed_end", "relay_end"):
                for at, element in enumerate(getattr(self, end)):
                    two = element.two_port
                    if any(np.any(np.imag(part) != 0) for part in (two.a, two.b, two.c, two.d)):
                        raise NonPhysicalError((end, at), f"there is no reactance at 0 Hz: {element.name}")
        for at, zone_m in enumerate(self.tuned_zone_m):
            not_negative(("tuned_zone_m", at), zone_m)
        if np.any(sum(self.tuned_zone_m) >= np.asarray(self.line.length_m)):
            raise NonPhysicalError(("tuned_zone_m",), "the tuned zones leave nothing of the line")

    @property
    def feed_elements(self) -> tuple[Element, ...]:
        """Equipment between the feed and the rails, the feed's side first."""
        return self.feed_end

    @property
    def relay_elements(self) -> tuple[Element, ...]:
        """Equipment between the rails and the relay, the rails' side first."""
        return (*self.relay_end, Element("relay series", series(self.relay.series_ohm)))

    @property
    def reach_m(self) -> tuple[Reals, Reals]:
        """Where a shunt may be put: between the tuned zones [m]."""
        length_m = np.asarray(self.line.length_m, dtype=np.float64)
        return np.full_like(length_m, self.tuned_zone_m[0]), length_m - self.tuned_zone_m[1]


@dataclass(frozen=True, slots=True)
class Ends:
    """A circuit brought down to what stands at its rails; what the closed forms work on.

    Attributes
    ----------
    emf_v, feed_ohm : array
        The feed as seen from the rails [V, ohm].
    relay_ohm : array
        What the rails see at the relay end [ohm].
    coil_per_rail : array
        Voltage at the coil for each volt between the rails at the relay end.
    line : UniformLine
        The whole line.
    """

    emf_v: Numbers
    feed_ohm: Numbers
    relay_ohm: Numbers
    coil_per_rail: Numbers
    line: UniformLine


def ends_of(circuit: PlainCircuit) -> Ends:
    """Bring a circuit down to its rails.

    Raises
    ------
    NoAnswerError
        Code `degenerate`.
    """
    number = np.real if np.all(np.asarray(circuit.frequency_hz) == 0) else np.asarray
    km = np.asarray(circuit.line.length_m) / 1000
    feed = cascade(*(element.two_port for element in circuit.feed_elements))
    emf_v, feed_ohm = feed.thevenin(np.asarray(circuit.feed.emf_v), np.asarray(circuit.feed.series_ohm))
    coil_ohm = np.asarray(circuit.relay.impedance_ohm)
    relay = cascade(*(element.two_port for element in circuit.relay_elements))
    return Ends(
        emf_v=number(emf_v),
        feed_ohm=number(feed_ohm),
        relay_ohm=number(relay.input_ohm(coil_ohm)),
        coil_per_rail=number(ratio(coil_ohm, relay.a * coil_ohm + relay.b, "the relay's share")),
        line=UniformLine.of(
            number(np.asarray(circuit.line.loop_ohm_per_km)) * km,
            km / np.asarray(circuit.line.ballast_ohm_km),
        ),
    )


@dataclass(frozen=True, slots=True)
class OperatingPoint:
    """Voltages [V] and currents [A] as rms phasors against the feed's emf, and what the relay does.

    `relay_v` is at the coil; `feed_current_a` flows into the rails at the feed end.
    """

    relay_v: Phasors
    relay_current_a: Phasors
    relay_end_rail_v: Phasors
    feed_end_rail_v: Phasors
    feed_current_a: Phasors
    relay_state: RelayState


def operating_point(circuit: PlainCircuit, shunt: Shunt | None = None) -> OperatingPoint:
    """Voltages and currents of a circuit, clear or with one shunt across the rails.

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.
    shunt : Shunt, optional
        A resistance across the rails; broadcasts with the circuit.

    Returns
    -------
    OperatingPoint
        Arrays of the broadcast shape.

    Raises
    ------
    NonPhysicalError
        Path `("shunt", ...)`: outside the section, or a negative resistance.
    NoAnswerError
        Code `degenerate`; code `tuned_zone` for a shunt inside one.

    Examples
    --------
    10 V behind 7.2 ohm, 1 km at 0.0289 ohm/km a rail and 10.63 ohm·km, a 20 ohm relay:

    >>> relay = Relay(20.0, 0.0, 1.62, 1.10)
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 10.63), relay)
    >>> round(float(operating_point(circuit).relay_current_a.real), 3)
    0.245
    """
    ends = ends_of(circuit)
    before, after, shunt_ohm = _around(circuit, ends, shunt)
    beyond_ohm = after.input_ohm(ends.relay_ohm)
    if shunt_ohm is None:
        here_ohm, passed = beyond_ohm, np.asarray(1.0)
    else:
        passed = ratio(shunt_ohm, shunt_ohm + beyond_ohm, "the current past the shunt")
        here_ohm = passed * beyond_ohm
    at_feed_ohm = before.input_ohm(here_ohm)
    feed_a = ratio(ends.emf_v, ends.feed_ohm + at_feed_ohm, "the feed current")
    relay_end_a = feed_a / (before.c * here_ohm + before.d) * passed / (after.c * ends.relay_ohm + after.d)
    relay_end_v = relay_end_a * ends.relay_ohm
    relay_v = relay_end_v * ends.coil_per_rail
    return OperatingPoint(
        relay_v=phasor(relay_v),
        relay_current_a=phasor(relay_v / np.asarray(circuit.relay.impedance_ohm)),
        relay_end_rail_v=phasor(relay_end_v),
        feed_end_rail_v=phasor(feed_a * at_feed_ohm),
        feed_current_a=phasor(feed_a),
        relay_state=state_of(circuit.relay, relay_v),
    )


def share_of(circuit: PlainCircuit, position_m: RealLike, path: Path) -> Reals:
    """Share of the line before a position, from 0 at the feed end to 1.

    Raises
    ------
    NonPhysicalError
        With `path`: outside the section.
    """
    not_negative(path, position_m)
    share: Reals = np.asarray(position_m) / np.asarray(circuit.line.length_m)
    if np.any(share > 1):
        raise NonPhysicalError(path, "lies outside the section")
    return share


def phasor(value: Numbers) -> Phasors:
    """Answer in complex numbers whatever the working was in."""
    return np.asarray(value, dtype=np.complex128)


def check_reach(circuit: PlainCircuit, position_m: RealLike) -> None:
    """Refuse a place inside a tuned zone, where the line is no model of the track.

    Raises
    ------
    NoAnswerError
        Code `tuned_zone`.
    """
    first_m, last_m = circuit.reach_m
    if np.any((np.asarray(position_m) < first_m) | (np.asarray(position_m) > last_m)):
        raise NoAnswerError("tuned_zone", "no linear model holds inside a tuned zone; ask outside it")


def _around(circuit: PlainCircuit, ends: Ends, shunt: Shunt | None) -> tuple[TwoPort, TwoPort, Reals | None]:
    if shunt is None:
        return series(0.0), ends.line.part(1.0), None
    not_negative(("shunt", "ohm"), shunt.ohm)
    share = share_of(circuit, shunt.position_m, ("shunt", "position_m"))
    check_reach(circuit, shunt.position_m)
    return ends.line.part(share), ends.line.part(1 - share), np.asarray(shunt.ohm, dtype=np.float64)
