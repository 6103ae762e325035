"""From a section of the register to its electrical circuit, and how far the circuit's values wander.

Every number of the record that a model needs is looked up here, and what is missing is named. Circuits
that are sent are in `circuit_cases`; the models themselves know no register.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from datetime import datetime
from typing import Any

import numpy as np
from sqlalchemy.engine import Connection

from service.application import section_limits, sections
from service.application.circuit_cases import (
    LINE_ASSUMPTIONS,
    PLAIN_MODEL,
    Cases,
    spread_assumptions,
    steady,
    widened,
)
from service.application.section_content import Content
from service.application.section_limits import SectionLimits
from service.electrical.changes import Spread
from service.electrical.circuit import EquippedCircuit, Feed, Line, PlainCircuit
from service.electrical.presets import (
    RailEnd,
    ac_double_rail,
    ac_single_rail,
    direct_current,
    refuse_without_model,
)
from service.electrical.relay import Relay, VaneRelay
from service.errors import Fault, NoAnswerError, NonPhysicalError, NotAcceptableError
from service.rules.words import CircuitKind

_MODELS = {
    CircuitKind.DC: PLAIN_MODEL,
    CircuitKind.DC_AC_IMMUNE: PLAIN_MODEL,
    CircuitKind.AC_SINGLE_RAIL: PLAIN_MODEL,
    CircuitKind.AC_DOUBLE_RAIL: (
        "A feed, its transformer, an impedance bond, a uniform line, an impedance bond, a transformer and a "
        "relay, solved exactly in the steady state at the signalling frequency."
    ),
    CircuitKind.AUDIO_FREQUENCY: (
        "A transmitter, a uniform line and a receiver that is a threshold at one frequency, solved exactly "
        "in the steady state between the tuned zones."
    ),
}

_COMMON = (
    "feed.emf_v",
    "feed.series_ohm",
    "line.loop_ohm_per_km",
    "relay.impedance_ohm",
    "ballast_wet_ohm_km",
    "ballast_dry_ohm_km",
)
_NEEDED: Mapping[CircuitKind, tuple[str, ...]] = {
    CircuitKind.DC: _COMMON,
    CircuitKind.DC_AC_IMMUNE: _COMMON,
    CircuitKind.AC_SINGLE_RAIL: (*_COMMON, "frequency_hz"),
    CircuitKind.AC_DOUBLE_RAIL: (
        *_COMMON,
        "frequency_hz",
        "feed_transformer_ratio",
        "relay_transformer_ratio",
        "feed_bond.impedance_ohm",
        "relay_bond.impedance_ohm",
    ),
    CircuitKind.AUDIO_FREQUENCY: (*_COMMON, "frequency_hz", "feed_tuned_zone_m", "relay_tuned_zone_m"),
}
_LOCAL = ("local_v", "local_angle_deg", "rated_local_v", "ideal_angle_deg")
"""What a vane relay is known by: a relay with any of these needs them all."""


@dataclass(frozen=True, slots=True)
class Registered:
    """A section's circuit, with what else of its record and its limit book calculations ask for.

    `dry_ohm_km` is the book's dry ballast, infinite where it names none; `minimum_shunt_ohm` the highest
    minimum of the drop shunt that applies today, if any does.
    """

    cases: Cases
    content: Content
    dry_ohm_km: float
    minimum_shunt_ohm: float | None


def of_section(
    connection: Connection,
    depot: str,
    section: str,
    now: datetime,
    wandering: Mapping[str, Any] | None = None,
) -> Registered:
    """The circuit of a section's present record; what `wandering` says goes before the register.

    Raises
    ------
    NotFoundError
        No such section.
    NotAcceptableError
        The record lacks what the model needs, each member named, or says what no circuit has.
    NoAnswerError
        The circuit kind has no linear model, or the section several receivers.
    """
    content = sections.get(connection, depot, section).content
    refuse_without_model(content.circuit_kind.value)
    missing = tuple(_missing(content))
    if missing:
        raise not_registered(missing)
    if (_said(content, "receivers") or 0) > 1:
        raise NoAnswerError("several_receivers", "the section has several receivers and the model has one")
    limits = section_limits.of_section(connection, depot, section, now)
    book_dry_ohm_km = None if limits.edition is None else limits.edition.dry_ballast_ohm_km
    dry_ohm_km = math.inf if book_dry_ohm_km is None else book_dry_ohm_km
    try:
        circuit = _circuit(content)
        spread = _registered_spread(content, circuit, dry_ohm_km)
    except NonPhysicalError as error:
        fault = Fault("not_physical", f"the register says {error}", "/section")
        raise NotAcceptableError("The register says of this section what no circuit has.", (fault,)) from None
    spread = widened(spread, circuit, wandering or {})
    assumptions = (*LINE_ASSUMPTIONS, *_assumptions(content), *spread_assumptions(spread, circuit))
    cases = Cases(circuit, spread, _MODELS[content.circuit_kind], assumptions)
    return Registered(cases, content, dry_ohm_km, _minimum_shunt_ohm(limits))


@dataclass(frozen=True, slots=True)
class Weather:
    """The range of ballast, the dry end maybe infinite [ohm·km], and the shunt that must release [ohm]."""

    wet_ohm_km: float
    dry_ohm_km: float
    minimum_shunt_ohm: float


def weather(
    wet_ohm_km: float | None,
    dry_ohm_km: float | None,
    minimum_shunt_ohm: float | None,
    registered: Registered | None,
    at: str = "",
) -> Weather:
    """What is stated, and of a registered section what its record and book say of the rest.

    Raises
    ------
    NotAcceptableError
        Something is stated nowhere; the pointer begins with `at`.
    """
    if registered is not None:
        spread = registered.cases.spread
        assert spread is not None
        wet_ohm_km = spread.ballast_ohm_km[0] if wet_ohm_km is None else wet_ohm_km
        dry_ohm_km = registered.dry_ohm_km if dry_ohm_km is None else dry_ohm_km
        if minimum_shunt_ohm is None:
            minimum_shunt_ohm = registered.minimum_shunt_ohm
    if wet_ohm_km is not None and minimum_shunt_ohm is not None:
        return Weather(wet_ohm_km, math.inf if dry_ohm_km is None else dry_ohm_km, minimum_shunt_ohm)
    stated = {"wet_ohm_km": wet_ohm_km, "minimum_shunt_ohm": minimum_shunt_ohm}
    reason = (
        "must be given" if registered is None else "must be given: no limit book says it for this section"
    )
    faults = (Fault("missing", reason, f"{at}/{name}") for name, value in stated.items() if value is None)
    raise NotAcceptableError("The weather or the shunt to work with is not stated.", tuple(faults))


def not_registered(members: tuple[str, ...]) -> NotAcceptableError:
    """The refusal of a section whose record lacks members that a calculation needs."""
    faults = (Fault("not_registered", f"the register does not say {name}", "/section") for name in members)
    return NotAcceptableError("The register lacks what this calculation needs.", tuple(faults))


def _said(content: Content, path: str) -> Any:
    """What the equipment says at a dotted path; None where it is silent on any part of it."""
    at: Any = content.equipment
    for name in path.split("."):
        at = getattr(at, name, None)
    return at


def _missing(content: Content) -> Iterator[str]:
    if content.length_m is None:
        yield "length_m"
    for path in _NEEDED[content.circuit_kind]:
        if _said(content, path) is None:
            yield f"equipment.{path}"
    for figure in ("pick_up", "drop_away"):
        if not any(_said(content, f"relay.{kind}_{figure}_{unit}") for kind, unit in _FIGURES):
            yield f"equipment.relay.bench_{figure}_v"
    if _has_local_winding(content):
        yield from (f"equipment.relay.{name}" for name in _LOCAL if _said(content, f"relay.{name}") is None)


_FIGURES = (("bench", "v"), ("bench", "a"), ("rated", "v"), ("rated", "a"))
"""Where a relay's working values may stand: its own bench test goes before the data of its type."""


