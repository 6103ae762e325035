"""Rail balance and interference on the wire.

What all calculations share is in `circuits`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import ConfigDict, Field, RootModel, model_validator

from service.api.schemas.base import Answer, Name, Request
from service.api.schemas.calculations import RelayWord, relay_word
from service.api.schemas.circuits import (
    Ampere,
    AskedWithSpread,
    Metre,
    Phasor,
    SomeOhm,
    Stated,
    Volt,
    number,
    phasor,
)
from service.api.schemas.examples import shown
from service.application.equipment import Impedance

if TYPE_CHECKING:
    from service.application.traction_currents import Balance, Disturbance, Drops, Interference, Traction
    from service.electrical.circuit import OperatingPoint

Drop = Annotated[float, Field(ge=0, le=1e4)]
Turns = Annotated[float, Field(ge=1, le=1e4)]
AmpereTurns = Annotated[float, Field(ge=1e-3, le=1e7)]


class BalanceSent(Request):
    """Two voltage drops over equal, joint-free lengths of both rails at one moment.

    Bond members may be left out. A section with impedance bonds gives their turns, and with
    `saturated_bond_ohm`, the impedance that is left of a saturated bond, what that does to its relay.
    """

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "drop_1_v": 0.0525,
                    "drop_2_v": 0.0475,
                    "length_m": 5,
                    "rail_ohm_per_km": 0.035,
                    "bond_turns": 10,
                    "saturation_ampere_turns": 600,
                }
            ]
        }
    )

    depot: Name | None = None
    section: Name | None = None
    drop_1_v: Drop
    drop_2_v: Drop
    length_m: Metre
    rail_ohm_per_km: SomeOhm
    bond_turns: Turns | None = None
    saturation_ampere_turns: AmpereTurns | None = None
    saturated_bond_ohm: Impedance | None = None

    @model_validator(mode="after")
    def _both_or_neither(self) -> BalanceSent:
        if (self.depot is None) is not (self.section is None):
            raise ValueError("give a depot and one of its sections, or neither")
        if self.saturated_bond_ohm is not None and self.section is None:
            raise ValueError("a saturated bond is that of a registered section")
        return self

    def drops(self, registered_turns: float | None) -> Drops:
        """What is asked of the application."""
        from service.application.traction_currents import Drops

        return Drops(
            self.drop_1_v,
            self.drop_2_v,
            self.length_m,
            self.rail_ohm_per_km,
            registered_turns if self.bond_turns is None else self.bond_turns,
            self.saturation_ampere_turns,
        )


class BondAnswer(Answer):
    """The relay with a bond as named."""

    relay_v: Phasor
    relay_state: RelayWord


class SaturatedAnswer(Answer):
    """The relay with sound bonds, and with the one or the other saturated."""

    sound: BondAnswer
    feed_bond: BondAnswer
    relay_bond: BondAnswer


class BalanceAnswer(Stated):
    """How the return current divides: a limit names whether it means the share of the total or of the mean.

    `ampere_turns` is (N/2)(I1 - I2) of the bond, `saturation_margin` 1 less its share of those at which
    the bond saturates.
    """

    model_config = ConfigDict(json_schema_extra=shown("rail-balance"))

    rail_1_a: float
    rail_2_a: float
    difference_a: float
    of_total: float
    of_mean: float
    ampere_turns: float | None
    saturation_margin: float | None
    saturated: SaturatedAnswer | None


class InterferenceSent(AskedWithSpread):
    """A circuit with its impedances at the interfering frequency, 0 for DC stray, and traction current.

    `normal_a` and `fault_a` run in the rail that carries the return current, all of it where a bond that
    shares it is broken; in a double-rail circuit they are the difference of both rails' currents.
    `rail_ohm_per_km` is what one ampere in that rail drops around the loop. `limit_v` null is the relay's
    drop-away.
    """

    model_config = ConfigDict(
        json_schema_extra={
            "examples": [
                {
                    "circuit": {
                        "frequency_hz": 50,
                        "feed": {"emf_v": 1, "series_ohm": [5, 0]},
                        "line": {"length_m": 450, "loop_ohm_per_km": [0.72, 0], "ballast_ohm_km": None},
                        "relay": {"impedance_ohm": [9000, 0], "pick_up_v": 1.4, "drop_away_v": 0.95},
                    },
                    "normal_a": 300,
                    "fault_a": None,
                    "rail_ohm_per_km": [0.36, 0],
                    "axle_ohm": 0.0251,
                    "limit_v": 50,
                    "upto_m": 2000,
                }
            ]
        }
    )

    normal_a: Ampere
    fault_a: Ampere | None = None
    rail_ohm_per_km: Impedance
    axle_ohm: SomeOhm
    limit_v: Volt | None = None
    upto_m: Metre

    def traction(self) -> Traction:
        """What is asked of the application."""
        from service.application.traction_currents import Traction

        return Traction(
            self.normal_a,
            self.fault_a,
            complex(*self.rail_ohm_per_km),
            self.axle_ohm,
            self.limit_v,
            self.upto_m,
        )


class TrainsAnswer(Answer):
    """Volts at the coil by where the train stands; `none`: outside the section."""

    none: Phasor
    feed_end: Phasor
    relay_end: Phasor


class DisturbanceAnswer(Answer):
    """What one current does; `longest_m` null: over the limit on the shortest circuit looked at."""

    relay_v: TrainsAnswer
    under_limit: bool
    longest_m: float | None


class InterferenceValues(Answer):
    """Normal and fault current against one limit, and the largest current that keeps under it."""

    limit_v: float
    normal: DisturbanceAnswer
    fault: DisturbanceAnswer | None
    largest_current_a: float


class InterferenceAnswer(InterferenceValues, Stated):
    """Interference with a circuit as it stands."""


class InterferenceCasesAnswer(Stated):
    """Nominal, and the occupied case."""

    nominal: InterferenceValues
    worst_case: InterferenceValues


class InterferenceReply(RootModel[InterferenceAnswer | InterferenceCasesAnswer]):
    """As it stands, or with its worst case beside it."""

    model_config = ConfigDict(json_schema_extra=shown("interference"))


def balance_values(found: Balance) -> dict[str, Any]:
    """The members of a rail balance."""
    names: tuple[Literal["rail_1_a", "rail_2_a", "difference_a", "of_total", "of_mean"], ...]
    names = ("rail_1_a", "rail_2_a", "difference_a", "of_total", "of_mean")
    rails = {name: number(getattr(found.rails, name)) for name in names}
    return rails | {"ampere_turns": found.ampere_turns, "saturation_margin": found.saturation_margin}


def saturated_answer(found: dict[str, OperatingPoint]) -> SaturatedAnswer:
    """From operating points by name."""
    bonds = {
        name: BondAnswer(relay_v=phasor(point.relay_v), relay_state=relay_word(point.relay_state))
        for name, point in found.items()
    }
    return SaturatedAnswer.model_validate(bonds)


def interference_values(found: Interference) -> InterferenceValues:
    """From the application's value."""
    return InterferenceValues(
        limit_v=found.limit_v,
        normal=_disturbance(found.normal),
        fault=None if found.fault is None else _disturbance(found.fault),
        largest_current_a=number(found.largest_current_a),
    )


def _disturbance(found: Disturbance) -> DisturbanceAnswer:
    trains = {train: phasor(volts) for train, volts in found.relay_v.items()}
    return DisturbanceAnswer(
        relay_v=TrainsAnswer.model_validate(trains), under_limit=found.under_limit, longest_m=found.longest_m
    )
