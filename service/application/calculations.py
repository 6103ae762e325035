"""What a circuit does: its operating point, its shunt limits, and both over the seasons.

Nominal and worst case side by side where a spread is known: of the two worst cases each answer takes the
one that bears on it. Circuits come from `circuits`; how to set a feed is in `feed_settings`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from service.application.circuit_cases import Cases, pointed
from service.electrical import season as seasons
from service.electrical.circuit import OperatingPoint, PlainCircuit, Shunt, operating_point
from service.electrical.power import Stage, rail_voltage, stages
from service.electrical.relay import VaneRelay
from service.electrical.season import Season
from service.electrical.shunt import ShuntLimits, lifting_shunts, shunt_limits

_PLACES = 11
"""Places along the track at which the rails' voltage is given."""

_LIFTING_PLACES = 101


@dataclass(frozen=True, slots=True)
class Point:
    """An operating point, element by element; `rails` is (place, voltage) along the track."""

    at: OperatingPoint
    elements: tuple[Stage, ...]
    rails: tuple[tuple[float, complex], ...]


@dataclass(frozen=True, slots=True)
class Lifting:
    """Shunts that would pick up a relay that is down with no train, where their range is widest."""

    position_m: float
    from_ohm: float
    to_ohm: float


@dataclass(frozen=True, slots=True)
class Limits:
    """Shunt limits; `lifting` None where no shunt lifts the relay."""

    limits: ShuntLimits
    lifting: Lifting | None


def point(cases: Cases, shunt: Shunt | None) -> tuple[Point, Point | None]:
    """Nominal and worst operating point: the clear case with no shunt, the occupied one with a shunt.

    Raises
    ------
    NotAcceptableError
        A shunt outside the section or of negative resistance.
    NoAnswerError
        A shunt inside a tuned zone, or a degenerate circuit.
    """
    worst = cases.worst()
    with pointed(""):
        nominal = _point(cases.nominal, shunt)
        return nominal, None if worst is None else _point(worst[0] if shunt is None else worst[1], shunt)


def limits(cases: Cases) -> tuple[Limits, Limits | None]:
    """Nominal shunt limits and those of the occupied case.

    Raises
    ------
    NoAnswerError
        A degenerate circuit.
    """
    worst = cases.worst()
    return _limits(cases.nominal), None if worst is None else _limits(worst[1])


def season(
    cases: Cases, wet_ohm_km: float, dry_ohm_km: float, minimum_shunt_ohm: float
) -> tuple[Season, Season | None]:
    """Nominal and worst season: the clear case for what the relay does, the occupied for its shunt.

    Raises
    ------
    NotAcceptableError
        A range upside down, or a minimum that is no resistance.
    NoAnswerError
        A degenerate circuit.
    """
    worst = cases.worst()
    with pointed(""):
        nominal = seasons.season(cases.nominal, wet_ohm_km, dry_ohm_km, minimum_shunt_ohm)
        if worst is None:
            return nominal, None
        clear, occupied = (seasons.season(case, wet_ohm_km, dry_ohm_km, minimum_shunt_ohm) for case in worst)
    shunted = replace(clear, drop_shunt_ohm=occupied.drop_shunt_ohm, shunts=occupied.shunts)
    return nominal, shunted


def _point(circuit: PlainCircuit, shunt: Shunt | None) -> Point:
    first_m, last_m = circuit.reach_m
    places_m = np.linspace(float(first_m), float(last_m), _PLACES)
    volts = rail_voltage(circuit, places_m, shunt)
    rails = tuple(zip(places_m.tolist(), volts.tolist(), strict=True))
    return Point(operating_point(circuit, shunt), stages(circuit, shunt), rails)


def _limits(circuit: PlainCircuit) -> Limits:
    found = shunt_limits(circuit)
    lifting = None
    if isinstance(circuit.relay, VaneRelay) and bool(found.not_picked_up):
        first_m, last_m = circuit.reach_m
        places_m = np.linspace(float(first_m), float(last_m), _LIFTING_PLACES)
        low, high = lifting_shunts(circuit, places_m)
        at = int(np.argmax(high - low))
        if high[at] > 0 and math.isfinite(high[at]):
            lifting = Lifting(float(places_m[at]), float(low[at]), float(high[at]))
    return Limits(found, lifting)
