"""Bonding proofs on the wire; the layout is the register's own type.

What all calculations share is in `circuits`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any

from pydantic import ConfigDict, StringConstraints, model_validator

from service.api.schemas.base import Answer, Name, Request
from service.api.schemas.circuits import Phasor, SomeOhm, Stated, number, phasor
from service.api.schemas.examples import shown
from service.application.layouts import Layout

if TYPE_CHECKING:
    from service.electrical.bonding import Fault, Proof

_EXAMPLE: dict[str, Any] = {
    "layout": {
        "frequency_hz": 0,
        "loop_ohm_per_km": [0.0578, 0],
        "ballast_ohm_km": 10,
        "rail_to_earth_ohm_km": None,
        "legs": [{"name": "a", "start": ["f1", "f2"], "end": ["r1", "r2"], "length_m": 1000}],
        "bonds": [],
        "joints": [],
        "feed": {"across": ["f1", "f2"], "emf_v": 10, "series_ohm": [7.2, 0]},
        "relay": {"across": ["r1", "r2"], "impedance_ohm": [20, 0], "pick_up_v": 1.62, "drop_away_v": 1.1},
    },
    "shunt_ohm": 0.5,
}
"""Plain line in which poor ballast hides a broken rail."""

FaultName = Annotated[str, StringConstraints(min_length=1, max_length=50)]


class ProofSent(Request):
    """A layout, or in its place a depot and the name of a section whose layout is registered.

    With `first_fault`, a bond's or joint's name or `leg/rail1`, every second fault after that one.
    """

    model_config = ConfigDict(json_schema_extra={"examples": [_EXAMPLE]})

    layout: Layout | None = None
    depot: Name | None = None
    section: Name | None = None
    shunt_ohm: SomeOhm
    first_fault: FaultName | None = None

    @model_validator(mode="after")
    def _one_of_both(self) -> ProofSent:
        named = (self.depot is not None, self.section is not None)
        if named not in ((True, True), (False, False)) or named[0] is (self.layout is not None):
            raise ValueError("give a layout, or a depot and one of its sections in its place")
        return self


class StretchAnswer(Answer):
    """Where a train would go undetected, from the leg's start."""

    leg: str
    from_m: float
    to_m: float


class FaultAnswer(Answer):
    """One fault: the relay with the figures as given (a rail opened at its middle), and at its worst.

    `worst_relay_v` is over the ranges and, for a rail, over every place, `worst_position_m` from the leg's
    start. `revealed`: the relay releases even so.
    """

    relay_v: Phasor
    worst_relay_v: Phasor
    worst_position_m: float | None
    revealed: bool
    undetected_stretches: list[StretchAnswer]


class ProofAnswer(Stated):
    """The sound layout's relay, every bond and `leg/rail1`, `leg/rail2` opened, every joint shorted."""

    model_config = ConfigDict(json_schema_extra=shown("bonding-proof"))

    relay_v: Phasor
    opened: dict[str, FaultAnswer]
    shorted: dict[str, FaultAnswer]


def proof_values(found: Proof) -> dict[str, Any]:
    """The members of a proof."""
    return {
        "relay_v": phasor(found.relay_v),
        "opened": {name: _fault(fault) for name, fault in found.opened.items()},
        "shorted": {name: _fault(fault) for name, fault in found.shorted.items()},
    }


def _fault(found: Fault) -> FaultAnswer:
    return FaultAnswer(
        relay_v=phasor(found.relay_v),
        worst_relay_v=phasor(found.worst_relay_v),
        worst_position_m=None if found.worst_position_m is None else number(found.worst_position_m),
        revealed=found.revealed,
        undetected_stretches=[
            StretchAnswer(leg=one.leg, from_m=number(one.from_m), to_m=number(one.to_m))
            for one in found.undetected_stretches
        ],
    )