def _has_local_winding(content: Content) -> bool:
    return any(_said(content, f"relay.{name}") is not None for name in _LOCAL)


def _figures(content: Content, figure: str) -> list[float]:
    """Every pick-up or drop-away voltage that the register says, the one that counts first [V]."""
    size = abs(complex(*_said(content, "relay.impedance_ohm")))
    found = []
    for kind, unit in _FIGURES:
        value = _said(content, f"relay.{kind}_{figure}_{unit}")
        if value is not None:
            found.append(value * (size if unit == "a" else 1.0))
    return found


def _circuit(content: Content) -> PlainCircuit:
    """The circuit as registered, its ballast half-way between wet and dry by ratio."""
    fixed_ohm, adjustable_ohm = (
        complex(*_said(content, "feed.series_ohm")),
        _said(content, "feed.adjustable_ohm"),
    )
    feed = Feed(_said(content, "feed.emf_v"), fixed_ohm + (adjustable_ohm or 0.0))
    assert content.length_m is not None
    ballast = math.sqrt(_said(content, "ballast_wet_ohm_km") * _said(content, "ballast_dry_ohm_km"))
    line = Line(content.length_m, complex(*_said(content, "line.loop_ohm_per_km")), ballast)
    relay, hz = _relay(content), _said(content, "frequency_hz")
    direct = RailEnd(1.0, 0.0)
    if content.circuit_kind is CircuitKind.AC_SINGLE_RAIL:
        return ac_single_rail(hz, feed, direct, line, direct, relay)
    if content.circuit_kind is CircuitKind.AC_DOUBLE_RAIL:
        return ac_double_rail(
            hz,
            feed,
            RailEnd(_said(content, "feed_transformer_ratio"), 0.0),
            complex(*_said(content, "feed_bond.impedance_ohm")),
            line,
            complex(*_said(content, "relay_bond.impedance_ohm")),
            # The register counts both ratios from the feed to the relay, the model from the rails out.
            RailEnd(1 / _said(content, "relay_transformer_ratio"), 0.0),
            relay,
        )
    if content.circuit_kind is CircuitKind.AUDIO_FREQUENCY:
        zones_m = (_said(content, "feed_tuned_zone_m"), _said(content, "relay_tuned_zone_m"))
        return EquippedCircuit(hz, feed, line, relay, (), (), zones_m)
    return direct_current(feed, 0.0, line, 0.0, relay)


