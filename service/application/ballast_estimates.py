"""Ballast of a circuit from what was read at both its ends, and the drop-away a shunt test implies.

Which readings serve DC and which AC is decided here, the working is in `electrical`. Readings come from
the caller, not from visits.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from service.application.circuit_cases import pointed
from service.electrical.changes import with_ballast
from service.electrical.circuit import PlainCircuit, Shunt
from service.electrical.estimate import (
    BothEnds,
    Reading,
    ballast_from_readings,
    currents_from_voltages,
    exact_pair,
    working_drop_away,
)
from service.electrical.fit import Doubt, Sight, fit
from service.errors import Fault, NoAnswerError, NotAcceptableError


@dataclass(frozen=True, slots=True)
class Readings:
    """Rail voltages at both ends, and the currents into the rails and out of them where measured."""

    feed_v: Reading
    relay_v: Reading
    feed_a: Reading | None
    relay_a: Reading | None


@dataclass(frozen=True, slots=True)
class Trust:
    """Relative standard uncertainty of the circuit's own values; None where nothing is said of it.

    `fitted` is what an AC circuit is fitted with, the others are for DC.
    """

    loop: float | None
    feed: float | None
    relay: float | None
    fitted: Doubt | None


@dataclass(frozen=True, slots=True)
class Exact:
    """Rail impedance and ballast together; None with the reason where the readings cannot tell them."""

    pair: tuple[float, float] | None
    reason: str | None


@dataclass(frozen=True, slots=True)
class Ballast:
    """Ballast [ohm·km], its relative standard uncertainty, and in DC two other ways to it.

    `working_drop_away_v` is None where no drop shunt was measured.
    """

    ballast_ohm_km: float
    relative_u: float
    handbook_ohm_km: float | None
    exact: Exact | None
    working_drop_away_v: float | None


def ballast(circuit: PlainCircuit, readings: Readings, trust: Trust, measured: Shunt | None) -> Ballast:
    """Ballast from one moment's readings; `measured` is a drop shunt that was measured then.

    Raises
    ------
    NotAcceptableError
        A reading that cannot be, or one that is needed and not given, with a pointer.
    NoAnswerError
        The readings are ill-conditioned for the question.
    """
    dc = float(circuit.frequency_hz) == 0
    faults = tuple(_dc_faults(readings, trust) if dc else _ac_faults(circuit, readings, trust))
    if faults:
        raise NotAcceptableError("The ballast cannot be told from what was sent.", faults)
    found = _dc(circuit, readings, trust) if dc else _ac(circuit, readings, trust)
    if measured is None:
        return found
    with pointed("/drop_shunt"):
        worn = working_drop_away(
            with_ballast(circuit, found.ballast_ohm_km), measured.position_m, measured.ohm
        )
    return replace(found, working_drop_away_v=float(worn))


def _dc_faults(readings: Readings, trust: Trust) -> Iterator[Fault]:
    if trust.loop is None:
        yield Fault("missing", "how well the rails' impedance is known must be given", "/loop_relative_u")
    for end, known in (("feed", trust.feed), ("relay", trust.relay)):
        if known is None and getattr(readings, f"{end}_a") is None:
            reason = f"needed where the current at the {end} end is not measured"
            yield Fault("missing", reason, f"/{end}_relative_u")
    if trust.fitted is not None:
        yield Fault("not_used", "a DC circuit is not fitted", "/doubt")


def _ac_faults(circuit: PlainCircuit, readings: Readings, trust: Trust) -> Iterator[Fault]:
    if trust.fitted is None:
        yield Fault("missing", "an AC circuit is fitted, its own values in doubt", "/doubt")
    if readings.relay_a is not None:
        yield Fault("not_used", "a fit has no use for this current", "/readings/relay_a")
    for name in ("loop", "feed", "relay"):
        if getattr(trust, name) is not None:
            yield Fault("not_used", "of an AC circuit doubt says this", f"/{name}_relative_u")
    if not math.isfinite(float(circuit.line.ballast_ohm_km)):
        yield Fault("missing", "a fit begins at some ballast", "/circuit/line/ballast_ohm_km")


def _dc(circuit: PlainCircuit, readings: Readings, trust: Trust) -> Ballast:
    length_m, loop = float(circuit.line.length_m), float(complex(circuit.line.loop_ohm_per_km).real)
    assert trust.loop is not None
    # Where next to nothing passes the line, the square of a cosh overflows under a term that is then nothing.
    with pointed("/readings"), np.errstate(over="ignore"):
        ends = _both_ends(circuit, readings, trust)
        found = ballast_from_readings(ends, length_m, loop, trust.loop)
        try:
            exact = Exact(tuple(float(value) for value in exact_pair(ends, length_m)), None)  # type: ignore[arg-type]
        except NoAnswerError as error:
            exact = Exact(None, error.reason)
    return Ballast(
        float(found.ballast_ohm_km), float(found.relative_u), float(found.handbook_ohm_km), exact, None
    )


def _both_ends(circuit: PlainCircuit, readings: Readings, trust: Trust) -> BothEnds:
    """The readings, currents that were not measured derived from the feed's and the relay's resistance."""
    feed_a, relay_a = readings.feed_a, readings.relay_a
    if feed_a is not None and relay_a is not None:
        return BothEnds(readings.feed_v, feed_a, readings.relay_v, relay_a)
    derived = currents_from_voltages(
        circuit, readings.feed_v, readings.relay_v, trust.feed or 0.0, trust.relay or 0.0
    )
    return replace(derived, feed_a=feed_a or derived.feed_a, relay_a=relay_a or derived.relay_a)


def _ac(circuit: PlainCircuit, readings: Readings, trust: Trust) -> Ballast:
    """By size alone, every value of the circuit in some doubt."""
    assert trust.fitted is not None
    sight = Sight(
        relay_end_rail_v=readings.relay_v, feed_end_rail_v=readings.feed_v, feed_current_a=readings.feed_a
    )
    with pointed("/readings"):
        found = fit(circuit, sight, trust.fitted)
    if not bool(found.settled):
        raise NoAnswerError("not_settled", "no circuit near the one given fits these readings")
    u = math.sqrt(float(found.covariance[..., 0, 0]))
    return Ballast(float(found.circuit.line.ballast_ohm_km), u, None, None, None)
