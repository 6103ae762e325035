"""Traction current in the rails of a circuit: how it divides, and what it puts across the relay.

Normal and fault current are asked apart. The working is in `electrical`; limits come from the caller or
are the relay's own drop-away.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from sqlalchemy.engine import Connection

from service.application import sections
from service.application.circuit_cases import Cases, pointed
from service.electrical import traction
from service.electrical.chain import shunt
from service.electrical.changes import with_element
from service.electrical.circuit import EquippedCircuit, OperatingPoint, PlainCircuit, operating_point
from service.electrical.traction import RailBalance, Train
from service.errors import Fault, NoAnswerError, NotAcceptableError

TRAINS: tuple[Train, ...] = ("none", "feed_end", "relay_end")

BALANCE_MODEL = "Ohm's law over equal lengths of two rails; a bond's ampere-turns are (N/2)(I1 - I2)."
BALANCE_ASSUMPTIONS = (
    "Both drops were read at one moment, over lengths without joints or connections.",
    "Both rails have the impedance given, at the traction frequency.",
)

_UNKNOWN = 1.0
"""Stands for what was not stated of a bond; what rests on it is not answered."""


@dataclass(frozen=True, slots=True)
class Drops:
    """Two voltage drops over equal lengths of rail, and what is known of the bond."""

    drop_1_v: float
    drop_2_v: float
    length_m: float
    rail_ohm_per_km: float
    bond_turns: float | None
    saturation_ampere_turns: float | None


@dataclass(frozen=True, slots=True)
class Balance:
    """How the current divides; what rests on an unknown bond is None."""

    rails: RailBalance
    ampere_turns: float | None
    saturation_margin: float | None


@dataclass(frozen=True, slots=True)
class Traction:
    """Currents along the rails [A], what they drop, and what the relay may see of it [V].

    `limit_v` None is the relay's own drop-away.
    """

    normal_a: float
    fault_a: float | None
    rail_ohm_per_km: complex
    axle_ohm: float
    limit_v: float | None
    upto_m: float


@dataclass(frozen=True, slots=True)
class Disturbance:
    """What one current does: volts at the coil by where the train stands, and how long a circuit bears it.

    `longest_m` None: over the limit on the shortest circuit looked at.
    """

    relay_v: Mapping[Train, complex]
    under_limit: bool
    longest_m: float | None


@dataclass(frozen=True, slots=True)
class Interference:
    """Both currents against one limit, and the largest current that keeps under it."""

    limit_v: float
    normal: Disturbance
    fault: Disturbance | None
    largest_current_a: float


def balance(drops: Drops) -> Balance:
    """How the return current divides between two rails.

    Raises
    ------
    NotAcceptableError
        A value that no rail or bond has.
    NoAnswerError
        No current in either rail.
    """
    with pointed(""):
        found = traction.rail_balance(
            drops.drop_1_v,
            drops.drop_2_v,
            drops.length_m,
            drops.rail_ohm_per_km,
            _UNKNOWN if drops.bond_turns is None else drops.bond_turns,
            _UNKNOWN if drops.saturation_ampere_turns is None else drops.saturation_ampere_turns,
        )
    turns = None if drops.bond_turns is None else float(found.ampere_turns)
    margin = (
        None if turns is None or drops.saturation_ampere_turns is None else float(found.saturation_margin)
    )
    return Balance(found, turns, margin)


def registered_turns(connection: Connection, depot: str, section: str) -> float | None:
    """Turns of a section's impedance bonds; None where its record says none.

    Raises
    ------
    NotFoundError
        No such section.
    """
    equipment = sections.get(connection, depot, section).content.equipment
    bonds = (getattr(equipment, end, None) for end in ("feed_bond", "relay_bond"))
    return next((float(bond.turns) for bond in bonds if bond is not None and bond.turns is not None), None)


def saturated(circuit: PlainCircuit, bond_ohm: complex) -> dict[str, OperatingPoint]:
    """The relay with sound bonds (`sound`), and with the one or the other saturated to `bond_ohm`.

    Raises
    ------
    NotAcceptableError
        The circuit has no bonds, or that is no impedance.
    """
    if not isinstance(circuit, EquippedCircuit) or not any(
        one.name == "feed bond" for one in circuit.feed_end
    ):
        fault = Fault("not_physical", "the section has no impedance bonds", "/saturated_bond_ohm")
        raise NotAcceptableError("No real circuit has such a value.", (fault,))
    with pointed("/saturated_bond_ohm", whole=True):
        two_port = shunt(bond_ohm)
    found = {"sound": operating_point(circuit)}
    for name in ("feed bond", "relay bond"):
        found[name.replace(" ", "_")] = operating_point(with_element(circuit, name, two_port))
    return found


def interference(cases: Cases, asked: Traction) -> tuple[Interference, Interference | None]:
    """Nominal interference, and that of the occupied case.

    Raises
    ------
    NotAcceptableError
        A value that no circuit has.
    NoAnswerError
        The current puts nothing across the relay.
    """
    worst = cases.worst()
    with pointed(""):
        return _interference(cases.nominal, asked), None if worst is None else _interference(worst[1], asked)


def _interference(circuit: PlainCircuit, asked: Traction) -> Interference:
    limit_v = float(circuit.relay.drop_away_v) if asked.limit_v is None else asked.limit_v
    largest_a = min(
        float(traction.largest_current(circuit, asked.rail_ohm_per_km, train, asked.axle_ohm, limit_v))
        for train in TRAINS
    )
    normal = _disturbance(circuit, asked, asked.normal_a, limit_v)
    fault = None if asked.fault_a is None else _disturbance(circuit, asked, asked.fault_a, limit_v)
    return Interference(limit_v, normal, fault, largest_a)


def _disturbance(circuit: PlainCircuit, asked: Traction, current_a: float, limit_v: float) -> Disturbance:
    relay_v: dict[Train, complex] = {}
    lengths_m: list[float] = []
    for train in TRAINS:
        rails = (current_a, asked.rail_ohm_per_km, train, asked.axle_ohm)
        relay_v[train] = complex(traction.interference(circuit, *rails))
        try:
            lengths_m.append(traction.longest_immune(circuit, *rails, limit_v, asked.upto_m))
        except NoAnswerError:  # over the limit however short
            lengths_m.append(-math.inf)
    longest_m = min(lengths_m)
    return Disturbance(
        relay_v, max(map(abs, relay_v.values())) <= limit_v, None if longest_m < 0 else longest_m
    )