def _relay(content: Content) -> Relay:
    relay = Relay(
        impedance_ohm=complex(*_said(content, "relay.impedance_ohm")),
        series_ohm=complex(*(_said(content, "relay.series_ohm") or (0.0, 0.0))),
        pick_up_v=_figures(content, "pick_up")[0],
        drop_away_v=_figures(content, "drop_away")[0],
    )
    if not _has_local_winding(content):
        return relay
    local_v, local_deg, rated_v, ideal_deg = (_said(content, f"relay.{name}") for name in _LOCAL)
    return VaneRelay(
        relay.impedance_ohm,
        relay.series_ohm,
        relay.pick_up_v,
        relay.drop_away_v,
        local_v * np.exp(1j * math.radians(local_deg)),
        rated_v,
        math.radians(ideal_deg),
    )


def _registered_spread(content: Content, circuit: PlainCircuit, dry_ohm_km: float) -> Spread:
    """How far the register lets values wander; a range never excludes the value as it stands."""

    def factors(low: float | None, high: float | None, stands: float) -> tuple[float, float]:
        if stands == 0:
            return (1.0, 1.0)
        low, high = (stands if end is None else end for end in (low, high))
        return min(low, stands) / stands, max(high, stands) / stands

    low, high = (_said(content, f"line.loop_{end}_ohm_per_km") for end in ("low", "high"))
    pick_up, drop_away = _figures(content, "pick_up"), _figures(content, "drop_away")
    wet_ohm_km = _said(content, "ballast_wet_ohm_km")
    return replace(
        steady((min(wet_ohm_km, dry_ohm_km), dry_ohm_km)),
        supply=factors(
            _said(content, "feed.emf_low_v"), _said(content, "feed.emf_high_v"), float(circuit.feed.emf_v)
        ),
        loop_ohm=factors(
            None if low is None else abs(complex(*low)),
            None if high is None else abs(complex(*high)),
            abs(complex(circuit.line.loop_ohm_per_km)),
        ),
        pick_up=max(pick_up) / pick_up[0],
        drop_away=min(drop_away) / drop_away[0],
    )


def _minimum_shunt_ohm(limits: SectionLimits) -> float | None:
    minima = [
        bounds.min
        for applied in limits.limits
        for bounds in applied.bounds
        if applied.limit.quantity == "drop_shunt" and bounds.min is not None
    ]
    return max(minima, default=None)


def _assumptions(content: Content) -> Iterator[str]:
    yield "Nominal ballast is the geometric mean of the register's wet and dry ballast."
    if content.configuration.points_ends or content.layout is not None:
        yield "Legs through points are left out: ask for a bonding proof of the layout."
    if content.circuit_kind is CircuitKind.AUDIO_FREQUENCY:
        yield "Tuning units put nothing across the rails beyond what feed and receiver are registered with."
    if content.circuit_kind is CircuitKind.AC_DOUBLE_RAIL:
        yield "Impedance bonds are sound, not saturated by traction current."
